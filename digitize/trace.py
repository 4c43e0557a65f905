"""The path of each trace: a pen line whose own stroke reproduces the ink.

The way of each trace through the ink gives the edges of its stroke; those, the pen taken off, are
the start of a fit of the pen line itself. The strokes of all other traces are drawn beside it, so
that where two cross, or where the next column begins, each has to explain only its own ink.
"""

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from digitize.course import BRIDGE_MM, Course, begin, cut_out, filled, fit, lay, placed
from digitize.dropout import row_error_px
from digitize.fit import Line
from digitize.ink import Ink
from digitize.layout import Layout
from digitize.nib import find_pen, refine_pen
from digitize.overprint import hide_names
from digitize.pen import Pen
from digitize.settle import settle
from digitize.sheet import Raster
from digitize.tremor import unsure_of_tremor
from digitize.uncross import uncross
from digitize.ways import Routes, Way, find_routes, to_ways

_SAMPLE = 4  # traces on which the pen is refined
_NOISE_FLOOR = 0.02  # of coverage: pen pressure, paper fibre, 8-bit levels


@dataclass(frozen=True, eq=False)
class Stroke:
    """The pen's way through one panel, in millimetres of paper.

    `x_mm`, `y_mm`, `sigma_mm` are (n,): x evenly spaced and increasing, y downward, sigma the
    standard error of y; y and sigma are NaN where ink is hidden or missing. `unexplained` is the
    share of the panel's ink that the redrawn stroke does not reproduce. `notes` gives the reasons
    for gaps, in words.
    """

    x_mm: np.ndarray
    y_mm: np.ndarray
    sigma_mm: np.ndarray
    pen_mm: float  # estimated pen width
    unexplained: float
    notes: tuple[str, ...] = ()
    blur_mm: tuple[float, float] = (0.0, 0.0)  # of the ink, standard deviation across and down
    ink_gain: float = 1.0  # density in the middle of a full stroke
    tremor_mm: np.ndarray | float = 0.0  # how far each edge stands out for tremor


def trace_panels(ink: Ink, layout: Layout) -> tuple[Stroke, ...]:
    """Trace every panel of a page.

    Parameters
    ----------
    ink : Ink
        Density of what was printed over the grid.
    layout : Layout
        Where each panel stands; its printing (marks, words) is kept off the path.

    Returns
    -------
    tuple of Stroke
        One per panel, in the order of `layout.panels`.
    """
    ink = hide_names(ink, layout.names)
    places = [(panel.box.left_mm, panel.box.right_mm) for panel in layout.panels]
    routes = find_routes(ink, layout)
    ways = to_ways(routes, routes.paths, places, ink.raster)
    pen = find_pen(ink, ways)
    courses = [begin(way, *place, pen, ink) for way, place in zip(ways, places, strict=True)]
    pen, noise = _refined(pen, ways, courses, ink)
    paths = settle(routes, ink, pen, noise)
    ways = to_ways(routes, paths, places, ink.raster)
    courses = [begin(way, *place, pen, ink) for way, place in zip(ways, places, strict=True)]
    lines: dict[int, Line] = {}
    crossed = {k for k, way in enumerate(ways) if way.shared.any()}
    _fit_all(range(len(ways)), lines, ways, courses, pen, ink, noise)
    if crossed:
        courses, changed = uncross(courses, _known(routes, ink.raster), pen.width_px)
        _fit_all(sorted(crossed | changed), lines, ways, courses, pen, ink, noise)
    return tuple(
        _stroke(k, lines.get(k), ways, courses, pen, ink) for k in range(len(layout.panels))
    )


def _fit_all(
    which: Iterable[int],
    lines: dict[int, Line],
    ways: tuple[Way, ...],
    courses: list[Course],
    pen: Pen,
    ink: Ink,
    noise: float,
) -> None:
    """Fit one line after another beside all others as they then stand, in place."""
    for k in which:
        if courses[k].inked:
            cut = cut_out(k, ways, courses, pen, ink, noise)
            lines[k] = fit(cut, courses[k], pen)
            courses[k] = placed(lines[k], cut, courses[k])


def _known(routes: Routes, raster: Raster) -> list[np.ndarray]:
    """Columns of the raster in which each trace stands beyond doubt."""
    x = raster.col(routes.field.x_mm)
    return [x[anchor[0] >= 0] for anchor in routes.anchors]


def redraw(strokes: tuple[Stroke, ...], raster: Raster, shape: tuple[int, int]) -> np.ndarray:
    """Density, float32 (rows, cols), that the strokes would leave on a raster."""
    image = np.zeros(shape, np.float32)
    px = raster.px_per_mm
    for stroke in strokes:
        blur_x_mm, blur_y_mm = stroke.blur_mm
        pen = Pen(stroke.pen_mm * px, blur_x_mm * px, blur_y_mm * px, stroke.ink_gain)
        course = Course(
            raster.col(stroke.x_mm), raster.row(stroke.y_mm), tremor=stroke.tremor_mm * px
        )
        lay(image, course, pen)
    return image


def _refined(pen: Pen, ways: tuple[Way, ...], courses: list[Course], ink: Ink) -> tuple[Pen, float]:
    """The pen, and the noise of the ink, from a first fit of the clearest traces."""
    noise = max(ink.noise, _NOISE_FLOOR)
    clear = [k for k, c in enumerate(courses) if np.isfinite(c.y).mean() > 0.9]
    clear.sort(key=lambda k: (ways[k].shared.sum(), len(courses[k].x), k))
    fits = []
    for k in clear[:_SAMPLE]:
        cut = cut_out(k, ways, courses, pen, ink, noise)
        line, x = fit(cut, courses[k], pen, rounds=1), courses[k].x
        fits.append((cut.view, line, x[0] - cut.col0, x[1] - x[0]))
    if not fits:
        return pen, noise
    pen, left = refine_pen(pen, fits)
    return pen, max(left, noise)


def _stroke(
    k: int, line: Line | None, ways: tuple[Way, ...], courses: list[Course], pen: Pen, ink: Ink
) -> Stroke:
    """Panel k in millimetres, with how much of its ink stays unexplained."""
    raster, px, course = ink.raster, ink.raster.px_per_mm, courses[k]
    missing = np.isnan(course.y)
    nib = pen.width_px / px, (pen.blur_x_px / px, pen.blur_y_px / px), pen.gain
    x_mm, y_mm = raster.x_mm(course.x), raster.y_mm(course.y)
    if line is None:
        return Stroke(x_mm, y_mm, y_mm.copy(), nib[0], 1.0, ("no ink in this panel",), *nib[1:])
    unsure_px = unsure_of_tremor(ways[k], course.x, filled(course.y), pen, px)
    sigma_px = np.hypot(line.sigma_px, unsure_px)
    if course.faded is not None:
        sigma_px = np.where(np.isnan(course.faded), sigma_px, row_error_px(ink))
    sigma_mm = np.where(missing, np.nan, sigma_px / px)
    notes = (f"no ink on the path for more than {BRIDGE_MM} mm",) if missing.any() else ()
    unexplained = _unexplained(k, ways, courses, pen, ink)
    return Stroke(x_mm, y_mm, sigma_mm, nib[0], unexplained, notes, *nib[1:], course.tremor / px)


def _unexplained(k: int, ways: tuple[Way, ...], courses: list[Course], pen: Pen, ink: Ink) -> float:
    """Share of the ink beside panel k's trace that all redrawn strokes together leave over."""
    cut = cut_out(k, ways, courses, pen, ink, 1.0)
    drawn = cut.view.other * pen.gain
    lay(drawn, courses[k], pen, cut.row0, cut.col0)
    row = np.arange(len(drawn))[:, None]
    near = (row >= cut.view.rows[0]) & (row < cut.view.rows[1]) & np.isfinite(cut.view.image)
    seen = np.clip(cut.view.image[near], 0, None)
    left = np.clip(seen - drawn[near], 0, None)
    return float(left.sum() / max(seen.sum(), 1e-9))

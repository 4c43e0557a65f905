"""The path of each trace: a pen line whose own stroke reproduces the ink.

The way of each trace through the ink gives the edges of its stroke; those, the pen taken off, are
the start of a fit of the pen line itself. The strokes of all other traces are drawn beside it, so
that where two cross, or where the next column begins, each has to explain only its own ink.
"""

from dataclasses import dataclass

import numpy as np
import scipy as sp

from digitize.fit import Line, View, fit_line, start_from_edges
from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.nib import find_pen, refine_pen
from digitize.pen import Pen, draw_line
from digitize.sheet import Raster
from digitize.ways import Way, find_ways

STEP_MM = 0.05  # 2 ms at 25 mm/s
_BRIDGE_MM = 0.4  # a longer gap in the ink stays a gap: 16 ms at 25 mm/s
_BESIDE_MM = 0.4  # ink of the last samples beyond the end of a panel: half a pen and its blur
_NEAR_MM = 0.4  # ink so far from the start must be explained
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


@dataclass(frozen=True, eq=False)
class _Course:
    """A line in pixels of the ink's raster; `y` is NaN where it has no ink."""

    x: np.ndarray
    y: np.ndarray


@dataclass(frozen=True, eq=False)
class _Cut:
    """A panel's cut-out of the page: where it lies, what the fit sees."""

    row0: int
    col0: int
    view: View


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
    ways = find_ways(ink, layout)
    pen = find_pen(ink, ways)
    courses = [_start(w, p, pen, ink) for w, p in zip(ways, layout.panels, strict=True)]
    pen, noise = _refined(pen, ways, courses, ink)
    lines: dict[int, Line] = {}
    crossed = [k for k, way in enumerate(ways) if way.shared.any()]
    for k in [*range(len(ways)), *crossed]:
        if np.isfinite(courses[k].y).any():
            cut = _cut(k, ways, courses, pen, ink, noise)
            lines[k] = _fit(cut, courses[k], pen)
            courses[k] = _placed(lines[k], cut, courses[k])
    return tuple(
        _stroke(k, lines.get(k), ways, courses, pen, ink) for k in range(len(layout.panels))
    )


def redraw(strokes: tuple[Stroke, ...], raster: Raster, shape: tuple[int, int]) -> np.ndarray:
    """Density, float32 (rows, cols), that the strokes would leave on a raster."""
    image = np.zeros(shape, np.float32)
    px = raster.px_per_mm
    for stroke in strokes:
        blur_x_mm, blur_y_mm = stroke.blur_mm
        pen = Pen(stroke.pen_mm * px, blur_x_mm * px, blur_y_mm * px, stroke.ink_gain)
        _lay(image, _Course(raster.col(stroke.x_mm), raster.row(stroke.y_mm)), pen)
    return image


def _lay(image: np.ndarray, course: _Course, pen: Pen, row0: int = 0, col0: int = 0) -> None:
    """Lay the ink of a course into an image whose corner is (row0, col0), in place."""
    reach = pen.width_px + 4 * pen.blur_x_px
    near = (course.x > col0 - reach) & (course.x < col0 + image.shape[1] + reach)
    y = np.where(near, course.y, np.nan)
    for part in np.ma.clump_unmasked(np.ma.masked_invalid(y)):
        if part.stop - part.start < 2:
            continue
        x = course.x[part]
        low = min(max(int(x[0] - col0 - reach), 0), image.shape[1])
        high = min(max(int(x[-1] - col0 + reach) + 2, 0), image.shape[1])
        if low < high:
            draw_line(image[:, low:high], y[part] - row0, x[0] - col0 - low, x[1] - x[0], pen)


def _start(way: Way, panel: PanelPlace, pen: Pen, ink: Ink) -> _Course:
    """First guess of a panel's line: midway between the bounds that the ink's edges give."""
    count = int((panel.box.right_mm - panel.box.left_mm) / STEP_MM + 1e-6) + 1
    x = ink.raster.col(panel.box.left_mm + STEP_MM * np.arange(count))
    inked = np.isfinite(way.edges[0])
    cols = way.col0 + np.arange(len(inked))
    if inked.sum() < 0.05 * len(inked):
        return _Course(x, np.full(count, np.nan))
    top, bottom = (np.interp(x, cols[inked], side[inked]) for side in way.edges)
    upper, lower = start_from_edges(top, bottom, x[1] - x[0], pen.width_px / 2)
    gap = max(round(_BRIDGE_MM * ink.raster.px_per_mm), 1)
    bare = sp.ndimage.binary_opening(~inked, np.ones(gap))
    y = (upper + lower) / 2
    y[np.interp(x, cols, bare.astype(float)) > 0.5] = np.nan
    return _Course(x, y)


def _refined(
    pen: Pen, ways: tuple[Way, ...], courses: list[_Course], ink: Ink
) -> tuple[Pen, float]:
    """The pen, and the noise of the ink, from a first fit of the clearest traces."""
    noise = max(ink.noise, _NOISE_FLOOR)
    clear = [k for k, c in enumerate(courses) if np.isfinite(c.y).mean() > 0.9]
    clear.sort(key=lambda k: (ways[k].shared.sum(), len(courses[k].x), k))
    fits = []
    for k in clear[:_SAMPLE]:
        cut = _cut(k, ways, courses, pen, ink, noise)
        line, x = _fit(cut, courses[k], pen), courses[k].x
        fits.append((cut.view, line, x[0] - cut.col0, x[1] - x[0]))
    if not fits:
        return pen, noise
    pen, left = refine_pen(pen, fits)
    return pen, max(left, noise)


def _cut(
    k: int, ways: tuple[Way, ...], courses: list[_Course], pen: Pen, ink: Ink, noise: float
) -> _Cut:
    """What panel k's fit sees: ink near its way, and the ink of all other strokes there."""
    way, px = ways[k], ink.raster.px_per_mm
    near = max(_NEAR_MM * px, 3 * pen.blur_y_px + 1)
    inked = np.isfinite(way.edges[0])
    cols = np.arange(len(inked))
    top, bottom = (np.interp(cols, cols[inked], side[inked]) for side in way.edges)
    margin = near + 2 * pen.width_px
    row0 = max(int(top.min() - margin), 0)
    row1 = min(int(bottom.max() + margin) + 1, len(ink.density))
    beside = round(_BESIDE_MM * px)
    before = min(beside, way.col0)
    after = min(beside, ink.density.shape[1] - way.col0 - len(inked))
    col0, col1 = way.col0 - before, way.col0 + len(inked) + after
    image = np.where(ink.hidden[row0:row1, col0:col1], np.nan, ink.density[row0:row1, col0:col1])
    image[:, np.pad(~inked, (before, after))] = np.nan
    other = np.zeros(image.shape, np.float32)
    full = Pen(pen.width_px, pen.blur_x_px, pen.blur_y_px)
    touched = [False, False]
    for m, course in enumerate(courses):
        if m != k and np.isfinite(course.y).any():
            touched[0] |= abs(course.x[-1] - courses[k].x[0]) < beside
            touched[1] |= abs(course.x[0] - courses[k].x[-1]) < beside
            _lay(other, course, full, row0, col0)
    # beyond an end where no other trace begins, what the ink means is unknown
    if not touched[0]:
        image[:, :before] = np.nan
    if not touched[1]:
        image[:, image.shape[1] - after :] = np.nan
    rows = np.stack([np.floor(top - near) - row0, np.ceil(bottom + near) + 1 - row0])
    rows = np.pad(np.clip(rows, 0, len(image)), ((0, 0), (before, after)), mode="edge")
    return _Cut(row0, col0, View(image.astype(np.float32), other, rows.astype(np.int64), noise))


def _fit(cut: _Cut, course: _Course, pen: Pen) -> Line:
    inked = np.isfinite(course.y)
    y = np.interp(course.x, course.x[inked], course.y[inked]) - cut.row0
    return fit_line(cut.view, y, course.x[0] - cut.col0, course.x[1] - course.x[0], pen)


def _placed(line: Line, cut: _Cut, course: _Course) -> _Course:
    """A fitted line in pixels of the page, with the gaps of its start."""
    return _Course(course.x, np.where(np.isnan(course.y), np.nan, line.y_px + cut.row0))


def _stroke(
    k: int, line: Line | None, ways: tuple[Way, ...], courses: list[_Course], pen: Pen, ink: Ink
) -> Stroke:
    """Panel k in millimetres, with how much of its ink stays unexplained."""
    raster, px, course = ink.raster, ink.raster.px_per_mm, courses[k]
    missing = np.isnan(course.y)
    nib = pen.width_px / px, (pen.blur_x_px / px, pen.blur_y_px / px), pen.gain
    x_mm, y_mm = raster.x_mm(course.x), raster.y_mm(course.y)
    if line is None:
        return Stroke(x_mm, y_mm, y_mm.copy(), nib[0], 1.0, ("no ink in this panel",), *nib[1:])
    sigma_mm = np.where(missing, np.nan, line.sigma_px / px)
    notes = ("no ink on the path for more than 0.4 mm",) if missing.any() else ()
    unexplained = _unexplained(k, ways, courses, pen, ink)
    return Stroke(x_mm, y_mm, sigma_mm, nib[0], unexplained, notes, *nib[1:])


def _unexplained(
    k: int, ways: tuple[Way, ...], courses: list[_Course], pen: Pen, ink: Ink
) -> float:
    """Share of the ink beside panel k's trace that all redrawn strokes together leave over."""
    cut = _cut(k, ways, courses, pen, ink, 1.0)
    drawn = cut.view.other * pen.gain
    _lay(drawn, courses[k], pen, cut.row0, cut.col0)
    row = np.arange(len(drawn))[:, None]
    near = (row >= cut.view.rows[0]) & (row < cut.view.rows[1]) & np.isfinite(cut.view.image)
    seen = np.clip(cut.view.image[near], 0, None)
    left = np.clip(seen - drawn[near], 0, None)
    return float(left.sum() / max(seen.sum(), 1e-9))

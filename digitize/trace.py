"""The path of each trace: a pen line whose own stroke reproduces the ink.

First a path of least cost finds the way of each trace through the ink at coarse resolution; the
edges of the ink along it, the pen taken off, are the start of the fit of the pen line itself.
"""

from dataclasses import dataclass, replace

import numpy as np
import scipy as sp
import skimage as ski

from digitize.fit import View, fit_line, start_from_edges
from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.path import cheapest_path, runs_along
from digitize.pen import Pen, draw_line
from digitize.sheet import Raster

STEP_MM = 0.05  # 2 ms at 25 mm/s
_REACH_MM = 45.0  # a trace may stray so far from its usual height: 4.5 mV at 10 mm/mV
_PATH_PX_PER_MM = 6.0  # two pixels across the thinnest common pen are enough for the path
_BRIDGE_MM = 0.4  # a longer gap in the ink stays a gap: 10 ms at 25 mm/s
_EDGE = 0.5  # density at the edge of a full stroke
_ENTRY_PER_MM = 0.2  # cost of starting away from the usual height of the trace


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
class _Start:
    """Where a panel's fit begins: a cut-out of the ink and the edges of the trace's ink in it."""

    image: np.ndarray  # NaN where hidden
    row0: int
    col0: int
    edges: np.ndarray  # (2, cols), NaN where there is no ink


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
    clear = _without_printing(ink, layout)
    starts = [_start(ink, clear, panel) for panel in layout.panels]
    pen = _pen_of(starts, ink)
    return tuple(
        _stroke(start, panel, pen, ink) for start, panel in zip(starts, layout.panels, strict=True)
    )


def redraw(strokes: tuple[Stroke, ...], raster: Raster, shape: tuple[int, int]) -> np.ndarray:
    """Density, float32 (rows, cols), that the strokes would leave on a raster."""
    image = np.zeros(shape, np.float32)
    for stroke in strokes:
        for part in _unbroken(stroke.y_mm):
            if part.stop - part.start < 2:
                continue
            pen = Pen(
                stroke.pen_mm * raster.px_per_mm,
                stroke.blur_mm[0] * raster.px_per_mm,
                stroke.blur_mm[1] * raster.px_per_mm,
                stroke.ink_gain,
            )
            x_px, y_px = raster.col(stroke.x_mm[part]), raster.row(stroke.y_mm[part])
            low = max(int(x_px[0] - 5 * pen.width_px), 0)
            high = min(int(x_px[-1] + 5 * pen.width_px) + 1, shape[1])
            draw_line(image[:, low:high], y_px, x_px[0] - low, x_px[1] - x_px[0], pen)
    return image


def _unbroken(values: np.ndarray) -> list[slice]:
    """Stretches without NaN."""
    return list(np.ma.clump_unmasked(np.ma.masked_invalid(values)))


def _without_printing(ink: Ink, layout: Layout) -> np.ndarray:
    """Density with words and marks made faint: a trace may still pass through their boxes."""
    clear = np.where(ink.hidden, 0, ink.density)
    for box in layout.words + layout.marks:
        rows = slice(*(max(round(ink.raster.row(y)), 0) for y in (box.top_mm, box.bottom_mm)))
        cols = slice(*(max(round(ink.raster.col(x)), 0) for x in (box.left_mm, box.right_mm)))
        clear[rows, cols] *= 0.5
    return clear


def _start(ink: Ink, clear: np.ndarray, panel: PanelPlace) -> _Start:
    raster = ink.raster
    rows, cols = ink.density.shape
    row0 = max(int(raster.row(panel.baseline_mm - _REACH_MM)), 0)
    row1 = min(int(raster.row(panel.baseline_mm + _REACH_MM)) + 1, rows)
    col0 = max(int(np.ceil(raster.col(panel.box.left_mm))), 0)
    col1 = min(int(raster.col(panel.box.right_mm)) + 1, cols)
    band = clear[row0:row1, col0:col1]
    factor = max(int(raster.px_per_mm // _PATH_PX_PER_MM), 1)
    coarse = ski.transform.downscale_local_mean(band, (factor, factor))
    bare = 1 - np.clip((coarse - 0.15) / 0.45, 0, 1).astype(np.float32)
    y_mm = raster.y_mm(row0 + (np.arange(len(bare)) + 0.5) * factor - 0.5)
    entry = _ENTRY_PER_MM * np.maximum(abs(y_mm - panel.baseline_mm) - 5, 0)
    span, _, _ = cheapest_path(bare, entry, raster.px_per_mm / factor)
    span = np.repeat(span, factor, axis=1)[:, : band.shape[1]] * factor
    span[1] += factor - 1
    image = np.where(ink.hidden, np.nan, ink.density)[row0:row1, col0:col1]
    edges = runs_along(np.ascontiguousarray(band), span, _EDGE, factor)
    return _Start(np.ascontiguousarray(image, np.float32), row0, col0, edges)


def _pen_of(starts: list[_Start], ink: Ink) -> Pen:
    """Width, blur and density of the pen, from the profile across level stretches."""
    offsets = np.arange(-8, 9)
    sums, counts = np.zeros(len(offsets) * 4), np.zeros(len(offsets) * 4)
    for start in starts:
        if not np.isfinite(start.edges).any():
            continue
        middle = start.edges.mean(axis=0)
        slope = np.abs(np.gradient(middle))
        thick = start.edges[1] - start.edges[0]
        level = (sp.ndimage.maximum_filter1d(slope, 7) < 0.15) & (thick < 1.3 * np.nanmedian(thick))
        cols = np.flatnonzero(level)
        rows = np.rint(middle[cols]).astype(int)
        inside = (rows > 8) & (rows < len(start.image) - 9)
        cols, rows = cols[inside], rows[inside]
        density = start.image[rows[:, None] + offsets, cols[:, None]]
        away = rows[:, None] + offsets - middle[cols, None]
        place = np.clip(((away + 8.5) * 4).astype(int), 0, len(sums) - 1)
        seen = np.isfinite(density)
        np.add.at(sums, place[seen], density[seen])
        np.add.at(counts, place[seen], 1)
    away = (np.arange(len(sums)) + 0.5) / 4 - 8.5
    used = counts > 20
    if used.sum() < 8:
        return Pen(0.35 * ink.raster.px_per_mm, 0.8, 0.8)
    profile, away = sums[used] / counts[used], away[used]

    def misfit(values: np.ndarray) -> np.ndarray:
        width, blur, gain = values
        edge = sp.special.ndtr((away + width / 2) / blur) - sp.special.ndtr(
            (away - width / 2) / blur
        )
        return gain * edge - profile

    px = ink.raster.px_per_mm
    fitted = sp.optimize.least_squares(
        misfit, (0.35 * px, 0.8, 1.0), bounds=((0.1 * px, 0.3, 0.5), (1.0 * px, 0.4 * px, 1.5))
    )
    width, blur, gain = fitted.x
    return Pen(float(width), float(blur), float(blur), float(gain))


def _stroke(start: _Start, panel: PanelPlace, pen: Pen, ink: Ink) -> Stroke:
    raster, px = ink.raster, ink.raster.px_per_mm
    count = int((panel.box.right_mm - panel.box.left_mm) / STEP_MM) + 1
    x_mm = panel.box.left_mm + STEP_MM * np.arange(count)
    x_px = raster.col(x_mm) - start.col0
    cols = np.arange(start.image.shape[1])
    inked = np.isfinite(start.edges[0])
    if inked.sum() < 0.05 * len(inked):
        empty = np.full(count, np.nan)
        return Stroke(x_mm, empty, empty.copy(), pen.width_px / px, 1.0, ("no ink in this panel",))
    edges = np.stack([np.interp(x_px, cols[inked], side[inked]) for side in start.edges])
    upper, lower = start_from_edges(edges[0], edges[1], x_px[1] - x_px[0], pen.width_px / 2)
    filled = np.stack([np.interp(cols, cols[inked], side[inked]) for side in start.edges])
    seen = np.stack([np.floor(filled[0] - 4), np.ceil(filled[1] + 5)])
    seen = np.clip(seen, 0, len(start.image)).astype(np.int64)
    image = start.image.copy()
    image[:, ~inked] = np.nan
    view = View(image, np.zeros_like(image), seen, max(ink.noise, 0.02))
    line = fit_line(view, (upper + lower) / 2, x_px[0], x_px[1] - x_px[0], pen)
    y_mm, sigma_mm = raster.y_mm(start.row0 + line.y_px), line.sigma_px / px
    bare = sp.ndimage.binary_opening(~inked, np.ones(max(round(_BRIDGE_MM * px), 1)))
    missing = np.interp(x_px, cols, bare.astype(float)) > 0.5
    y_mm[missing], sigma_mm[missing] = np.nan, np.nan
    notes = ("no ink on the path for more than 0.4 mm",) if missing.any() else ()
    stroke = Stroke(
        x_mm,
        y_mm,
        sigma_mm,
        pen.width_px / px,
        0.0,
        notes,
        (pen.blur_x_px / px, pen.blur_y_px / px),
        pen.gain,
    )
    return replace(stroke, unexplained=_unexplained(stroke, start, seen, raster))


def _unexplained(stroke: Stroke, start: _Start, seen: np.ndarray, raster: Raster) -> float:
    """Share of the ink beside the trace that the redrawn stroke leaves over."""
    rows, cols = start.image.shape
    local = Raster(raster.x_mm(start.col0), raster.y_mm(start.row0), raster.px_per_mm)
    drawn = redraw((stroke,), local, (rows, cols))
    row = np.arange(rows)[:, None]
    near = (row >= seen[0]) & (row < seen[1]) & np.isfinite(start.image)
    ink = np.clip(start.image[near], 0, None)
    return float(np.clip(start.image[near] - drawn[near], 0, None).sum() / max(ink.sum(), 1e-9))

"""The way of every trace on the page, so that no two need the same ink.

Each panel's path is searched alone at first. Where two paths run along the same ink, one of them
took a short cut: each is searched again while the ink on the other's path may be crossed but not
followed. In columns where the ink of two traces has run together, each keeps what lies about its
own path; open ends of the run belong to the path that is nearest to them.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.ink import Ink
from digitize.layout import Box, Layout, PanelPlace
from digitize.path import cheapest_path, run_at, sharp_edges

_REACH_MM = 45.0  # a trace may stray so far from its usual height: 4.5 mV at 10 mm/mV
_PX_PER_MM = 6.0  # two pixels across the thinnest common pen are enough for a path
_FAINT, _FULL = 0.15, 0.6  # densities of bare paper and of certain ink
_ENTRY_PER_MM = 0.2  # price of starting away from the usual height of the trace
_ENTRY_FREE_MM = 5.0
_TAKEN = 0.7  # price of following the ink of another trace, as a share of bare paper's
_HALF_PEN_MM = 0.25  # ink about a path that is surely its own
_SWEEPS = 2
EDGE = 0.5  # density at the edge of a full stroke


@dataclass(frozen=True, eq=False)
class Way:
    """Where one trace runs, in rows and columns of the ink's raster.

    `span` (2, cols) are the rows visited by the path in the columns from `col0` on; `edges`
    (2, cols) the top and bottom of the trace's ink there, NaN where there is none; `shared` (cols,)
    is True where that ink has run together with another trace's.
    """

    col0: int
    span: np.ndarray
    edges: np.ndarray
    shared: np.ndarray


def find_ways(ink: Ink, layout: Layout) -> tuple[Way, ...]:
    """Find the way of each panel's trace, in the order of `layout.panels`."""
    factor = max(int(ink.raster.px_per_mm // _PX_PER_MM), 1)
    clear = _without_printing(ink, layout.words + layout.marks)
    rows, cols = (n // factor for n in clear.shape)
    coarse = cv2.resize(
        clear[: rows * factor, : cols * factor], (cols, rows), interpolation=cv2.INTER_AREA
    )
    bare = 1 - np.clip((coarse - _FAINT) / (_FULL - _FAINT), 0, 1)
    paths = [_search(bare, bare, panel, ink, factor) for panel in layout.panels]
    half = round(_HALF_PEN_MM * ink.raster.px_per_mm / factor)
    for _ in range(_SWEEPS):
        again = [k for k in range(len(paths)) if _overlap(k, paths, half)]
        if not again:
            break
        for k in again:
            taken = bare.copy()
            for other in paths[:k] + paths[k + 1 :]:
                _mark(taken, other, half, _TAKEN)
            paths[k] = _search(bare, taken, layout.panels[k], ink, factor)
    full = [
        _enlarge(path, factor, panel, ink) for path, panel in zip(paths, layout.panels, strict=True)
    ]
    return tuple(_way(k, full, clear, ink.raster.px_per_mm, factor) for k in range(len(full)))


def _without_printing(ink: Ink, boxes: tuple[Box, ...]) -> np.ndarray:
    """Density with words and marks made faint: a trace may still pass through their boxes."""
    clear = np.where(ink.hidden, np.float32(0), ink.density)
    for box in boxes:
        rows = slice(*(max(round(ink.raster.row(y)), 0) for y in (box.top_mm, box.bottom_mm)))
        cols = slice(*(max(round(ink.raster.col(x)), 0) for x in (box.left_mm, box.right_mm)))
        clear[rows, cols] *= 0.5
    return clear


_Path = tuple[int, np.ndarray]  # first coarse column, and rows visited (2, cols)


def _search(bare: np.ndarray, ahead: np.ndarray, panel: PanelPlace, ink: Ink, factor: int) -> _Path:
    raster, px = ink.raster, ink.raster.px_per_mm / factor
    top = max(int(raster.row(panel.baseline_mm - _REACH_MM) / factor), 0)
    bottom = min(int(raster.row(panel.baseline_mm + _REACH_MM) / factor) + 1, bare.shape[0])
    left = max(int(raster.col(panel.box.left_mm) / factor), 0)
    right = min(int(raster.col(panel.box.right_mm) / factor) + 1, bare.shape[1])
    y_mm = raster.y_mm((np.arange(top, bottom) + 0.5) * factor - 0.5)
    entry = _ENTRY_PER_MM * np.maximum(abs(y_mm - panel.baseline_mm) - _ENTRY_FREE_MM, 0)
    cut = slice(top, bottom), slice(left, right)
    span, _, _ = cheapest_path(
        np.ascontiguousarray(bare[cut]), np.ascontiguousarray(ahead[cut]), entry, px
    )
    return left, span + top


def _mark(image: np.ndarray, path: _Path, half: int, value: float) -> None:
    """Raise `image` to `value` on the ink about a path, in place."""
    left, span = path
    row = np.arange(image.shape[0])[:, None]
    on = (row >= span[0] - half) & (row <= span[1] + half)
    part = image[:, left : left + span.shape[1]]
    part[on] = np.maximum(part[on], value)


def _overlap(k: int, paths: list[_Path], half: int) -> bool:
    """Whether path k shares rows with another path in some column."""
    left, span = paths[k]
    for m, (start, rows) in enumerate(paths):
        low, high = max(left, start), min(left + span.shape[1], start + rows.shape[1])
        if m == k or high - low < 3:
            continue
        mine, theirs = span[:, low - left : high - left], rows[:, low - start : high - start]
        if ((mine[0] <= theirs[1] + 2 * half) & (theirs[0] <= mine[1] + 2 * half)).any():
            return True
    return False


def _enlarge(path: _Path, factor: int, panel: PanelPlace, ink: Ink) -> _Path:
    """A coarse path in rows and columns of the ink's raster, from edge to edge of the panel."""
    left, span = path
    first = max(int(np.ceil(ink.raster.col(panel.box.left_mm))), 0)
    last = min(int(ink.raster.col(panel.box.right_mm)), ink.density.shape[1] - 1)
    at = np.clip(np.arange(first, last + 1) // factor - left, 0, span.shape[1] - 1)
    return first, np.stack([span[0, at] * factor, span[1, at] * factor + factor - 1])


def _way(k: int, paths: list[_Path], density: np.ndarray, px_per_mm: float, slack: int) -> Way:
    """The run of ink along path k, cut where it has run together with another path's."""
    left, span = paths[k]
    cols = span.shape[1]
    run = run_at(np.ascontiguousarray(density[:, left : left + cols]), span, EDGE, slack)
    low, high = run[0].astype(float), run[1].astype(float)
    half = _HALF_PEN_MM * px_per_mm
    shared = np.zeros(cols, bool)
    for m, (start, other) in enumerate(paths):
        a, b = max(left, start), min(left + cols, start + other.shape[1])
        if m == k or b - a < 3 * slack:
            continue
        mine, theirs = slice(a - left, b - left), other[:, a - start : b - start]
        together = (theirs[0] <= run[1, mine]) & (theirs[1] >= run[0, mine]) & (run[0, mine] >= 0)
        above = together & (theirs[0] < span[0, mine])
        below = together & (theirs[1] > span[1, mine])
        low[mine] = np.where(above, np.maximum(low[mine], span[0, mine] - half), low[mine])
        high[mine] = np.where(below, np.minimum(high[mine], span[1, mine] + half), high[mine])
        shared[mine] |= together
    edges = sharp_edges(density[:, left : left + cols], run, EDGE)
    edges[0] = np.where(low > run[0], low, edges[0])
    edges[1] = np.where(high < run[1], high, edges[1])
    return Way(left, span, edges, shared)

"""The way of every trace on the page, so that no two need the same ink and none is left over.

Each panel's path is searched alone at first. Where two paths run along the same ink, one of them
took a short cut: each is searched again while the ink on the other's path may be crossed but not
followed. Ink that then belongs to nobody is offered to the traces about it. In columns where the
ink of two traces has run together, each keeps what lies about its own path; open ends of the run
belong to the path that is nearest to them.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.ink import Ink
from digitize.layout import Box, Layout, PanelPlace
from digitize.leftover import Path, adopt
from digitize.path import cheapest_path, run_at, sharp_edges

_REACH_MM = 45.0  # a trace may stray so far from its usual height: 4.5 mV at 10 mm/mV
_PX_PER_MM = 6.0  # two pixels across the thinnest common pen are enough for a path
_FAINT, _FULL = 0.15, 0.6  # densities of bare paper and of certain ink
_ENTRY_PER_MM = 0.05  # price of starting away from the usual height of the trace
_ENTRY_FREE_MM = 5.0
_ASTRAY_PER_MM = 2e-3 / 6  # price of going on a millimetre, for each millimetre off that height
_TAKEN = 0.7  # price of following the ink of another trace, as a share of bare paper's
_HALF_PEN_MM = 0.25  # ink about a path that is surely its own
_SHORT_MM = 1.5  # a run of ink that stands out so little from its path holds no peak of its own
_SWEEPS = 2
EDGE = 0.5  # density at the edge of a full stroke


@dataclass(frozen=True, eq=False)
class Way:
    """Where one trace runs, in rows and columns of the ink's raster.

    `edges` (2, cols) are the top and bottom of the trace's ink in the columns from `col0` on, NaN
    where there is none; `shared` (cols,) is True where that ink has run together with another
    trace's.
    """

    col0: int
    edges: np.ndarray
    shared: np.ndarray


def find_ways(ink: Ink, layout: Layout) -> tuple[Way, ...]:
    """Find the way of each panel's trace, in the order of `layout.panels`."""
    factor = max(int(ink.raster.px_per_mm // _PX_PER_MM), 1)
    px_per_mm = ink.raster.px_per_mm / factor
    clear = without_printing(ink, layout.words + layout.marks)
    rows, cols = (n // factor for n in clear.shape)
    coarse = cv2.resize(
        clear[: rows * factor, : cols * factor], (cols, rows), interpolation=cv2.INTER_AREA
    )
    bare = 1 - np.clip((coarse - _FAINT) / (_FULL - _FAINT), 0, 1)
    paths = _apart(bare, [_search(bare, bare, p, ink, factor) for p in layout.panels], layout, ink)
    claimed = _claimed(paths, coarse, px_per_mm)
    paths = adopt(bare, claimed, paths, round(_REACH_MM * px_per_mm), px_per_mm)
    fine = [_enlarge(q, factor, p, ink) for q, p in zip(paths, layout.panels, strict=True)]
    return tuple(_way(k, fine, clear, ink.raster.px_per_mm, factor) for k in range(len(fine)))


def without_printing(ink: Ink, boxes: tuple[Box, ...]) -> np.ndarray:
    """Density without what stands wholly inside the boxes of printing.

    A stroke that leads out of its box may be a trace that passes through, or a letter that touches
    one: it is made faint only.
    """
    clear = np.where(ink.hidden, np.float32(0), ink.density)
    for box in boxes:
        rows = slice(*(max(round(ink.raster.row(y)), 0) for y in (box.top_mm, box.bottom_mm)))
        cols = slice(*(max(round(ink.raster.col(x)), 0) for x in (box.left_mm, box.right_mm)))
        part = clear[rows, cols]
        if not part.size:
            continue
        _, labels = cv2.connectedComponents((part > 0.5 * EDGE).astype(np.uint8))
        border = np.concatenate([labels[0], labels[-1], labels[:, 0], labels[:, -1]])
        leads_out = np.isin(labels, border[border > 0])
        part *= np.where(leads_out, np.float32(0.5), np.float32(0))
    return clear


def _search(bare: np.ndarray, ahead: np.ndarray, panel: PanelPlace, ink: Ink, factor: int) -> Path:
    raster, px = ink.raster, ink.raster.px_per_mm / factor
    top = max(int(raster.row(panel.baseline_mm - _REACH_MM) / factor), 0)
    bottom = min(int(raster.row(panel.baseline_mm + _REACH_MM) / factor) + 1, bare.shape[0])
    left = max(int(raster.col(panel.box.left_mm) / factor), 0)
    right = min(int(raster.col(panel.box.right_mm) / factor) + 1, bare.shape[1])
    y_mm = raster.y_mm((np.arange(top, bottom) + 0.5) * factor - 0.5)
    off_mm = np.abs(y_mm - panel.baseline_mm)
    entry = _ENTRY_PER_MM * np.maximum(off_mm - _ENTRY_FREE_MM, 0)
    cut = slice(top, bottom), slice(left, right)
    price = np.ascontiguousarray(bare[cut])
    onward = ahead[cut] + np.float32(_ASTRAY_PER_MM) * off_mm.astype(np.float32)[:, None]
    span, _ = cheapest_path(price, onward, entry, entry, px)
    return Path(left, span + top)


def _apart(bare: np.ndarray, paths: list[Path], layout: Layout, ink: Ink) -> list[Path]:
    """Paths searched again until none follows another's ink, or twice."""
    factor = max(int(ink.raster.px_per_mm // _PX_PER_MM), 1)
    half = round(_HALF_PEN_MM * ink.raster.px_per_mm / factor)
    paths = list(paths)
    for _ in range(_SWEEPS):
        again = [k for k in range(len(paths)) if _overlap(k, paths, half)]
        for k in again:
            taken = bare.copy()
            for other in paths[:k] + paths[k + 1 :]:
                row = np.arange(len(bare))[:, None]
                on = (row >= other.span[0] - half) & (row <= other.span[1] + half)
                part = taken[:, other.left : other.right]
                part[on] = np.maximum(part[on], _TAKEN)
            paths[k] = _search(bare, taken, layout.panels[k], ink, factor)
        if not again:
            break
    return paths


def _overlap(k: int, paths: list[Path], half: int) -> bool:
    """Whether path k shares rows with another path in some column."""
    own = paths[k]
    for m, other in enumerate(paths):
        start, stop = max(own.left, other.left), min(own.right, other.right)
        if m == k or stop - start < 3:
            continue
        mine, theirs = own.cut(start, stop), other.cut(start, stop)
        if ((mine[0] <= theirs[1] + 2 * half) & (theirs[0] <= mine[1] + 2 * half)).any():
            return True
    return False


def _claimed(paths: list[Path], density: np.ndarray, px_per_mm: float) -> np.ndarray:
    """Ink that the paths explain: about each path, and the run that it lies in if that is short."""
    claimed = np.zeros(density.shape, bool)
    row = np.arange(len(density))[:, None]
    for path in paths:
        ink = np.ascontiguousarray(density[:, path.left : path.right])
        run = run_at(ink, path.span, _FAINT, 1)
        short = (run[0] >= 0) & (np.diff(run - path.span, axis=0)[0] < _SHORT_MM * px_per_mm)
        low = np.where(short, run[0], path.span[0] - _HALF_PEN_MM * px_per_mm)
        high = np.where(short, run[1], path.span[1] + _HALF_PEN_MM * px_per_mm)
        claimed[:, path.left : path.right] |= (row >= low - 1) & (row <= high + 1)
    return claimed


def _enlarge(path: Path, factor: int, panel: PanelPlace, ink: Ink) -> Path:
    """A coarse path in rows and columns of the ink's raster, from edge to edge of the panel."""
    first = max(int(np.ceil(ink.raster.col(panel.box.left_mm))), 0)
    last = min(int(ink.raster.col(panel.box.right_mm)), ink.density.shape[1] - 1)
    at = np.clip(np.arange(first, last + 1) // factor - path.left, 0, path.span.shape[1] - 1)
    return Path(first, np.stack([path.span[0, at] * factor, (path.span[1, at] + 1) * factor - 1]))


def _way(k: int, paths: list[Path], density: np.ndarray, px_per_mm: float, slack: int) -> Way:
    """The run of ink along path k, cut where it has run together with another path's."""
    own = paths[k]
    ink = np.ascontiguousarray(density[:, own.left : own.right])
    run = run_at(ink, own.span, EDGE, slack)
    low, high = run[0].astype(float), run[1].astype(float)
    half = _HALF_PEN_MM * px_per_mm
    shared = np.zeros(run.shape[1], bool)
    for m, other in enumerate(paths):
        start, stop = max(own.left, other.left), min(own.right, other.right)
        if m == k or stop - start < 3 * slack:
            continue
        here = slice(start - own.left, stop - own.left)
        theirs, mine = other.cut(start, stop), own.span[:, here]
        together = (theirs[0] <= run[1, here]) & (theirs[1] >= run[0, here]) & (run[0, here] >= 0)
        above = together & (theirs[0] < mine[0])
        below = together & (theirs[1] > mine[1])
        low[here] = np.where(above, np.maximum(low[here], mine[0] - half), low[here])
        high[here] = np.where(below, np.minimum(high[here], mine[1] + half), high[here])
        shared[here] |= together
    edges = sharp_edges(ink, run, EDGE)
    edges[0] = np.where(low > run[0], low, edges[0])
    edges[1] = np.where(high < run[1], high, edges[1])
    return Way(own.left, edges, shared)

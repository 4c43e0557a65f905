"""The way of every trace on the page, so that no two need the same ink.

Where every trace is plain to see its path is anchored. In between, each panel's path is searched
alone at first; where two then run along the same ink, one of them took a short cut, and each is
searched again while the ink on the other's path may be crossed but not followed. In columns where
the ink of two traces has run together, each keeps what lies about its own path; open ends of the
run belong to the path that is nearest to them.
"""

from dataclasses import dataclass, replace

import cv2
import numpy as np

from digitize.anchors import find_anchors
from digitize.field import INKED, Field, Path, to_field, walk
from digitize.ink import Ink
from digitize.layout import Box, Layout, PanelPlace
from digitize.path import run_at, sharp_edges
from digitize.sheet import Raster

_REACH_MM = 45.0  # a trace may stray so far from its usual height: 4.5 mV at 10 mm/mV
_ENTRY_PER_MM = 0.05  # price of starting away from the usual height of the trace
_ENTRY_FREE_MM = 5.0
_ASTRAY_PER_MM = 2e-3 / 6  # bareness for each millimetre off that height
_ASTRAY_PER_ROW = 0.3  # and for each row's distance beyond the reach of its own
_OWN_ROWS = 0.6  # of a row's distance to each side
_ROW_MM = 25.0  # distance of rows where there is one only; common practice
_HALF_PEN_MM = 0.25  # ink about a path that is surely its own
_SWEEPS = 2
_DOT_MM = 0.6
_DITHERED = 0.3  # so many dots on a square millimetre are dither or the rest of a grid, not dirt
_COHERENT_MM = 1.2
_DIRECTIONS = 12
_THINNEST_MM = 0.3  # of a recorder's usual pens; common practice
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


@dataclass(frozen=True, eq=False)
class Routes:
    """Paths of all traces over the coarse field, with what they were found on."""

    field: Field
    clear: np.ndarray  # density of the page without printing
    anchors: list[np.ndarray]
    paths: list[Path]


def find_routes(ink: Ink, layout: Layout) -> Routes:
    """Find the shortest path of each panel's trace, in the order of `layout.panels`."""
    panels = layout.panels
    clear = without_printing(ink, layout.words + layout.marks)
    if _dots_per_mm2(clear, ink.raster.px_per_mm) > _DITHERED:
        clear = coherent(clear, ink.raster.px_per_mm)
    whole = as_thick_as_a_pen(clear, ink.raster.px_per_mm) if ink.bilevel else clear
    field = to_field(whole, ink.raster)
    anchors = find_anchors(field.bare < INKED, panels, field.y_mm, field.x_mm)
    field = replace(field, pen_mm=_thickness_mm(field, anchors))
    row_mm = _row_distance_mm(panels)
    paths = [_search(field, p, a, row_mm) for p, a in zip(panels, anchors, strict=True)]
    return Routes(field, clear, anchors, _apart(field, paths, panels, anchors))


def to_ways(
    routes: Routes, paths: list[Path], places: list[tuple[float, float]], raster: Raster
) -> tuple[Way, ...]:
    """The ink along each path.

    Parameters
    ----------
    routes : Routes
    paths : list of Path
        Those of `routes`, or parts of them led otherwise.
    places : list of (float, float)
        From where to where each runs, in millimetres across.
    raster : Raster
        Of the ink.
    """
    fine = [
        _enlarge(path, routes, place, raster) for path, place in zip(paths, places, strict=True)
    ]
    slack = round(raster.px_per_mm / routes.field.px_per_mm)
    return tuple(_way(k, fine, routes.clear, raster.px_per_mm, slack) for k in range(len(fine)))


def _row_distance_mm(panels: tuple[PanelPlace, ...]) -> float:
    """Usual distance of the rows."""
    levels = np.array(sorted({panel.row: panel.baseline_mm for panel in panels}.values()))
    return max(float(np.median(np.diff(levels))), 5.0) if len(levels) > 1 else _ROW_MM


def _thickness_mm(field: Field, anchors: list[np.ndarray]) -> float:
    """Usual thickness of a level trace, from the strokes that are beyond doubt."""
    known = np.concatenate([a[:, a[0] >= 0] for a in anchors], axis=1)
    if known.shape[1] < 20:
        return field.pen_mm
    return float(np.median(known[1] - known[0] + 1)) / field.px_per_mm


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


def _dots_per_mm2(density: np.ndarray, px_per_mm: float) -> float:
    """Pieces of ink too small for anything but a dot, on a square millimetre."""
    _, _, stats, _ = cv2.connectedComponentsWithStats((density > EDGE).astype(np.uint8))
    size = np.maximum(stats[1:, cv2.CC_STAT_WIDTH], stats[1:, cv2.CC_STAT_HEIGHT])
    return float(np.sum(size < _DOT_MM * px_per_mm) * px_per_mm**2 / density.size)


def coherent(density: np.ndarray, px_per_mm: float) -> np.ndarray:
    """Density of strokes through dither and dropped lines.

    The mean along a short line, in that direction in which it is largest: strokes go on, dots do
    not. Across a stroke nothing is blurred.
    """
    size = 2 * round(_COHERENT_MM * px_per_mm / 2) + 1
    strongest = np.zeros_like(density)
    for angle in np.arange(_DIRECTIONS) * np.pi / _DIRECTIONS:
        line = np.zeros((size, size), np.uint8)
        reach = size // 2 * np.array([np.cos(angle), np.sin(angle)])
        ends = [np.rint(size // 2 + sign * reach).astype(int).tolist() for sign in (-1, 1)]
        cv2.line(line, ends[0], ends[1], 1)
        kernel = line.astype(np.float32) / line.sum()
        np.maximum(strongest, cv2.filter2D(density, -1, kernel), out=strongest)
    return strongest


def as_thick_as_a_pen(density: np.ndarray, px_per_mm: float) -> np.ndarray:
    """Density with strokes that are thinner than any pen as thick as one.

    A black and white page loses the edges of a stroke first, then the places where it is thin or
    where two rows of pixels share it: as thick as it was, it is whole again.
    """
    inked = (density > EDGE).astype(np.int8)
    edges = sum(np.count_nonzero(np.diff(inked, axis=axis)) for axis in (0, 1))
    if not edges:
        return density
    # twice area over perimeter; a line of any direction crosses pi/4 as many edges as it is long
    thick_mm = 2 * inked.sum() / (np.pi / 4 * edges) / px_per_mm
    missing_px = int(np.ceil((_THINNEST_MM - thick_mm) * px_per_mm))
    if missing_px < 1:
        return density
    return cv2.dilate(density, np.ones((missing_px + 1, missing_px + 1), np.uint8))


def _search(
    field: Field,
    panel: PanelPlace,
    anchor: np.ndarray,
    row_mm: float,
    others: tuple[Path, ...] = (),
) -> Path:
    """Path of one panel from its left to its right edge."""
    reach_mm = panel.baseline_mm - _REACH_MM, panel.baseline_mm + _REACH_MM
    top, bottom = np.searchsorted(field.y_mm, reach_mm)
    left, right = np.searchsorted(field.x_mm, (panel.box.left_mm, panel.box.right_mm))
    left, right = max(int(left) - 1, 0), min(int(right) + 1, len(field.x_mm))
    off_mm = np.abs(field.y_mm[top:bottom] - panel.baseline_mm)
    entry = _ENTRY_PER_MM * np.maximum(off_mm - _ENTRY_FREE_MM, 0)
    rows, cols = (int(top), int(bottom)), (left, right)
    astray = _ASTRAY_PER_MM * off_mm
    astray += _ASTRAY_PER_ROW * np.maximum(off_mm / row_mm - _OWN_ROWS, 0)
    return walk(field, rows, cols, anchor, (entry, entry), others=others, extra=astray)[0]


def _apart(
    field: Field,
    paths: list[Path],
    panels: tuple[PanelPlace, ...],
    anchors: list[np.ndarray],
) -> list[Path]:
    """Paths searched again until none follows another's ink, or twice."""
    half, row_mm = round(_HALF_PEN_MM * field.px_per_mm), _row_distance_mm(panels)
    paths = list(paths)
    for _ in range(_SWEEPS):
        again = [k for k in range(len(paths)) if _overlap(k, paths, half)]
        for k in again:
            others = tuple(paths[:k] + paths[k + 1 :])
            paths[k] = _search(field, panels[k], anchors[k], row_mm, others)
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


def _enlarge(path: Path, routes: Routes, place: tuple[float, float], raster: Raster) -> Path:
    """A coarse path in rows and columns of the ink's raster."""
    rows, cols = routes.clear.shape
    first = max(int(np.ceil(raster.col(place[0]))), 0)
    last = min(int(raster.col(place[1])), cols - 1)
    x_mm = raster.x_mm(np.arange(first, last + 1))
    field = routes.field
    step_mm = field.x_mm[1] - field.x_mm[0]
    at = np.rint((x_mm - field.x_mm[0]) / step_mm).astype(int) - path.left
    span = path.span[:, np.clip(at, 0, path.span.shape[1] - 1)]
    scale = rows / len(field.y_mm)
    return Path(first, np.stack([span[0] * scale, (span[1] + 1) * scale - 1]).astype(np.int64))


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

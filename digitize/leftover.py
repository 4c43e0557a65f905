"""Ink that no path explains: whose is it?

A path of least cost likes short cuts. Where the flank of an R wave is broken it crosses the gap at
the foot and leaves the peak alone; where a deep S dips below the next row's trace it turns along
that trace. Either way a piece of ink is left over that touches the rest of a trace. Each such piece
is offered to the traces about it: the way round by its far end is searched, and the trace for which
that costs least takes it, if the ink gained is worth the detour.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.field import INKED, Field, Path, walk

_WORTH_PER_MM = 0.8  # of each millimetre of the piece that is explained, in the path's price
_LEAST_MM = 1.0  # shorter pieces are left to the fit
_AROUND_MM = 6.0  # paper searched to each side of a piece
_REACH_MM = 45.0
_PIECES = 60
_OUTSIDE = 1e3


@dataclass(frozen=True, eq=False)
class _Piece:
    """Rows and columns of one piece of ink."""

    rows: np.ndarray
    cols: np.ndarray


def adopt(
    field: Field, claimed: np.ndarray, paths: list[Path], anchors: list[np.ndarray]
) -> list[Path]:
    """Lead paths round by the ink that none of them explains.

    Parameters
    ----------
    field : Field
    claimed : (rows, cols) bool array
        Ink that the paths explain.
    paths : list of Path
    anchors : list of (2, cols) int arrays
        Where each path's trace stands beyond doubt.

    Returns
    -------
    list of Path
    """
    paths = list(paths)
    for piece in _pieces(field, claimed):
        best, best_gain = None, 0.0
        for m, path in enumerate(paths):
            if path.left > piece.cols.min() or path.right <= piece.cols.max():
                continue
            tried = _detour(field, piece, m, paths, anchors)
            if tried is not None and tried[1] > best_gain:
                best, best_gain = (m, tried[0]), tried[1]
        if best is not None:
            paths[best[0]] = best[1]
    return paths


def _pieces(field: Field, claimed: np.ndarray) -> list[_Piece]:
    """Pieces of unclaimed ink, the largest first."""
    left_over = ((field.bare < INKED) & ~claimed).astype(np.uint8)
    left_over = cv2.morphologyEx(left_over, cv2.MORPH_OPEN, np.ones((2, 2), np.uint8))
    _, labels, stats, _ = cv2.connectedComponentsWithStats(left_over, connectivity=8)
    size = np.maximum(stats[:, cv2.CC_STAT_HEIGHT], stats[:, cv2.CC_STAT_WIDTH])
    large = [k for k in range(1, len(stats)) if size[k] >= _LEAST_MM * field.px_per_mm]
    large.sort(key=lambda k: -stats[k, cv2.CC_STAT_AREA])
    pieces = []
    for k in large[:_PIECES]:
        x, y, wide, high, _ = stats[k]
        rows, cols = np.nonzero(labels[y : y + high, x : x + wide] == k)
        pieces.append(_Piece(rows + y, cols + x))
    return pieces


def _detour(
    field: Field, piece: _Piece, m: int, paths: list[Path], anchors: list[np.ndarray]
) -> tuple[Path, float] | None:
    """Path m led round by the far end of a piece, and what that gains; None if out of reach."""
    path, px = paths[m], field.px_per_mm
    span = path.span[:, piece.cols - path.left]
    away = np.maximum(np.maximum(span[0] - piece.rows, piece.rows - span[1]), 0)
    far = int(np.argmax(away))
    if away[far] == 0 or away[far] > _REACH_MM * px or away.min() > _AROUND_MM * px:
        return None
    around = round(_AROUND_MM * px)
    start = max(int(piece.cols.min()) - around, path.left)
    stop = min(int(piece.cols.max()) + around + 1, path.right)
    old = path.cut(start, stop)
    top = max(int(min(old[0].min(), piece.rows.min())) - around, 0)
    bottom = min(int(max(old[1].max(), piece.rows.max())) + around, len(field.bare))
    ends = []
    for side, free in ((0, start == path.left), (-1, stop == path.right)):
        end = np.full(bottom - top, 0.0 if free else _OUTSIDE)
        end[old[0, side] - top : old[1, side] - top + 1] = 0
        ends.append(end)
    where = (top, bottom), (start, stop), anchors[m], (ends[0], ends[1])
    others = tuple(paths[:m] + paths[m + 1 :])
    _, before = walk(field, *where, others=others)
    via = int(piece.rows[far]), int(piece.cols[far])
    new, after = walk(field, *where, others=others, via=via)
    gained_mm = (np.ptp(piece.rows) + np.ptp(piece.cols)) / px
    whole = path.span.copy()
    whole[:, start - path.left : stop - path.left] = new.span
    return Path(path.left, whole), _WORTH_PER_MM * gained_mm - (after - before)

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

from digitize.path import cheapest_path

_WORTH_PER_MM = 0.8  # of bare paper's price, for each millimetre of the piece that is explained
_LEAST_MM = 1.0  # shorter pieces are left to the fit
_AROUND_MM = 6.0  # paper searched to each side of a piece
_PIECES = 40
_NEVER = 1e6


@dataclass(frozen=True, eq=False)
class Path:
    """Rows (2, cols), first and last, that a path visits from column `left` on."""

    left: int
    span: np.ndarray

    @property
    def right(self) -> int:
        """Column after the last."""
        return self.left + self.span.shape[1]

    def cut(self, start: int, stop: int) -> np.ndarray:
        """Rows visited in columns from `start` to before `stop`."""
        return self.span[:, start - self.left : stop - self.left]


def adopt(
    bare: np.ndarray, claimed: np.ndarray, paths: list[Path], reach: int, px_per_mm: float
) -> list[Path]:
    """Lead paths round by the ink that none of them explains.

    Parameters
    ----------
    bare : (rows, cols) float32 array
        0 in full ink, 1 on bare paper.
    claimed : (rows, cols) bool array
        Ink that the paths explain.
    paths : list of Path
    reach : int
        How many rows a piece may lie from a path.
    px_per_mm : float

    Returns
    -------
    list of Path
    """
    paths = list(paths)
    left_over = ((bare < 0.4) & ~claimed).astype(np.uint8)
    left_over = cv2.morphologyEx(left_over, cv2.MORPH_OPEN, np.ones((2, 2), np.uint8))
    _, labels, stats, _ = cv2.connectedComponentsWithStats(left_over, connectivity=8)
    size = np.maximum(stats[:, cv2.CC_STAT_HEIGHT], stats[:, cv2.CC_STAT_WIDTH]) / px_per_mm
    pieces = [k for k in range(1, len(stats)) if size[k] >= _LEAST_MM]
    pieces.sort(key=lambda k: -stats[k, cv2.CC_STAT_AREA])
    for k in pieces[:_PIECES]:
        x, y, wide, high, _ = stats[k]
        inside = labels[y : y + high, x : x + wide] == k
        best, best_gain = None, 0.0
        for m, path in enumerate(paths):
            if path.left > x or path.right < x + wide:
                continue
            tried = _detour(bare, path, (x, y, inside), reach, px_per_mm)
            if tried is not None and tried[1] > best_gain:
                best, best_gain = (m, tried[0]), tried[1]
        if best is not None:
            paths[best[0]] = best[1]
    return paths


def _detour(
    bare: np.ndarray,
    path: Path,
    piece: tuple[int, int, np.ndarray],
    reach: int,
    px_per_mm: float,
) -> tuple[Path, float] | None:
    """The path led round by the far end of a piece, and what that gains; None if out of reach."""
    x, y, inside = piece
    rows, cols = np.nonzero(inside)
    rows, cols = rows + y, cols + x
    span = path.span[:, cols - path.left]
    away = np.maximum(np.maximum(span[0] - rows, rows - span[1]), 0)
    far = int(np.argmax(away))
    if away[far] == 0 or away[far] > reach or away.min() > px_per_mm * _AROUND_MM:
        return None
    around = round(_AROUND_MM * px_per_mm)
    start, stop = max(cols.min() - around, path.left), min(cols.max() + around + 1, path.right)
    old = path.cut(start, stop)
    top = max(min(old[0].min(), rows.min()) - around, 0)
    bottom = min(max(old[1].max(), rows.max()) + around, len(bare))
    part = np.ascontiguousarray(bare[top:bottom, start:stop])
    enter, leave = np.full(len(part), _NEVER), np.full(len(part), _NEVER)
    at_left, at_right = start == path.left, stop == path.right
    enter[slice(None) if at_left else slice(old[0, 0] - top, old[1, 0] - top + 1)] = 0
    leave[slice(None) if at_right else slice(old[0, -1] - top, old[1, -1] - top + 1)] = 0
    _, cost_before = cheapest_path(part, part, enter, leave, px_per_mm)
    ahead = part.copy()
    via = cols[far] - start
    ahead[:, via] += _NEVER
    at = rows[far] - top
    ahead[max(at - 1, 0) : at + 2, via] -= _NEVER
    span, cost = cheapest_path(part, ahead, enter, leave, px_per_mm)
    explained_mm = (rows.max() - rows.min() + cols.max() - cols.min()) / px_per_mm
    gain = _WORTH_PER_MM * explained_mm - (cost - cost_before)
    if cost >= 0.5 * _NEVER:
        return None
    new = path.span.copy()
    new[:, start - path.left : stop - path.left] = span + top
    return Path(path.left, new), gain

"""The way of one trace through the ink: a path of least cost, column by column.

The path runs from left to right. In each column it may climb or sink any distance, at next to no
cost inside ink and dearly across bare paper; moving on through bare paper costs as much. Between
columns it remembers whether it was level, climbing or sinking, and a change costs a little: so the
foot of a tall complex goes straight through a neighbouring row's trace instead of turning along it.
Ink that other traces need can be made as dear as bare paper, which keeps two paths off one line.
"""

import numba
import numpy as np

_GAP_PER_MM = 6.0  # crossing bare paper
_INK_PER_MM = 0.012  # climbing in ink: only to prefer the shorter of two ways
_TURN = 0.3  # as much as 0.05 mm of bare paper
_LEAN = 0.03  # one row up or down while level
_LEVEL, _CLIMB, _SINK = 0, 1, 2


@numba.njit(cache=True)
def cheapest_path(
    bare: np.ndarray, ahead: np.ndarray, enter: np.ndarray, leave: np.ndarray, px_per_mm: float
) -> tuple:
    """Least-cost way from the left to the right side of `bare`.

    Parameters
    ----------
    bare : (rows, cols) float32 array
        0 in full ink, 1 on bare paper: price of climbing and sinking.
    ahead : (rows, cols) float32 array
        The same for going on to the next column; more than `bare` where another trace needs the
        ink, so that it may be crossed but not followed.
    enter, leave : (rows,) float arrays
        Price of beginning and of ending at a row.
    px_per_mm : float
        Costs are per millimetre of paper.

    Returns
    -------
    span : (2, cols) int array
        Highest and lowest row visited in each column.
    cost : float
        Of the whole path.
    """
    rows, cols = bare.shape
    step = 1 / px_per_mm
    # how a state was reached: from the column before in mode 0..2; by a vertical step within the
    # column, 3; while level from one row above or below, 4 or 5
    came = np.zeros((cols, 3, rows), np.int8)
    now = np.empty((3, rows))
    for mode in range(3):
        for r in range(rows):
            now[mode, r] = enter[r] + (0.0 if mode == _LEVEL else _TURN)
    new = np.empty((3, rows))
    for c in range(cols):
        for r in range(rows):
            onward = _GAP_PER_MM * step * ahead[r, c]
            best = 0
            for mode in range(1, 3):
                if now[mode, r] < now[best, r]:
                    best = mode
            for mode in range(3):
                source, cost = mode, now[mode, r]
                if now[best, r] + _TURN < cost:
                    source, cost = best, now[best, r] + _TURN
                new[mode, r] = cost + onward
                came[c, mode, r] = source
        for r in range(rows):
            for code in (4, 5):
                back = r - 1 if code == 4 else r + 1
                if 0 <= back < rows:
                    cost = now[_LEVEL, back] + _LEAN + _GAP_PER_MM * step * ahead[r, c]
                    if cost < new[_LEVEL, r]:
                        new[_LEVEL, r] = cost
                        came[c, _LEVEL, r] = code
        for mode in (_CLIMB, _SINK):
            for k in range(1, rows):
                r = k if mode == _SINK else rows - 1 - k
                back = r - 1 if mode == _SINK else r + 1
                cost = new[mode, back] + step * (
                    _INK_PER_MM + _GAP_PER_MM * 0.5 * (bare[r, c] + bare[back, c])
                )
                if cost < new[mode, r]:
                    new[mode, r] = cost
                    came[c, mode, r] = 3
        now, new = new, now
    mode, r, total = 0, 0, np.inf
    for m in range(3):
        for k in range(rows):
            if now[m, k] + leave[k] < total:
                mode, r, total = m, k, now[m, k] + leave[k]
    span = np.empty((2, cols), np.int64)
    for c in range(cols - 1, -1, -1):
        span[0, c], span[1, c] = r, r
        while came[c, mode, r] == 3:
            r += -1 if mode == _SINK else 1
            span[0, c], span[1, c] = min(span[0, c], r), max(span[1, c], r)
        code = came[c, mode, r]
        if code < 3:
            mode = code
        else:
            r += -1 if code == 4 else 1
    return span, total


@numba.njit(cache=True)
def run_at(density: np.ndarray, span: np.ndarray, level: float, slack: int) -> np.ndarray:
    """The run of ink that the path passes through in each column.

    Parameters
    ----------
    density : (rows, cols) float32 array
    span : (2, cols) int array
        Rows visited by the path.
    level : float
        Density at the edge of the ink.
    slack : int
        How far beside the path the run may lie, in rows.

    Returns
    -------
    run : (2, cols) int array
        First and last row; -1 where there is no ink on the path.
    """
    rows, cols = density.shape
    run = np.full((2, cols), -1)
    for c in range(cols):
        low, high = max(span[0, c] - slack, 0), min(span[1, c] + slack, rows - 1)
        longest = 0
        r = low
        while r <= high:
            if not density[r, c] >= level:
                r += 1
                continue
            first = r
            while r + 1 < rows and density[r + 1, c] >= level:
                r += 1
            inside = min(r, high) - first + 1
            if first == low:
                while first > 0 and density[first - 1, c] >= level:
                    first -= 1
            if inside > longest:
                longest, run[0, c], run[1, c] = inside, first, r
            r += 1
    return run


@numba.njit(cache=True)
def paint(mask: np.ndarray, left: int, span: np.ndarray) -> None:
    """Set the rows of a span, ends included, in the columns of a mask from `left` on, in place."""
    for c in range(span.shape[1]):
        for r in range(max(span[0, c], 0), min(span[1, c], mask.shape[0] - 1) + 1):
            mask[r, left + c] = True


def sharp_edges(density: np.ndarray, run: np.ndarray, level: float) -> np.ndarray:
    """Sub-pixel top and bottom of runs where the density crosses `level`, (2, cols), or NaN."""
    cols = np.flatnonzero(run[0] >= 0)
    edges = np.full(run.shape, np.nan)
    for side, out in ((0, -1), (1, 1)):
        at = run[side, cols]
        beyond = np.clip(at + out, 0, len(density) - 1)
        inner, outer = density[at, cols], density[beyond, cols]
        drop = np.where(outer < level, inner - outer, np.inf)
        edges[side, cols] = at + out * np.clip((inner - level) / drop, 0, 1)
    return edges


@numba.njit(cache=True)
def flank_runs(
    density: np.ndarray,
    edges: np.ndarray,
    shared: np.ndarray,
    col0: int,
    level: float,
    steep: float,
) -> np.ndarray:
    """Runs of ink along rows, through the steep stretches of one trace.

    Returns
    -------
    (4, n) float array
        Row, sub-pixel left and right end, and the cosine of the flank's lean from upright, of
        each run that is bare on both sides and whose neighbours two rows away are alike.
    """
    cols = density.shape[1]
    found = []
    last_row, last_left = -1, -1.0
    for c in range(edges.shape[1]):
        if shared[c] or not edges[1, c] - edges[0, c] > steep:
            continue
        margin = 0.25 * steep
        for row in range(int(edges[0, c] + margin), int(edges[1, c] - margin)):
            if row < 2 or row > density.shape[0] - 3:
                continue
            ends = np.zeros((3, 2))
            whole = True
            at = col0 + c
            for k in range(3):
                r = row + 2 * (k - 1)
                if density[r, at] < level:
                    whole = False
                    break
                for side in range(2):
                    step = 2 * side - 1
                    e = at
                    while 2 < e < cols - 3 and density[r, e + step] >= level:
                        e += step
                    inner, outer = density[r, e], density[r, e + step]
                    if outer >= level or density[r, e + 2 * step] > 0.5 * level:
                        whole = False
                    else:
                        ends[k, side] = e + step * (inner - level) / (inner - outer)
            if not whole or (row == last_row and ends[1, 0] == last_left):
                continue
            middle = 0.5 * (ends[:, 0] + ends[:, 1])
            wide = ends[:, 1] - ends[:, 0]
            lean = 0.25 * (middle[2] - middle[0])
            bent = abs(middle[2] - 2 * middle[1] + middle[0])
            if abs(lean) < 0.5 and bent < 0.5 and wide.max() < 1.2 * wide.min():
                found.append((float(row), ends[1, 0], ends[1, 1], 1 / np.sqrt(1 + lean * lean)))
                last_row, last_left = row, ends[1, 0]
    out = np.zeros((4, len(found)))
    for k in range(len(found)):
        for i in range(4):
            out[i, k] = found[k][i]
    return out

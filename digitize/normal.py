"""Compiled sums of the pen fit: drawn against seen ink, and how each node changes it."""

import math

import numba
import numpy as np

from digitize.pen import envelope, reach_of, strips, weight_of, widen

_OUTLIER = 4.0  # standard deviations from which on a pixel loses weight
_FAST = {"contract", "reassoc", "nsz", "arcp"}


@numba.njit(cache=True)
def _lines(
    y: np.ndarray, tremor: np.ndarray, x0: float, step: float, nib: tuple, rows: int
) -> tuple:
    """Edges of the stroke and its strips of ink, round ends included."""
    width, _, blur_y, _ = nib
    pad = math.ceil(0.5 * width / step)
    edge, node, share = envelope(y, step, 0.5 * width, pad)
    widen(edge, tremor, pad)
    first, start, value = strips(edge, blur_y, rows)
    return x0 - pad * step, node, share, first, start, value


@numba.njit(cache=True)
def _column(
    col: int,
    x0: float,
    step: float,
    nib: tuple,
    first: np.ndarray,
    start: np.ndarray,
    g: np.ndarray,
) -> tuple[int, int, int, int]:
    """Strips that reach a pixel column, with their shares in `g`, and the rows of their ink."""
    j0, j1 = reach_of(col, x0, step, nib[1], first.size)
    low, high = 1 << 30, -1
    for j in range(j0, j1):
        g[j] = weight_of(col, j, x0, step, nib[1])
        if start[j + 1] > start[j]:
            low = min(low, first[j])
            high = max(high, first[j] + start[j + 1] - start[j])
    return j0, j1, low, high


@numba.njit(cache=True, fastmath=_FAST, error_model="numpy")
def normal_equations(
    y: np.ndarray,
    tremor: np.ndarray,
    x0: float,
    step: float,
    nib: tuple,
    image: np.ndarray,
    other: np.ndarray,
    rows_seen: np.ndarray,
    noise: float,
    band: int,
    columns: np.ndarray,
) -> tuple:
    """Gauss-Newton system of a line against the ink in some columns.

    Parameters
    ----------
    y : (n,) float array
        Heights of the nodes, the first at `x0`, each `step` after the last.
    tremor : (n,) float array
        How far the edges of the stroke stand out for what trembles under the nib.
    nib : tuple
        Width, blur across, blur down, gain of the pen.
    image, other : (rows, cols) float32 arrays
        Ink seen, NaN where unknown, and the ink of other strokes: ink over ink does not add.
    rows_seen : (2, cols) int array
        Rows that count even where nothing is drawn.
    noise : float
        Unit of the residuals.
    band : int
        Half bandwidth.
    columns : (cols,) bool array
        Columns to sum over.

    Returns
    -------
    matrix : (band + 1, n) float array
        Lower banded form.
    gradient : (n,) float array
        Downhill.
    cost : (cols,) float array
        Of each column.
    """
    rows, cols = image.shape
    gain = nib[3]
    x0, node, share, first, start, value = _lines(y, tremor, x0, step, nib, rows)
    matrix = np.zeros((y.size, band + 1))
    gradient = np.zeros(y.size)
    cost = np.zeros(cols)
    slope = np.zeros(y.size + 1)
    g = np.zeros(first.size)
    by_edge = np.zeros((2, first.size + 1))
    for col in range(cols):
        if not columns[col]:
            continue
        j0, j1, low, high = _column(col, x0, step, nib, first, start, g)
        for row in range(min(low, rows_seen[0, col]), max(high, rows_seen[1, col])):
            seen = image[row, col]
            if math.isnan(seen):
                continue
            drawn = 0.0
            e0, e1 = first.size + 1, -1
            for j in range(j0, j1):
                k = row - first[j]
                if k < 0 or k >= start[j + 1] - start[j]:
                    continue
                at = start[j] + k
                drawn += g[j] * value[at, 0]
                by_edge[0, j] += g[j] * value[at, 1]
                by_edge[0, j + 1] += g[j] * value[at, 2]
                by_edge[1, j] += g[j] * value[at, 3]
                by_edge[1, j + 1] += g[j] * value[at, 4]
                e0, e1 = min(e0, j), max(e1, j + 1)
            bare = gain * (1 - other[row, col]) / noise
            residual = seen / noise - gain * other[row, col] / noise - drawn * bare
            ratio = residual / _OUTLIER
            weight = 1 / (1 + ratio * ratio)
            cost[col] += _OUTLIER * _OUTLIER * math.log(1 + ratio * ratio)
            left, right = y.size, -1
            for e in range(e0, e1 + 1):
                for side in range(2):
                    d = by_edge[side, e]
                    by_edge[side, e] = 0.0
                    if abs(d) > 1e-3:
                        i, a = node[side, e], share[side, e]
                        slope[i] += bare * d * (1 - a)
                        slope[i + 1] += bare * d * a
                        left, right = min(left, i), max(right, i + 1)
            for i in range(left, right + 1):
                s = slope[i] * weight
                if s != 0.0:
                    gradient[i] += s * residual
                    for k in range(right + 1 - i):
                        matrix[i, k] += s * slope[i + k]
            for i in range(left, right + 1):
                slope[i] = 0.0
    return matrix.T.copy(), gradient, cost


@numba.njit(cache=True, fastmath=_FAST, error_model="numpy")
def column_costs(
    y: np.ndarray,
    tremor: np.ndarray,
    x0: float,
    step: float,
    nib: tuple,
    image: np.ndarray,
    other: np.ndarray,
    rows_seen: np.ndarray,
    noise: float,
    columns: np.ndarray,
) -> np.ndarray:
    """Cost of each column alone; parameters as for `normal_equations`."""
    rows, cols = image.shape
    gain = nib[3]
    x0, _, _, first, start, value = _lines(y, tremor, x0, step, nib, rows)
    cost = np.zeros(cols)
    g = np.zeros(first.size)
    for col in range(cols):
        if not columns[col]:
            continue
        j0, j1, low, high = _column(col, x0, step, nib, first, start, g)
        for row in range(min(low, rows_seen[0, col]), max(high, rows_seen[1, col])):
            seen = image[row, col]
            if math.isnan(seen):
                continue
            drawn = 0.0
            for j in range(j0, j1):
                k = row - first[j]
                if 0 <= k < start[j + 1] - start[j]:
                    drawn += g[j] * value[start[j] + k, 0]
            drawn = other[row, col] + (1 - other[row, col]) * drawn
            ratio = (seen - gain * drawn) / (noise * _OUTLIER)
            cost[col] += _OUTLIER * _OUTLIER * math.log(1 + ratio * ratio)
    return cost


@numba.njit(cache=True)
def band_of_inverse(factor: np.ndarray) -> np.ndarray:
    """Diagonals 0 to `band` of the inverse of a banded matrix.

    Parameters
    ----------
    factor : (band + 1, n) float array
        Cholesky factor in lower banded form.

    References
    ----------
    Takahashi, Fagan, Chin (1973), the sparse inverse from the factor: each column of the band
    needs only the columns after it.
    """
    band, n = factor.shape[0] - 1, factor.shape[1]
    inverse = np.zeros((n, band + 1))
    for j in range(n - 1, -1, -1):
        last = min(band, n - 1 - j)
        for k in range(last, -1, -1):
            total = 0.0
            for m in range(1, last + 1):
                a, b = min(k, m), max(k, m)
                total += factor[m, j] * inverse[j + a, b - a]
            own = 1 / factor[0, j] if k == 0 else 0.0
            inverse[j, k] = (own - total) / factor[0, j]
    return inverse.T.copy()

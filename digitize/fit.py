"""The line whose own pen stroke reproduces the ink: least squares between drawn and seen density.

The unknowns are the heights of nodes every 0.05 mm. Drawn ink depends on each node only nearby,
so the normal equations are banded and a Gauss-Newton step costs about as much as drawing. What the
ink does not show (a wiggle inside a steep flank, a node that the nib hides) is held by a prior on
second differences. Its strength is no constant: the expected square of each second difference, its
own posterior variance included, is estimated from the page itself by expectation-maximisation, so
a quiet baseline is smoothed and a QRS is not. Pixels that no pen line explains (dirt, the rest of
the grid, a letter) are weighted down as outliers.

References
----------
Huber, Robust Statistics (1981), iteratively reweighted least squares. MacKay, Bayesian
interpolation, Neural Computation 4 (1992) 415: the strength of a prior from the data.
"""

import math
from dataclasses import dataclass

import numba
import numpy as np
import scipy as sp

from digitize.pen import Pen, envelope, reach_of, strips, weight_of

_OUTLIER = 4.0  # standard deviations from which on a pixel loses weight
_FLAT = 1e-6


@dataclass(frozen=True, eq=False)
class Line:
    """A fitted line: node heights and their standard errors, in pixels."""

    y_px: np.ndarray
    sigma_px: np.ndarray
    noise: float  # scatter of the density about the drawn ink


@numba.njit(cache=True)
def normal_equations(
    y: np.ndarray,
    x0: float,
    step: float,
    nib: tuple,
    image: np.ndarray,
    other: np.ndarray,
    rows_seen: np.ndarray,
    noise: float,
    band: int,
) -> tuple:
    """Gauss-Newton system of the data: banded matrix, gradient and cost of each column.

    `nib` is (width, blur_x, blur_y, gain). `image` is NaN where nothing is known. `other` is the
    density that other strokes lay here, between 0 and 1. `rows_seen` (2, cols) are rows that must
    be compared even where nothing is drawn. All residuals are in units of `noise`.
    """
    width, blur_x, blur_y, gain = nib
    rows, cols = image.shape
    nodes = y.size
    pad = math.ceil(0.5 * width / step)
    edge, node, share = envelope(y, step, 0.5 * width, pad)
    first, start, value = strips(edge, blur_y, rows)
    n, x0 = edge.shape[1] - 1, x0 - pad * step
    matrix = np.zeros((band + 1, nodes))
    gradient = np.zeros(nodes)
    cost = np.zeros(cols)
    slope = np.zeros(nodes)
    g = np.zeros(n)
    for col in range(cols):
        j0, j1 = reach_of(col, x0, step, blur_x, n)
        low, high = rows_seen[0, col], rows_seen[1, col]
        for j in range(j0, j1):
            g[j] = gain * weight_of(col, j, x0, step, blur_x)
            if start[j + 1] > start[j]:
                low = min(low, first[j])
                high = max(high, first[j] + start[j + 1] - start[j])
        for row in range(low, high):
            seen = image[row, col]
            if math.isnan(seen):
                continue
            bare = (1 - other[row, col]) / noise
            drawn = 0.0
            left, right = nodes, -1
            for j in range(j0, j1):
                k = row - first[j]
                if k < 0 or k >= start[j + 1] - start[j]:
                    continue
                at = start[j] + k
                drawn += g[j] * value[at, 0]
                for side in range(2):
                    for end in range(2):
                        d = value[at, 1 + 2 * side + end]
                        if abs(d) < _FLAT:
                            continue
                        i, a = node[side, j + end], share[side, j + end]
                        slope[i] += g[j] * bare * d * (1 - a)
                        slope[i + 1] += g[j] * bare * d * a
                        left, right = min(left, i), max(right, i + 1)
            residual = seen / noise - gain * other[row, col] / noise - drawn * bare
            ratio = residual / _OUTLIER
            weight = 1 / (1 + ratio * ratio)
            cost[col] += _OUTLIER * _OUTLIER * math.log(1 + ratio * ratio)
            for i in range(left, right + 1):
                s = slope[i]
                if s != 0.0:
                    s *= weight
                    gradient[i] += s * residual
                    for k in range(i, right + 1):
                        matrix[k - i, i] += s * slope[k]
            for i in range(left, right + 1):
                slope[i] = 0.0
    return matrix, gradient, cost


@numba.njit(cache=True)
def _covariance(factor: np.ndarray) -> np.ndarray:
    """Band of the inverse, from the banded Cholesky factor (lower form); Takahashi's recursion."""
    band, n = factor.shape[0] - 1, factor.shape[1]
    inverse = np.zeros_like(factor)
    for j in range(n - 1, -1, -1):
        last = min(band, n - 1 - j)
        for k in range(last, -1, -1):
            total = 0.0
            for m in range(1, last + 1):
                a, b = min(k, m), max(k, m)
                total += factor[m, j] * inverse[b - a, j + a]
            own = 1 / factor[0, j] if k == 0 else 0.0
            inverse[k, j] = (own - total) / factor[0, j]
    return inverse


def _curvature(y: np.ndarray) -> np.ndarray:
    return np.convolve(y, (1.0, -2.0, 1.0), "valid")


def _add_prior(matrix: np.ndarray, strength: np.ndarray) -> np.ndarray:
    """Add D' diag(strength) D of second differences D to a banded matrix."""
    n = matrix.shape[1]
    total = matrix.copy()
    for a, ca in enumerate((1.0, -2.0, 1.0)):
        for b, cb in enumerate((1.0, -2.0, 1.0)):
            if b >= a:
                total[b - a, a : n - 2 + a] += ca * cb * strength
    return total


def _prior_gradient(y: np.ndarray, strength: np.ndarray) -> np.ndarray:
    pull = strength * _curvature(y)
    return -np.convolve(pull, (1.0, -2.0, 1.0), "full")


def _smooth(values: np.ndarray, half: int) -> np.ndarray:
    """Mean over a triangular window of `half` nodes to each side, shrunk at the ends."""
    kernel = np.bartlett(2 * half + 3)[1:-1]
    return np.convolve(values, kernel, "same") / np.convolve(np.ones_like(values), kernel, "same")


def _solve(matrix: np.ndarray, gradient: np.ndarray, damping: np.ndarray) -> np.ndarray:
    damped = matrix.copy()
    damped[0] += damping
    return sp.linalg.solveh_banded(damped, gradient, lower=True, check_finite=False)


def fit_line(
    image: np.ndarray,
    other: np.ndarray,
    rows_seen: np.ndarray,
    y_px: np.ndarray,
    x0_px: float,
    step_px: float,
    pen: Pen,
    noise: float,
    rounds: int = 5,
    steps: int = 3,
) -> Line:
    reach = pen.width_px + 7 * pen.blur_x_px + 2 * step_px
    band = math.ceil(reach / step_px) + 3
    y = y_px.copy()
    at_col = np.clip(np.rint(x0_px + step_px * np.arange(len(y))), 0, image.shape[1] - 1)
    at_col = at_col.astype(int)
    window = 2 * round(0.5 * pen.width_px + 2 * pen.blur_x_px) + 1

    def system(line: np.ndarray, noise: float) -> tuple:
        return normal_equations(line, x0_px, step_px, pen.nib, image, other, rows_seen, noise, band)

    def local(cost: np.ndarray, line: np.ndarray, strength: np.ndarray) -> np.ndarray:
        return sp.ndimage.uniform_filter1d(cost, window)[at_col] + sp.ndimage.uniform_filter1d(
            np.pad(strength * _curvature(line) ** 2, 1), window
        )

    floor = 1e-3
    spread = _smooth(np.pad(_curvature(y) ** 2, 1, "edge"), 4)[1:-1] + floor
    for _turn in range(rounds):
        strength = 1 / spread
        state = system(y, noise)
        damping = np.full(len(y), 0.1)
        for _ in range(steps):
            matrix, gradient, cost = state
            full = _add_prior(matrix, strength)
            move = _solve(full, gradient + _prior_gradient(y, strength), damping * full[0])
            trial = y + move
            tried = system(trial, noise)
            before, after = local(cost, y, strength), local(tried[2], trial, strength)
            worse = after > before + 1e-6
            damping = np.where(
                worse, np.minimum(damping * 10, 1e6), np.maximum(damping * 0.1, 1e-4)
            )
            if worse.any():
                y = np.where(worse, y, trial)
                state = system(y, noise)
            else:
                y, state = trial, tried
        full = _add_prior(state[0], strength)
        full[0] += 1e-9
        inverse = _covariance(sp.linalg.cholesky_banded(full, lower=True, check_finite=False))
        d, e, f = inverse[0], inverse[1], inverse[2]
        own = d[:-2] + 4 * d[1:-1] + d[2:] - 4 * e[:-2] - 4 * e[1:-1] + 2 * f[:-2]
        spread = _smooth(np.pad(_curvature(y) ** 2 + own, 1, "edge"), 4)[1:-1] + floor
    return Line(y, np.sqrt(inverse[0]), noise)


def start_from_edges(
    top: np.ndarray, bottom: np.ndarray, step: float, radius: float
) -> tuple[np.ndarray, np.ndarray]:
    """Node heights between the two edges of the ink, the pen taken off."""
    reach = int(radius / step)
    u = step * np.arange(-reach, reach + 1)
    arc = np.sqrt(np.maximum(radius**2 - u**2, 0))
    upper = sp.ndimage.grey_dilation(top, structure=arc, mode="nearest")
    lower = sp.ndimage.grey_erosion(bottom, structure=arc, mode="nearest")
    return upper, lower

"""The line whose own pen stroke reproduces the ink: least squares between drawn and seen density.

The unknowns are the heights of nodes every 0.05 mm. Drawn ink depends on each node only nearby,
so the normal equations are banded and a Gauss-Newton step costs about as much as drawing. What the
ink does not show (a wiggle inside a steep flank, a node that the nib hides) is held by a prior on
second differences. Its strength is no constant: the expected square of each second difference, its
own posterior variance included, is estimated from the page itself by expectation-maximisation, so
a quiet baseline is smoothed and a QRS is not. Pixels that no pen line explains (dirt, the rest of
the grid, a letter) are weighted down as outliers. Damping and convergence are local: a stretch that
has settled is not computed again.

References
----------
Huber, Robust Statistics (1981), iteratively reweighted least squares. MacKay, Bayesian
interpolation, Neural Computation 4 (1992) 415: the strength of a prior from the data.
"""

import math
from dataclasses import dataclass

import numpy as np
import scipy as sp

from digitize.normal import band_of_inverse, column_costs, normal_equations
from digitize.pen import Pen

ROUNDS = 2  # estimates of the prior's strength
_STEPS = 4  # Gauss-Newton steps in each
_SETTLED_PX = 0.2
STEP_MM = 0.05  # of paper between nodes: 2 ms at 25 mm/s
_LEAST_MM, _MOST_MM = 0.03, 0.1  # second differences of an ECG, 3 and 10 uV, to begin with
_FLOOR_PX2 = 1e-3  # no second difference is expected below 0.03 px: finer than any ink shows
_NEIGHBOURS = 4  # nodes to each side that share one prior strength
_WORSE = 0.2  # rise of the local cost, in squared standard deviations, that undoes a step
_FROZEN = 1e12


@dataclass(frozen=True, eq=False)
class View:
    """What a line is fitted to: a cut-out of the ink.

    `image` and `other` are (rows, cols) float32: density seen, NaN where unknown, and the density
    that the strokes of other traces lay here. `rows` is (2, cols): from where to where ink must be
    explained in each column, even where the line draws none.
    """

    image: np.ndarray
    other: np.ndarray
    rows: np.ndarray
    noise: float


@dataclass(frozen=True, eq=False)
class Line:
    """A fitted line: node heights and their standard errors, cost by column, tremor of nodes."""

    y_px: np.ndarray
    sigma_px: np.ndarray
    cost: np.ndarray
    tremor_px: np.ndarray


def fit_line(
    view: View,
    start_px: np.ndarray,
    x0_px: float,
    step_px: float,
    pen: Pen,
    rounds: int = ROUNDS,
    tremor_px: np.ndarray | float = 0.0,
) -> Line:
    """Fit the heights of a line's nodes to the ink.

    Parameters
    ----------
    view : View
    start_px : (n,) float array
        First guess of the heights, in rows of the cut-out.
    x0_px, step_px : float
        Place of the first node, in columns of the cut-out, and distance of the nodes.
    pen : Pen
    rounds : int, optional
        Estimates of the prior's strength; one is enough to compare, not to measure.
    tremor_px : (n,) float array or float, optional
        How far the edges of the stroke stand out for what trembles under the nib.

    Returns
    -------
    Line
    """
    y = start_px.astype(float)
    tremor = np.ascontiguousarray(np.broadcast_to(tremor_px, y.shape), float)
    reach_px = 0.5 * pen.width_px + 3.5 * pen.blur_x_px + step_px
    band = math.ceil(2 * reach_px / step_px) + 3
    x = x0_px + step_px * np.arange(len(y))
    at_col = np.clip(np.rint(x), 0, view.image.shape[1] - 1).astype(np.int64)
    window = 2 * round(reach_px) + 1
    place = (tremor, x0_px, step_px, pen.nib, view.image, view.other, view.rows, view.noise)

    def local(cost: np.ndarray, line: np.ndarray, strength: np.ndarray) -> np.ndarray:
        """Cost in the neighbourhood of each node."""
        prior = np.pad(strength * _curvature(line) ** 2, 1)
        near = sp.ndimage.uniform_filter1d(cost, window)[at_col]
        return near + sp.ndimage.uniform_filter1d(prior, window) / step_px

    def columns(nodes: np.ndarray) -> np.ndarray:
        """Columns that the ink of these nodes reaches."""
        cols = np.zeros(view.image.shape[1], bool)
        cols[at_col[nodes]] = True
        return sp.ndimage.maximum_filter1d(cols, window + 2)

    everywhere = np.ones(view.image.shape[1], bool)
    start = np.minimum(_mean_near(_curvature(y) ** 2), (_MOST_MM * step_px / STEP_MM) ** 2)
    spread = start + (_LEAST_MM * step_px / STEP_MM) ** 2
    damping = np.full(len(y), 0.01)
    for turn in range(rounds + 1):
        matrix, gradient, cost = normal_equations(y, *place, band, everywhere)
        if turn:
            inverse = _inverse(_with_prior(matrix, 1 / spread))
        if turn == rounds:
            break
        if turn:
            spread = _mean_near(_curvature(y) ** 2 + _curvature_variance(inverse)) + _FLOOR_PX2
        strength = 1 / spread
        active = np.ones(len(y), bool)
        for _ in range(_STEPS):
            full = _with_prior(matrix, strength)
            full[0] += np.where(active, damping * full[0] + 1e-9, _FROZEN)
            pull = np.where(active, gradient + _prior_gradient(y, strength), 0)
            move = sp.linalg.solveh_banded(full, pull, lower=True, check_finite=False)
            trial = y + move
            cols = columns(active)
            tried = np.where(cols, column_costs(trial, *place, cols), cost)
            worse = local(tried, trial, strength) > local(cost, y, strength) + _WORSE
            damping = np.clip(damping * np.where(worse, 10, 0.2), 1e-4, 1e6)
            y = np.where(worse, y, trial)
            active &= worse | (np.abs(move) > _SETTLED_PX)
            active = sp.ndimage.maximum_filter1d(active, 5)
            if not active.any():
                break
            cols = columns(active)
            matrix, gradient, again = normal_equations(y, *place, band, cols)
            cost = np.where(cols, again, cost)
    return Line(y, np.sqrt(inverse[0]), cost, tremor)


def start_from_edges(top: np.ndarray, bottom: np.ndarray, step: float, radius: float) -> np.ndarray:
    """First guess of a line from the edges of its ink, the pen taken off.

    The upper envelope of the discs cannot lie above a disc that touches the seen top edge, nor the
    other way round, so the line lies between two bounds. Upward peaks, however narrow, are exact
    in the first, downward peaks in the second; elsewhere the two agree but for noise.

    Parameters
    ----------
    top, bottom : (n,) float arrays
        Edges of the ink at nodes `step` apart.
    radius : float
        Of the nib.
    """
    reach = int(radius / step)
    u = step * np.arange(-reach, reach + 1)
    arc = np.sqrt(np.maximum(radius**2 - u**2, 0))
    upper = sp.ndimage.grey_dilation(top, structure=arc, mode="nearest")
    lower = sp.ndimage.grey_erosion(bottom, structure=arc, mode="nearest")
    wide = 2 * round(2 * radius / step) + 1
    upward = sp.ndimage.grey_closing(upper, wide, mode="nearest") - upper
    downward = lower - sp.ndimage.grey_opening(lower, wide, mode="nearest")
    least = 0.5 * radius
    start = np.where(downward > np.maximum(upward, least), lower, 0.5 * (upper + lower))
    return np.where(upward > np.maximum(downward, least), upper, start)


def _curvature(y: np.ndarray) -> np.ndarray:
    return np.convolve(y, (1.0, -2.0, 1.0), "valid")


def _mean_near(values: np.ndarray) -> np.ndarray:
    """Mean over a triangular window of neighbours, shrunk at the ends."""
    kernel = np.bartlett(2 * _NEIGHBOURS + 3)[1:-1]
    norm = np.convolve(np.ones_like(values), kernel, "same")
    return np.convolve(values, kernel, "same") / norm


def _with_prior(matrix: np.ndarray, strength: np.ndarray) -> np.ndarray:
    """Matrix plus D' diag(strength) D of second differences D, banded."""
    n = matrix.shape[1]
    total = matrix.copy()
    for a, ca in enumerate((1.0, -2.0, 1.0)):
        for b, cb in enumerate((1.0, -2.0, 1.0)):
            if b >= a:
                total[b - a, a : n - 2 + a] += ca * cb * strength
    return total


def _prior_gradient(y: np.ndarray, strength: np.ndarray) -> np.ndarray:
    return -np.convolve(strength * _curvature(y), (1.0, -2.0, 1.0), "full")


def _inverse(matrix: np.ndarray) -> np.ndarray:
    matrix[0] += 1e-9  # a line without any ink is still a matrix with an inverse
    return band_of_inverse(sp.linalg.cholesky_banded(matrix, lower=True, check_finite=False))


def _curvature_variance(inverse: np.ndarray) -> np.ndarray:
    """Posterior variance of each second difference."""
    own, next_, after = inverse[0], inverse[1], inverse[2]
    return (own[:-2] + 4 * own[1:-1] + own[2:] - 4 * next_[:-2] - 4 * next_[1:-1] + 2 * after[:-2])[
        : len(own) - 2
    ]

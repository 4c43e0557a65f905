"""The recorder's pen: a round nib that moves along a line, and the ink that it leaves.

At constant paper speed a trace is a function y(x). A disc of the nib's radius that moves along it
covers, at every x, one unbroken interval from `top(x)` to `bottom(x)`: the envelopes of the discs.
Paper, lens and pixel blur that area by a Gaussian. Both steps have a closed form on a polyline: the
envelope touches one segment at each x, and an interval with straight edges blurred downward is a
difference of error functions. So ink and its derivative by every node cost a few operations per
pixel, nothing is supersampled, and a steep flank, whose edge crosses many pixels within one column,
is as exact as a flat stretch.

Lengths here are pixels of the raster; a pixel's centre has whole coordinates; y runs downward.
"""

import math
from dataclasses import dataclass

import numba
import numpy as np
import scipy as sp

_REACH = 3.0  # standard deviations beyond which a Gaussian is taken as ended: 0.1 %
_SQRT_HALF = math.sqrt(0.5)
_PER_SIGMA = 64
_GRID = np.arange(-_REACH, _REACH + 2 / _PER_SIGMA, 1 / _PER_SIGMA)
_TABLE = np.stack([sp.special.ndtr(_GRID), np.exp(-0.5 * _GRID**2) / math.sqrt(2 * math.pi)])


@dataclass(frozen=True)
class Pen:
    """A round nib, the blur of its ink on the raster, and the density of a full stroke."""

    width_px: float
    blur_x_px: float  # standard deviation across
    blur_y_px: float  # standard deviation down
    gain: float = 1.0

    @property
    def nib(self) -> tuple[float, float, float, float]:
        """The four numbers, for compiled code."""
        return self.width_px, self.blur_x_px, self.blur_y_px, self.gain


@numba.njit(cache=True)
def envelope(y: np.ndarray, step: float, radius: float, pad: int) -> tuple:
    """Edges of the area that a disc covers while it moves along a polyline.

    Parameters
    ----------
    y : (n,) float array
        Height of the nodes, which stand `step` apart.
    step, radius : float
        Distance of the nodes and radius of the disc.
    pad : int
        Edges wanted before the first and after the last node, for the round ends of the line.

    Returns
    -------
    edge : (2, n + 2 pad) float array
        Top (row 0) and bottom (row 1) of the covered area; column e stands at node e - pad. Where
        the disc never comes, both are the height of the end.
    node : (2, n + 2 pad) int array
        The edge hangs on the segment from this node to the next.
    share : (2, n + 2 pad) float array
        Derivative of the edge by the node after it; that by `node` is one minus it.
    """
    n = y.size
    edge = np.empty((2, n + 2 * pad))
    node = np.zeros((2, n + 2 * pad), np.int64)
    share = np.zeros((2, n + 2 * pad))
    reach = math.ceil(radius / step)
    for i in range(n + 2 * pad):
        end = 0 if i < pad else n - 1
        edge[0, i], edge[1, i] = np.inf, -np.inf
        if i < pad or i >= n + pad:
            edge[:, i] = y[end]
            node[:, i] = min(end, n - 2)
            share[:, i] = 1.0 if end > 0 else 0.0
            if i < pad - reach or i >= n + pad + reach:
                continue
        for k in range(max(i - pad - reach, 0), min(i - pad + reach, n - 1)):
            start = (k - i + pad) * step
            if start >= radius or start + step <= -radius:
                continue
            first, last = max(start, -radius), min(start + step, radius)
            slope = (y[k + 1] - y[k]) / step
            touch = slope * radius / math.sqrt(1 + slope * slope)
            for side in range(2):
                u = min(max(touch if side == 1 else -touch, first), last)
                arc = math.sqrt(max(radius * radius - u * u, 0.0))
                at = y[k] + slope * (u - start) + (arc if side == 1 else -arc)
                if (side == 0 and at < edge[0, i]) or (side == 1 and at > edge[1, i]):
                    edge[side, i], node[side, i] = at, k
                    share[side, i] = (u - start) / step
    return edge, node, share


@numba.njit(cache=True)
def widen(edge: np.ndarray, tremor: np.ndarray, pad: int) -> None:
    """Move the edges of a stroke apart by the tremor of the node above them, in place.

    Where a line shakes faster than the nib is wide, only the range of the shaking is printed: the
    stroke is thicker up and down, and on a steep flank hardly so across.
    """
    for i in range(edge.shape[1]):
        if edge[1, i] > edge[0, i]:
            at = tremor[min(max(i - pad, 0), tremor.size - 1)]
            edge[0, i] -= at
            edge[1, i] += at


@numba.njit(cache=True, inline="always")
def _phi(z: float) -> float:
    return 0.5 * (1 + math.erf(z * _SQRT_HALF))


@numba.njit(cache=True, fastmath=True)
def _normal(z: float) -> tuple[float, float]:
    """Normal distribution function and density, to 1e-5, from a table."""
    if z <= -_REACH:
        return 0.0, 0.0
    if z >= _REACH:
        return 1.0, 0.0
    place = (z + _REACH) * _PER_SIGMA
    k = int(place)
    a = place - k
    return (
        _TABLE[0, k] + a * (_TABLE[0, k + 1] - _TABLE[0, k]),
        _TABLE[1, k] + a * (_TABLE[1, k + 1] - _TABLE[1, k]),
    )


@numba.njit(cache=True, fastmath=True)
def _ramp(z0: float, z1: float) -> tuple[float, float, float]:
    """Mean of the normal distribution function between z0 and z1, and its two derivatives."""
    if min(z0, z1) > _REACH:
        return 1.0, 0.0, 0.0
    if max(z0, z1) < -_REACH:
        return 0.0, 0.0, 0.0
    dz = z1 - z0
    if abs(dz) < 0.5:  # Taylor's series about the middle, to 5e-5
        z = 0.5 * (z0 + z1)
        p, d = _normal(z)
        lean = z * d * dz / 12
        return p - 0.5 * lean * dz, 0.5 * d + lean, 0.5 * d - lean
    p0, d0 = _normal(z0)
    p1, d1 = _normal(z1)
    mean = (z1 * p1 - z0 * p0 + d1 - d0) / dz
    return mean, (mean - p0) / dz, (p1 - mean) / dz


@numba.njit(cache=True)
def strips(edge: np.ndarray, blur: float, rows: int) -> tuple:
    """Ink of each strip between two nodes, blurred downward, with its derivatives by the edges.

    Returns
    -------
    first, start : (n - 1,), (n,) int arrays
        Strip j has values for the pixel rows `first[j] + k`, stored at `start[j] + k`, up to
        `start[j + 1]`.
    value : (m, 5) float array
        Ink, and its derivatives by the top at the left and right node, and by the bottom there.
    """
    n = edge.shape[1] - 1
    first = np.zeros(n, np.int64)
    start = np.zeros(n + 1, np.int64)
    reach = _REACH * blur
    for j in range(n):
        low = math.ceil(min(edge[0, j], edge[0, j + 1]) - reach)
        high = math.floor(max(edge[1, j], edge[1, j + 1]) + reach)
        low, high = min(max(low, 0), rows), min(max(high + 1, 0), rows)
        first[j] = low
        start[j + 1] = start[j] + max(high - low, 0)
    value = np.zeros((start[n], 5), np.float32)
    for j in range(n):
        for k in range(start[j + 1] - start[j]):
            row = first[j] + k
            above, t0, t1 = _ramp((row - edge[0, j]) / blur, (row - edge[0, j + 1]) / blur)
            below, b0, b1 = _ramp((row - edge[1, j]) / blur, (row - edge[1, j + 1]) / blur)
            at = start[j] + k
            value[at, 0] = above - below
            value[at, 1], value[at, 2] = -t0 / blur, -t1 / blur
            value[at, 3], value[at, 4] = b0 / blur, b1 / blur
    return first, start, value


@numba.njit(cache=True, inline="always")
def reach_of(col: int, x0: float, step: float, blur: float, n: int) -> tuple[int, int]:
    """Range of strips that leave ink on pixel column `col`."""
    low = math.floor((col - _REACH * blur - x0) / step)
    high = math.ceil((col + _REACH * blur - x0) / step)
    return min(max(low, 0), n), min(max(high, 0), n)


@numba.njit(cache=True, inline="always")
def weight_of(col: int, j: int, x0: float, step: float, blur: float) -> float:
    """Share of strip j's ink that the blur across lays on pixel column `col`."""
    left = x0 + j * step - col
    return _phi((left + step) / blur) - _phi(left / blur)


@numba.njit(cache=True)
def _draw(
    y: np.ndarray, tremor: np.ndarray, x0: float, step: float, nib: tuple, image: np.ndarray
) -> None:
    """Add the ink of one polyline to `image` where the image has less: strokes never add up."""
    width, blur_x, blur_y, gain = nib
    rows, cols = image.shape
    pad = math.ceil(0.5 * width / step)
    edge, _, _ = envelope(y, step, 0.5 * width, pad)
    widen(edge, tremor, pad)
    first, start, value = strips(edge, blur_y, rows)
    n, x0 = edge.shape[1] - 1, x0 - pad * step
    column = np.zeros(rows)
    for col in range(cols):
        j0, j1 = reach_of(col, x0, step, blur_x, n)
        low, high = rows, 0
        for j in range(j0, j1):
            g = gain * weight_of(col, j, x0, step, blur_x)
            count = start[j + 1] - start[j]
            if count == 0:
                continue
            low, high = min(low, first[j]), max(high, first[j] + count)
            for k in range(count):
                column[first[j] + k] += g * value[start[j] + k, 0]
        for row in range(low, high):
            image[row, col] += column[row] * (1 - image[row, col] / gain)
            column[row] = 0


def draw_line(
    image: np.ndarray,
    y_px: np.ndarray,
    x0_px: float,
    step_px: float,
    pen: Pen,
    tremor_px: np.ndarray | float = 0.0,
) -> None:
    """Lay the ink of one unbroken line into `image`, in place.

    Parameters
    ----------
    image : (rows, cols) float32 array
        Density so far; ink over ink stays ink: 1 - (1 - a)(1 - b).
    y_px : (n,) float array
        Heights of the nodes, the first at `x0_px`, each `step_px` after the last.
    tremor_px : (n,) float array or float, optional
        How far each edge of the stroke stands out for what trembles under the nib.
    """
    line = np.ascontiguousarray(y_px, float)
    tremor = np.ascontiguousarray(np.broadcast_to(tremor_px, line.shape), float)
    _draw(line, tremor, x0_px, step_px, pen.nib, image)

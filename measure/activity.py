"""How much the leads move at each moment, and where that movement begins and ends.

Movement is the root mean square over the leads of their slope (mV/s) or of their distance from a
level (mV). A wave begins where movement leaves the quiet level beside it and the trace then comes
away from its baseline by more than a deflection must have to count.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import scipy as sp

_CALM_MS = 30
_SEVERAL = 6  # leads from which one can be spared


@dataclass(frozen=True, eq=False)
class Leads:
    """Averaged leads on a raster of 1 ms.

    `mv` is (leads, n) without NaN, `seen` True where it was measured. `weight` is (leads,): a lead
    noisier than the others counts for less. `single_mv` is (leads, beats, n), the beats of which
    `mv` is the average, NaN where one is not seen; None where nothing is known of them.
    """

    time_ms: np.ndarray
    mv: np.ndarray
    seen: np.ndarray
    weight: np.ndarray
    single_mv: np.ndarray | None = None

    def index(self, at_ms: float) -> int:
        """Number of the raster place at a time, kept inside the raster."""
        return int(np.clip(np.searchsorted(self.time_ms, at_ms), 0, len(self.time_ms) - 1))

    def between(self, from_ms: float, to_ms: float) -> "Leads":
        """These leads between two times only."""
        part = slice(self.index(from_ms), self.index(to_ms) + 1)
        single_mv = None if self.single_mv is None else self.single_mv[:, :, part]
        return replace(
            self,
            time_ms=self.time_ms[part],
            mv=self.mv[:, part],
            seen=self.seen[:, part],
            single_mv=single_mv,
        )

    def slopes(self, width_ms: int) -> np.ndarray:
        """Slope of each lead in mV/s from a parabola over `width_ms`, (leads, n)."""
        return _slopes(self.mv, width_ms)

    def slope_noise(self, width_ms: int) -> np.ndarray | float:
        """Variance of these slopes as the scatter of the beats shows it, (leads, n)."""
        if self.single_mv is None:
            return 0.0
        return _variance_of_mean(_slopes(self.single_mv, width_ms))

    def size(self, values: np.ndarray, noise: np.ndarray | float = 0.0) -> np.ndarray:
        """Weighted root mean square over the leads measured at each moment, (n,).

        The lead that moves most is left out where there are several: one noisy lead, or one
        artefact, must not decide where a wave begins. `noise` is the variance of the values,
        (leads, n), by which squares are too large on average: with few beats that is much.
        """
        weight = np.where(self.seen, self.weight[:, None], 0)
        squares = weight * (values**2 - noise)
        several = self.seen.sum(axis=0) >= _SEVERAL
        most = np.argmax(squares, axis=0), np.arange(squares.shape[1])
        left_out = squares[most], weight[most]
        total = squares.sum(axis=0) - np.where(several, left_out[0], 0)
        count = np.maximum(weight.sum(axis=0) - several * left_out[1], 1e-9)
        return np.sqrt(np.maximum(total, 0) / count)

    def level(self, start: int, stop: int) -> np.ndarray:
        """Mean of each lead from place `start` up to `stop`, (leads, 1)."""
        start = max(start, 0)
        return self.mv[:, start : max(stop, start + 1)].mean(axis=1, keepdims=True)

    def distance_noise(self, start: int, stop: int) -> np.ndarray | float:
        """Variance of the distance from that level as the scatter of the beats shows it."""
        if self.single_mv is None:
            return 0.0
        part = self.single_mv[:, :, max(start, 0) : max(stop, start + 1)]
        return _variance_of_mean(self.single_mv - part.mean(axis=2, keepdims=True))

    def distance(self, level: np.ndarray, noise: np.ndarray | float = 0.0) -> np.ndarray:
        """Root mean square distance in mV of the leads from their levels or lines, (n,)."""
        return self.size(self.mv - level, noise)


def _slopes(mv: np.ndarray, width_ms: int) -> np.ndarray:
    """Slopes in mV/s along the last axis, a raster of 1 ms."""
    kernel = _parabola_slope(width_ms | 1)
    return 1000 * sp.ndimage.convolve1d(mv, kernel, axis=-1, mode="nearest")


def _variance_of_mean(single: np.ndarray) -> np.ndarray:
    """Variance of the average over beats from their scatter, (leads, n); 0 with a single beat."""
    seen = np.isfinite(single)
    count = seen.sum(axis=1)
    some = np.where(seen, single, 0)
    mean = some.sum(axis=1) / np.maximum(count, 1)
    squares = np.where(seen, (single - mean[:, None]) ** 2, 0).sum(axis=1)
    return squares / np.maximum(count * (count - 1), 1)


@cache
def _parabola_slope(width: int) -> np.ndarray:
    """Weights of the slope of a parabola through `width` samples, for a convolution."""
    return sp.signal.savgol_coeffs(width, 2, deriv=1)


def leads_of(
    time_ms: np.ndarray,
    mv: np.ndarray,
    chosen: Sequence[int] | None = None,
    single_mv: np.ndarray | None = None,
) -> Leads:
    """Leads of an averaged beat (all, or the chosen rows), gaps bridged and marked as not seen."""
    rows = mv if chosen is None else mv[list(chosen)]
    single_mv = single_mv if single_mv is None or chosen is None else single_mv[list(chosen)]
    seen = np.isfinite(rows)
    bridged = np.zeros_like(rows)
    for out, row, ok in zip(bridged, rows, seen, strict=True):
        if ok.any():
            out[:] = np.interp(time_ms, time_ms[ok], row[ok])
    return Leads(time_ms, bridged, seen, _weights(bridged, seen.any(axis=1)), single_mv)


def _weights(mv: np.ndarray, used: np.ndarray) -> np.ndarray:
    """1 / (1 + noise squared): noise is the slope in the calmest quarter, 1 in the middle lead."""
    calm = sp.ndimage.uniform_filter1d(np.abs(np.diff(mv, axis=1)), _CALM_MS, axis=1)
    noise = np.percentile(calm, 25, axis=1)
    usual = float(np.median(noise[used])) if used.any() else 0.0
    return used / (1 + (noise / max(usual, 1e-9)) ** 2)


def reach(moving: np.ndarray, start: int, stop: int, gap: int) -> int:
    """Return the last place from `start` towards `stop` up to which `moving` goes on.

    Pauses of up to `gap` places, as at a turning point of all leads at once, do not end it.
    """
    step = 1 if stop >= start else -1
    last = start
    for k in range(start, stop, step):
        if moving[k]:
            last = k
        elif abs(k - last) > gap:
            break
    return last


def leave(distance: np.ndarray, start: int, least: float, step: int, most: int) -> int:
    """Return the first place from `start` in direction `step` at which `distance` is `least`."""
    k = start
    while abs(k - start) < most and 0 < k < len(distance) - 1 and distance[k] < least:
        k += step
    return k

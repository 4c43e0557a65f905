"""How much the leads move at each moment, and where that movement begins and ends.

Movement is the root mean square over the leads of their slope (mV/s) or of their distance from a
level (mV). A wave begins where movement leaves the quiet level beside it and the trace then comes
away from its baseline by more than a deflection must have to count.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
import scipy as sp

_CALM_MS = 30
_SEVERAL = 6  # leads from which one can be spared


@dataclass(frozen=True, eq=False)
class Leads:
    """Averaged leads on a raster of 1 ms.

    `mv` is (leads, n) without NaN, `seen` True where it was measured. `weight` is (leads,): a lead
    noisier than the others counts for less.
    """

    time_ms: np.ndarray
    mv: np.ndarray
    seen: np.ndarray
    weight: np.ndarray

    def index(self, at_ms: float) -> int:
        """Number of the raster place at a time, kept inside the raster."""
        return int(np.clip(np.searchsorted(self.time_ms, at_ms), 0, len(self.time_ms) - 1))

    def slopes(self, width_ms: int) -> np.ndarray:
        """Slope of each lead in mV/s from a parabola over `width_ms`, (leads, n)."""
        kernel = _parabola_slope(width_ms | 1)
        return 1000 * sp.ndimage.convolve1d(self.mv, kernel, axis=1, mode="nearest")

    def size(self, values: np.ndarray) -> np.ndarray:
        """Weighted root mean square over the leads measured at each moment, (n,).

        The lead that moves most is left out where there are several: one noisy lead, or one
        artefact, must not decide where a wave begins.
        """
        weight = np.where(self.seen, self.weight[:, None], 0)
        squares = weight * values**2
        several = self.seen.sum(axis=0) >= _SEVERAL
        most = np.argmax(squares, axis=0), np.arange(squares.shape[1])
        left_out = squares[most], weight[most]
        total = squares.sum(axis=0) - np.where(several, left_out[0], 0)
        return np.sqrt(total / np.maximum(weight.sum(axis=0) - several * left_out[1], 1e-9))

    def level(self, start: int, stop: int) -> np.ndarray:
        """Mean of each lead from place `start` up to `stop`, (leads, 1)."""
        start = max(start, 0)
        return self.mv[:, start : max(stop, start + 1)].mean(axis=1, keepdims=True)

    def distance(self, level: np.ndarray) -> np.ndarray:
        """Root mean square distance in mV of the leads from their levels, (n,)."""
        return self.size(self.mv - level)


@cache
def _parabola_slope(width: int) -> np.ndarray:
    """Weights of the slope of a parabola through `width` samples, for a convolution."""
    return sp.signal.savgol_coeffs(width, 2, deriv=1)


def leads_of(time_ms: np.ndarray, mv: np.ndarray, chosen: Sequence[int] | None = None) -> Leads:
    """Leads of an averaged beat (all, or the chosen rows), gaps bridged and marked as not seen."""
    rows = mv if chosen is None else mv[list(chosen)]
    seen = np.isfinite(rows)
    bridged = np.zeros_like(rows)
    for out, row, ok in zip(bridged, rows, seen, strict=True):
        if ok.any():
            out[:] = np.interp(time_ms, time_ms[ok], row[ok])
    return Leads(time_ms, bridged, seen, _weights(bridged, seen.any(axis=1)))


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

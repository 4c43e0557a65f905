"""Pacing spikes: jumps out of a quiet stretch that no heart muscle can make.

Depolarisation spreads from cell to cell, so even the steepest QRS takes several milliseconds from
rest to full slope. A pacing spike is there at once. Spikes are found over all leads visible at a
moment and can be bridged before anything else is measured.
"""

import numpy as np
import scipy as sp

from digitize.tracing import FS_HZ, Panel

_LEAST_MV = 0.12  # root of the summed squares over leads; smaller jumps drown in noise
_LEAST_RATIO = 5.0  # over the steepest step of the quiet stretch before
_QUIET_MS = (-60, -6)  # that stretch
_LEAST_RATIO_AFTER = 2.0  # over the steepest step just after: an upstroke goes on, a spike is over
_AFTER_MS = ((4, 16), (12, 30))  # after a jump that is held, after a blip of the pen's width
_EDGE_MS = 30  # recordings may begin and end with a jump of their own
_NARROW_MS = 22  # a printed spike is as wide as the pen: 0.5 mm at 25 mm/s is 20 ms
_BRIDGE_MS = (6, 14)  # from before the spike to after it
_APART_MS = 20  # nearer jumps belong to one spike


def find_spikes(mv: np.ndarray) -> np.ndarray:
    """Return the sample numbers of pacing spikes, increasing.

    Parameters
    ----------
    mv : ndarray, (panels, n)
        Panels on one raster of 500 samples per second, NaN where nothing is printed.
    """
    step = _root_of_squares(np.diff(mv, axis=1, prepend=mv[:, :1]))
    narrow = _root_of_squares(mv - _median_level(mv))
    sudden = np.minimum(step, 2 * narrow)
    after = np.minimum(*(_steepest(step, *window) for window in _AFTER_MS))
    least = np.maximum(_LEAST_RATIO * _steepest(step, *_QUIET_MS), _LEAST_RATIO_AFTER * after)
    sudden[sudden < np.maximum(_LEAST_MV, least)] = 0
    sudden[: _samples(_EDGE_MS)] = sudden[-_samples(_EDGE_MS) :] = 0
    found, _ = sp.signal.find_peaks(sudden, distance=_samples(_APART_MS))
    return found


def bridge_spikes(panel: Panel, spikes_s: np.ndarray) -> np.ndarray:
    """Return the panel's millivolts with a straight line under each spike, (n,)."""
    mv = panel.mv.copy()
    before, after = (_samples(ms) for ms in _BRIDGE_MS)
    for spike_s in spikes_s:
        at = round((spike_s - panel.start_s) * panel.fs_hz)
        left, right = at - before, at + after
        if left >= 0 and right < len(mv):
            mv[left : right + 1] = np.linspace(mv[left], mv[right], right - left + 1)
    return mv


def _samples(ms: float) -> int:
    return round(ms * FS_HZ / 1000)


def _root_of_squares(mv: np.ndarray) -> np.ndarray:
    return np.sqrt(np.nansum(mv**2, axis=0))


def _median_level(mv: np.ndarray) -> np.ndarray:
    """Running median wider than a spike: what is left of the trace when spikes are gone."""
    width = 2 * _samples(_NARROW_MS) + 1
    # Row by row: the one-dimensional filter is several times quicker.
    return np.array([sp.ndimage.median_filter(row, size=width) for row in np.nan_to_num(mv)])


def _steepest(step: np.ndarray, from_ms: float, to_ms: float) -> np.ndarray:
    """Largest step between two times relative to each sample."""
    size = _samples(to_ms) - _samples(from_ms) + 1
    shift = _samples(from_ms) + size // 2
    padded = np.pad(step, abs(shift) + size, mode="edge")
    centred = sp.ndimage.maximum_filter1d(padded, size)
    start = abs(shift) + size + shift
    return centred[start : start + len(step)]

"""One averaged lead about its level just before the QRS, with the errors that matter there.

Noise that raises a whole beat raises its level too: an amplitude is as sure as each beat's own
difference from its own level. A notch is surer still: what makes a whole beat larger or smaller,
as breathing does, does not bend it.
"""

from dataclasses import dataclass

import numpy as np
import scipy as sp

from measure.average import DominantBeat
from measure.quantity import Quantity

_LEVEL_MS = 12  # before the QRS onset
_POOL_MS = 20  # few beats: the scatter at one place is taken with its neighbours
_BEND_MS = 10  # what is quicker than this bends
_LEAST_SE_MV = 0.001


@dataclass(frozen=True, eq=False)
class LevelledLead:
    """One lead of the dominant beat; all arrays (n,), times in ms after the fiducial point.

    `se_mv` is the standard error of an amplitude above the level, `bend_se_mv` that of the depth
    of a notch or slur.
    """

    name: str
    time_ms: np.ndarray
    mv: np.ndarray
    se_mv: np.ndarray
    bend_se_mv: np.ndarray
    beats: int

    def quantity(self, value: float, se: float, unit: str = "mV") -> Quantity:
        """A value of this lead."""
        return Quantity(float(value), float(se), unit, (self.name,), self.beats)

    def inside(self, from_ms: float, to_ms: float) -> slice:
        """Places between two times, both included."""
        start, stop = np.searchsorted(self.time_ms, [from_ms, to_ms + 0.5])
        return slice(int(start), int(stop))


def about_level(beat: DominantBeat, row: int, onset_ms: float) -> LevelledLead:
    """Return one lead about its level just before `onset_ms`."""
    onset = int(np.searchsorted(beat.time_ms, onset_ms))
    before = slice(max(onset - _LEVEL_MS, 0), onset + 1)
    mv, se_mv = beat.mv[row], beat.se_mv[row]
    least = max(float(np.nanmin(se_mv)), _LEAST_SE_MV)
    level_se = float(np.nanmean(se_mv[before])) / 2
    above_se, bend_se = np.hypot(se_mv, level_se), se_mv
    if beat.single_mv is not None and beat.beats[row] > 1:
        single = beat.single_mv[row]
        single = single[np.isfinite(single[:, before]).all(axis=1)]
        above = single - single[:, before].mean(axis=1, keepdims=True)
        rest = np.nan_to_num(above - (mv - mv[before].mean()))
        quick = rest - sp.ndimage.gaussian_filter1d(rest, _BEND_MS, axis=1)
        above_se, bend_se = (_se(part) for part in (rest, quick))
    return LevelledLead(
        name=beat.leads[row],
        time_ms=beat.time_ms,
        mv=mv - np.nanmean(mv[before]),
        se_mv=np.maximum(above_se, least),
        bend_se_mv=np.maximum(bend_se, least),
        beats=beat.beats[row],
    )


def _se(rest: np.ndarray) -> np.ndarray:
    """Standard error of the mean from each beat's rest, (beats, n), pooled over neighbours."""
    count = len(rest)
    variance = sp.ndimage.uniform_filter1d((rest**2).sum(axis=0), _POOL_MS, mode="nearest")
    return np.sqrt(np.maximum(variance, 0) / (count * max(count - 1, 1)))

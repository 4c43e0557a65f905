"""Whether what rises before the QRS is a P wave: it must keep step with the QRS.

The waves of fibrillation and flutter, or of atria that beat on their own, rise before a QRS too,
but differently before each one. So each beat is compared with the average of the others over all
leads it shows.
"""

from collections.abc import Sequence

import numpy as np

from measure.activity import Leads
from measure.average import DominantBeat
from measure.beats import Beats
from measure.edges import Edge

_LEAST_MV = 0.012  # root mean square over the leads at its highest
_LEAST_LEAD_MV = 0.02  # in one lead: a deflection counts from 20 uV (CSE working party)
_LEAST_RATIO = 2.5  # over the standard error of the average, root mean square
_STEADY_BEATS = 4  # from here the beats can be compared with one another
# Mean correlation of a beat's wave with that of the others. Where intervals are irregular or too
# short to hold a P wave of their own, fibrillation and flutter are likelier, and after a pacing
# spike its own tail rises before the QRS: more is asked.
_LEAST_STEP = 0.6
_LEAST_STEP_DOUBTFUL = 0.90
_IRREGULAR = 0.10
_FAST_RR_MS = 500.0
_LEVEL_MS = 12


def is_p_wave(
    beat: DominantBeat, leads: Leads, rows: Sequence[int], beats: Beats, edges: tuple[Edge, Edge]
) -> bool:
    """Return whether a wave of these leads is high enough, sure enough and steady enough."""
    start, stop = (leads.index(edge.at_ms) for edge in edges)
    wave = _about_ends(leads.mv, start, stop)
    wave[~leads.seen[:, start:stop]] = 0
    high_mv = np.sqrt((wave**2).mean(axis=0)).max()
    if high_mv < (_LEAST_MV if len(rows) > 1 else _LEAST_LEAD_MV):
        return False
    se = np.nan_to_num(beat.se_mv[list(rows), start:stop], nan=np.inf)
    if np.sqrt(np.mean((wave / np.maximum(se, 1e-4)) ** 2)) < _LEAST_RATIO:
        return False
    if len(rows) == 1 or beat.single_mv is None:
        return True
    step, count = _step(beat.single_mv[list(rows)], start, stop)
    return count < _STEADY_BEATS or step >= _needed_step(beats)


def _about_ends(mv: np.ndarray, start: int, stop: int) -> np.ndarray:
    """A stretch of each lead about the line between the levels at its ends; time is last."""
    left = mv[..., max(start - _LEVEL_MS, 0) : start + 1].mean(axis=-1, keepdims=True)
    right = mv[..., stop : stop + _LEVEL_MS].mean(axis=-1, keepdims=True)
    share = np.linspace(0, 1, stop - start)
    return mv[..., start:stop] - left * (1 - share) - right * share


def _step(single_mv: np.ndarray, start: int, stop: int) -> tuple[float, int]:
    """Mean correlation of each beat's wave with the others' average, and how many were compared."""
    waves = _about_ends(single_mv, start, stop)
    whole = np.isfinite(waves).all(axis=2)
    waves = np.where(whole[:, :, None], waves, 0)
    count, total = whole.sum(axis=1), waves.sum(axis=1)
    found = []
    for k in range(waves.shape[1]):
        shared = whole[:, k] & (count > 1)
        one = waves[shared, k]
        others = (total[shared] - one) / (count[shared, None] - 1)
        size = np.sqrt((one**2).sum() * (others**2).sum())
        if size > 0:
            found.append(float((one * others).sum() / size))
    return (float(np.mean(found)) if found else 0.0), len(found)


def _needed_step(beats: Beats) -> float:
    irregular = beats.unsteadiness > _IRREGULAR
    fast = len(beats.rr_s) > 0 and 1000 * np.median(beats.rr_s) < _FAST_RR_MS
    doubtful = irregular or fast or bool(beats.paced.any())
    return _LEAST_STEP_DOUBTFUL if doubtful else _LEAST_STEP

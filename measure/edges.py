"""The ends of QRS, T and P in a set of averaged leads, each with a standard error.

All three follow one pattern: find the wave, go outward to where the movement of the leads falls to
the quiet level beside it, then back to where the trace is further from that level than a
deflection must be to count. Constants come from the paper and from what counts as a deflection,
not from any collection of ECGs.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy as sp

from measure.activity import Leads, leave, reach

# A slope that the eye tells from flat: 1 mV/s is 1 mm up in 2.5 mm along at the standard run.
_QRS_SLOPE_MV_S = 1.0
_P_SLOPE_MV_S = 0.35
# A deflection counts from 20 uV (CSE working party); over leads that see it at all angles the
# root mean square is about two thirds of its largest, half of it for the smaller P.
_QRS_DISTANCE_MV = 0.010
_P_DISTANCE_MV = 0.0066
_LIMITS = (0.5, 0.7, 1.0, 1.4, 2.0)  # of slope and distance: twice as keen an eye, or half
_SLOPING_SE_MS = 3.0
_AROUND_QRS_MS = (-200.0, 360.0)  # of it and what it is compared with
_QRS_PARABOLA_MS = 15
_P_PARABOLA_MS = 31
_QRS_GAP_MS = 12
_P_GAP_MS = 25
_CORE = 0.1  # of the steepest movement of the QRS: more than a P wave ever has
_CORE_GAP_MS = 20
_LEAD_IN_MS = 45  # a QRS may begin this long before it is that steep
_ST_MS = (15, 55)  # after a moment: the slope of the ST segment that is not QRS
_SMOOTH_T_MS = 6
_DISAGREE_MS = 16
_LEVEL_MS = 12
# Tail of a Gaussian-like descent: the tangent at its steepest place (1 SD) meets the base at 2 SD,
# 5 % of the height are left at 2.448 SD.
_TAIL_SD = 1.448
_P_FRACTIONS = (0.2, 0.4)
_CALM_MS = 30
_NOISE_FACTOR = 3.0
_MOST_NOISE = 1.5  # times the slope: what scatters more than that is a wave, as in flutter
_SHORTEST_P_MS = 20
_LEAST_SE_MS = 1.5  # a boundary is a definition: no curve has a corner there


@dataclass(frozen=True)
class Edge:
    """A boundary in ms after the fiducial point with its standard error."""

    at_ms: float
    se_ms: float


@dataclass(frozen=True)
class _Calm:
    """Movement over a calm stretch: its level and its scatter in mV/s."""

    level: float
    scatter: float

    def least(self, slope_mv_s: float) -> float:
        """Movement that is not noise: over the level by a slope, or by its own scatter."""
        return self.level + max(
            slope_mv_s, min(_NOISE_FACTOR * self.scatter, _MOST_NOISE * slope_mv_s)
        )


@dataclass(frozen=True, eq=False)
class _Motion:
    """Movement around a QRS: root mean square slopes in mV/s, (n,), and places in them.

    `moving` is about rest, `about` about the slope that follows, as where an ST segment rises.
    The QRS moves most at `middle` and lies between `first` and `last`. Of each the calm level and
    its scatter: before the QRS, and of both after it.
    """

    moving: np.ndarray
    about: np.ndarray
    calm_before: _Calm
    calm_after: tuple[_Calm, _Calm]
    middle: int
    first: int
    last: int


def qrs_edges(
    leads: Leads, spike_ms: float | None = None, within_ms: tuple[float, float] | None = None
) -> tuple[Edge, Edge]:
    """Return onset and offset of the QRS around 0 ms; the onset is never before a pacing spike.

    Readers differ in what they still call movement: each end is looked for with several limits,
    and how far these disagree is its error. A steep end has none of it, a slow one much.

    `within_ms` are the ends of the QRS over all leads, where these are parts of them: there all
    movement between belongs to the QRS, also that which a calm stretch parts from the rest.
    """
    leads = leads.between(*_AROUND_QRS_MS)
    motion = _motion(leads, spike_ms)
    within = None
    if within_ms is not None:
        on, off = (leads.index(ms) for ms in within_ms)
        within = (on, off) if on < motion.middle < off else None
    onsets, offsets, doubts = [], [], []
    for limit in _LIMITS:
        offset, doubt_ms = _qrs_offset(leads, motion, limit, within)
        onsets.append(float(leads.time_ms[_qrs_onset(leads, motion, limit, within)]))
        offsets.append(float(leads.time_ms[offset]))
        doubts.append(doubt_ms)
    return _agreed(onsets), _agreed(offsets, float(np.median(doubts)))


def _agreed(at_ms: Sequence[float], doubt_ms: float = 0.0) -> Edge:
    """Mean of the middle three; all together lie within two standard errors either way."""
    ordered = sorted(at_ms)
    spread_ms = (ordered[-1] - ordered[0]) / 4
    return Edge(float(np.mean(ordered[1:-1])), math.hypot(_LEAST_SE_MS, spread_ms, doubt_ms))


def _motion(leads: Leads, spike_ms: float | None) -> _Motion:
    slopes, noise = leads.slopes(_QRS_PARABOLA_MS), leads.slope_noise(_QRS_PARABOLA_MS)
    moving = leads.size(slopes, noise)
    middle = leads.index(-60) + int(np.argmax(moving[leads.index(-60) : leads.index(60)]))
    first = leads.index(-170) if spike_ms is None else leads.index(spike_ms + 2)
    width = _ST_MS[1] - _ST_MS[0]
    following = np.roll(
        sp.ndimage.uniform_filter1d(slopes, width, axis=1), -sum(_ST_MS) // 2, axis=1
    )
    about = leads.size(slopes - following, noise)
    first, last = min(first, middle - 1), min(middle + 240, len(moving) - 30)
    return _Motion(
        moving=moving,
        about=about,
        calm_before=_calm(moving[first : middle + 1]),
        calm_after=(_calm(moving[middle:last]), _calm(about[middle:last])),
        middle=middle,
        first=first,
        last=last,
    )


def _qrs_onset(leads: Leads, motion: _Motion, limit: float, within: tuple[int, int] | None) -> int:
    """Place of the onset with `limit` times the usual limits of slope and distance."""
    moving, middle, first = motion.moving, motion.middle, motion.first
    least = motion.calm_before.least(limit * _QRS_SLOPE_MV_S)
    if within is not None:
        start = within[0] + int(np.argmax(moving[within[0] : middle + 1] > least))
    else:
        steep = moving > max(least, _CORE * moving[middle])
        core = reach(steep, middle, first, _CORE_GAP_MS)
        furthest = max(first, core - _LEAD_IN_MS)
        start = reach(moving > least, core, furthest, _QRS_GAP_MS)
        if start <= furthest + 1 and core > furthest:
            # No quiet stretch: the P wave runs into the QRS, which begins at the calmest place.
            start = furthest + int(np.argmin(moving[furthest:core]))
    before = start - _LEVEL_MS, start + 1
    away = leads.distance(leads.level(*before), leads.distance_noise(*before))
    return leave(away, start, limit * _QRS_DISTANCE_MV, 1, 40)


def _qrs_offset(
    leads: Leads, motion: _Motion, limit: float, within: tuple[int, int] | None
) -> tuple[int, float]:
    """Place where the movement ends, and the doubt in ms that a sloping ST segment leaves.

    Where the ST segment itself slopes, it is movement about that slope. Within a QRS of all
    leads, pauses do not end it.
    """
    middle, last = motion.middle, motion.last
    latest = None if within is None else within[1]
    plain, corrected = (
        _last_moving(m > calm.least(limit * _QRS_SLOPE_MV_S), middle, last, latest)
        for m, calm in zip((motion.moving, motion.about), motion.calm_after, strict=True)
    )
    sloping = plain - corrected > _DISAGREE_MS
    end = corrected if sloping else plain
    after = slice(end, end + 2 * _LEVEL_MS)
    places = np.arange(len(motion.moving)) - end
    line = np.polynomial.polynomial.polyfit(places[after], leads.mv[:, after].T, 1)
    away = leads.distance(
        line[0][:, None] + line[1][:, None] * places, leads.distance_noise(end, after.stop)
    )
    doubt_ms = _SLOPING_SE_MS if sloping else abs(plain - corrected) / 4
    return leave(away, end, limit * _QRS_DISTANCE_MV, -1, 40), doubt_ms


def _last_moving(moving: np.ndarray, middle: int, last: int, latest: int | None) -> int:
    if latest is None:
        return reach(moving, middle, last, _QRS_GAP_MS)
    return latest - int(np.argmax(moving[middle : latest + 1][::-1]))


def t_end(leads: Leads, qrs_off_ms: float, peak_before_ms: float, latest_ms: float) -> Edge | None:
    """Return the end of the T wave, None where no hump of the leads comes down again.

    The tangent at the steepest place of the descent, carried on as the tail of a Gaussian to 5 %
    of its height. The base is the quietest level after the wave, whose peak must come before
    `peak_before_ms`: what is later belongs to the next P wave.
    """
    smooth = sp.ndimage.gaussian_filter1d(leads.mv, _SMOOTH_T_MS, axis=1)
    leads = Leads(leads.time_ms, smooth, leads.seen, np.ones(len(smooth)))
    start, stop = leads.index(qrs_off_ms + 60), leads.index(latest_ms)
    if stop - start < 100:
        return None
    calm = sp.ndimage.uniform_filter1d(leads.size(leads.slopes(31)), 40)
    before = min(max(leads.index(peak_before_ms), start + 50), stop)
    top = start + int(np.argmax(calm[start:before]))
    base = top + int(np.argmin(calm[top:stop]))
    away = leads.distance(leads.level(base - 20, base + 20))
    peak = start + int(np.argmax(away[start:base])) if base > start else start
    fall = np.gradient(away)
    if base - peak < 20:
        return None
    steep = peak + int(np.argmin(fall[peak:base]))
    if not fall[steep] < 0:
        return None
    spread = away[steep] / -fall[steep]
    at_ms = min(float(leads.time_ms[steep] + _TAIL_SD * spread), latest_ms)
    return Edge(at_ms, math.hypot(4.0, 0.15 * spread))


def p_edges(leads: Leads, qrs_on_ms: float, earliest_ms: float) -> tuple[Edge, Edge] | None:
    """Return onset and offset of the P wave, None where nothing rises between the limits.

    The offset is where the descent from the level of half the height, carried on through a fifth,
    meets the level before the QRS: the PR segment itself often slopes.
    """
    moving = leads.size(leads.slopes(_P_PARABOLA_MS))
    stop, first = leads.index(qrs_on_ms), leads.index(earliest_ms)
    if stop - first < 50:
        return None
    away = leads.distance(leads.level(stop - _LEVEL_MS, stop - 1))
    away = sp.ndimage.uniform_filter1d(away, _LEVEL_MS + 3)
    top = first + 10 + int(np.argmax(moving[first + 10 : stop - 20]))
    least = _calm(moving[first : top + 1]).least(_P_SLOPE_MV_S)
    # The flat top of a broad P wave does not move, but it stands high.
    calm = first + int(np.argmin(sp.ndimage.uniform_filter1d(moving, _CALM_MS)[first : top + 1]))
    hump = np.minimum(away, leads.distance(leads.level(calm - _LEVEL_MS, calm + _LEVEL_MS)))
    high = hump > 0.5 * hump[max(top - 40, first) : stop].max()
    begin = reach((moving > least) | high, top, first, _P_GAP_MS)
    before = leads.distance(leads.level(begin - _LEVEL_MS, begin + 1))
    onset = _edge(
        leads, *(leave(before, begin, f * _P_DISTANCE_MV, 1, 40) for f in (1.0, 0.5, 2.0))
    )
    start = leads.index(onset.at_ms)
    if stop - start < _SHORTEST_P_MS:
        return None
    peak = start + int(np.argmax(away[start:stop]))
    floor = away[peak:stop].min()
    low, half = (
        peak + int(np.argmax(away[peak:stop] <= floor + f * (away[peak] - floor)))
        for f in _P_FRACTIONS
    )
    end_ms = min(float(2 * leads.time_ms[low] - leads.time_ms[half]), qrs_on_ms)
    if end_ms - onset.at_ms < _SHORTEST_P_MS:
        return None
    return onset, Edge(end_ms, math.hypot(_LEAST_SE_MS, (low - half) / 4))


def _calm(moving: np.ndarray) -> _Calm:
    """The calmest stretch."""
    level = sp.ndimage.uniform_filter1d(moving, _CALM_MS, mode="nearest")
    k = int(np.argmin(level))
    calm = moving[max(k - _CALM_MS // 2, 0) : k + _CALM_MS // 2]
    return _Calm(float(level[k]), float(calm.std()))


def _edge(leads: Leads, at: int, early: int, late: int) -> Edge:
    """Edge at a place; its error from where half and twice the distance would put it."""
    return Edge(float(leads.time_ms[at]), math.hypot(_LEAST_SE_MS, abs(late - early) / 4))

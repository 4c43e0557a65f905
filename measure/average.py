"""The dominant beat: the usual beats of each lead, aligned and averaged.

Wander of the baseline is
taken off at the same phase of every beat, before its P wave or QRS.
"""

from dataclasses import dataclass

import numpy as np
import scipy as sp

from digitize.tracing import Panel, Tracing
from measure.alignment import ALIGN_MS, QRS_MS, Strip, align_beats, cut_beats, quiet_mean, strip_of
from measure.beats import Beats
from measure.spikes import bridge_spikes

_RASTER_MS = 1.0  # finer than the samples: boundaries lie between them
_BEFORE_MS = 400  # holds a P wave with a PR of 300 ms
_AFTER_MS = 700
_LEVEL_MS = (-110, -70)  # phase at which the baseline is taken: between P wave and QRS mostly
_OUTLIER = 4.0  # times the usual distance from the average: such a beat is left out of its lead


@dataclass(frozen=True, eq=False)
class DominantBeat:
    """One averaged beat of all leads on a common time raster.

    `time_ms` is (n,), 0 at the fiducial point within the QRS. `mv` and `se_mv` are
    (len(leads), n): the average about the baseline before the P wave or QRS, and its standard
    error (scatter over beats and sigma of the samples together); NaN where no beat covers the
    place. `beats` counts the beats in each lead's average, 0 where there is none.
    `spike_ms` are the times of pacing spikes, (m,). `at_s` are the times in the recording of the
    fiducial points of the averaged beats, (k,), and `single_mv` the aligned beats themselves,
    (len(leads), k, n), NaN where a beat is cut, hidden or left out. `column_se_ms` is the error of
    bringing columns together that share no lead, 0 where a strip or simultaneous leads do it.
    `sample_ms` is the interval of the samples of a digital recording, 0 for a page.
    """

    leads: tuple[str, ...]
    time_ms: np.ndarray
    mv: np.ndarray
    se_mv: np.ndarray
    beats: tuple[int, ...]
    fs_hz: float
    spike_ms: tuple[float, ...] = ()
    at_s: tuple[float, ...] = ()
    single_mv: np.ndarray | None = None
    column_se_ms: float = 0.0
    sample_ms: float = 0.0

    def lead(self, name: str) -> np.ndarray:
        """Average of one lead in mV, (n,); KeyError where the lead is not there."""
        if name not in self.leads:
            raise KeyError(name)
        return self.mv[self.leads.index(name)]


def average_beats(tracing: Tracing, beats: Beats) -> DominantBeat:
    """Return the average of the dominant beats of each lead.

    A beat whose QRS is cut by the edge of a panel, or hidden, is left out of that lead. Of a lead
    that is printed twice the rhythm strip is taken, as it shows more beats.
    """
    raster_ms = np.arange(-_BEFORE_MS, _AFTER_MS + 1e-9, _RASTER_MS)
    at_s = beats.time_s[beats.dominant]
    usable_ms = _usable_ms(beats)
    panels = [tracing.lead(name) for name in tracing.leads]
    strips = [_levelled(panel, beats) for panel in panels]
    sigma = np.array([_usual_sigma(panel) for panel in panels])
    shift_ms, column_se_ms = align_beats(strips, at_s, raster_ms)
    at_s = at_s + shift_ms / 1000
    cut = cut_beats(strips, at_s, raster_ms)
    cut[:, _outside(raster_ms, usable_ms)] = np.nan
    _drop_outliers(cut, raster_ms)
    mv, se_mv = _mean_and_se(cut, sigma)
    qrs = (raster_ms >= QRS_MS[0]) & (raster_ms <= QRS_MS[1])
    counts = tuple(int(n) for n in np.isfinite(cut[:, :, qrs]).all(axis=2).sum(axis=1))
    return DominantBeat(
        leads=tracing.leads,
        time_ms=raster_ms,
        mv=mv,
        se_mv=se_mv,
        beats=counts,
        fs_hz=1000 / _RASTER_MS,
        spike_ms=_usual_spikes(at_s, beats.spike_s),
        at_s=tuple(float(t) for t in at_s),
        single_mv=cut,
        column_se_ms=column_se_ms,
        sample_ms=_sample_ms(tracing),
    )


def _sample_ms(tracing: Tracing) -> float:
    """Interval of the samples as recorded: where a wave ends between two of them is not known."""
    rates = [c.value for c in tracing.checks if c.name == "sampling_rate" and c.value is not None]
    return 1000 / min(rates) if rates else 0.0


def _usable_ms(beats: Beats) -> tuple[np.ndarray, np.ndarray]:
    """How far before and after each dominant beat is free of its neighbours' QRS."""
    gap_ms = 1000 * np.diff(beats.time_s)
    before = np.concatenate([[np.inf], gap_ms - ALIGN_MS[1]])
    after = np.concatenate([gap_ms + ALIGN_MS[0], [np.inf]])
    return before[beats.dominant], after[beats.dominant]


def _outside(raster_ms: np.ndarray, usable_ms: tuple[np.ndarray, np.ndarray]) -> np.ndarray:
    before, after = usable_ms
    return (raster_ms < -before[:, None]) | (raster_ms > after[:, None])


def _usual_sigma(panel: Panel) -> float:
    finite = panel.sigma_mv[np.isfinite(panel.sigma_mv)]
    return float(np.median(finite)) if len(finite) else 0.0


def _levelled(panel: Panel, beats: Beats) -> Strip:
    """A panel with its spikes bridged and the wander of its baseline taken off."""
    mv = bridge_spikes(panel, beats.spike_s)
    at_s = beats.time_s[beats.dominant]
    knots_s, levels = [], []
    for beat_s in at_s:
        left, right = (
            round((beat_s + ms / 1000 - panel.start_s) * panel.fs_hz) for ms in _LEVEL_MS
        )
        stretch = mv[max(left, 0) : max(right, 0)]
        stretch = stretch[np.isfinite(stretch)]
        if len(stretch) > (right - left) // 2:
            knots_s.append(beat_s + np.mean(_LEVEL_MS) / 1000)
            levels.append(float(np.median(stretch)))
    return strip_of(panel, mv - _wander(panel.time_s, np.array(knots_s), np.array(levels)))


def _wander(time_s: np.ndarray, knots_s: np.ndarray, levels: np.ndarray) -> np.ndarray | float:
    """Smooth line through the levels, flat beyond the outermost."""
    if len(knots_s) == 0:
        return 0.0
    if len(knots_s) < 3:
        return np.interp(time_s, knots_s, levels)
    line = sp.interpolate.PchipInterpolator(knots_s, levels)
    return line(np.clip(time_s, knots_s[0], knots_s[-1]))


def _drop_outliers(cut: np.ndarray, raster_ms: np.ndarray) -> None:
    """Blank, lead by lead, the beats that lie far from the median beat."""
    window = (raster_ms >= ALIGN_MS[0]) & (raster_ms <= 400)
    middle = _quiet_nanmedian(cut, axis=1)
    distance = _quiet_nanmedian(np.abs(cut - middle[:, None])[:, :, window], axis=2)
    usual = _quiet_nanmedian(distance, axis=1)
    far = distance > _OUTLIER * usual[:, None] + 0.02
    few = np.isfinite(distance).sum(axis=1) < 4
    cut[far & ~few[:, None]] = np.nan


def _mean(cut: np.ndarray) -> np.ndarray:
    """Average over beats, (leads, n), that does not jump where a beat ends at its panel's edge.

    Slopes are averaged and summed up from the fiducial point, where every beat of a lead is seen:
    the same as averaging where all beats are there, and smooth where some are not.
    """
    middle = _BEFORE_MS
    slope = quiet_mean(np.diff(cut, axis=2), axis=1)
    start = quiet_mean(cut[:, :, middle], axis=1)[:, None]
    after = start + np.cumsum(slope[:, middle:], axis=1)
    before = start - np.cumsum(slope[:, :middle][:, ::-1], axis=1)[:, ::-1]
    return np.concatenate([before, start, after], axis=1)


def _mean_and_se(cut: np.ndarray, sigma: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Average over beats and its standard error, (leads, n) each.

    With few beats the scatter at one place is itself uncertain: it is pooled over the places
    within 20 ms.
    """
    n = np.isfinite(cut).sum(axis=1)
    mean = _mean(cut)
    squares = np.nansum((cut - quiet_mean(cut, axis=1)[:, None]) ** 2, axis=1)
    width = round(40 / _RASTER_MS) | 1
    freedom = np.maximum(n - 1, 0).astype(float)
    pooled = sp.ndimage.uniform_filter1d(squares, width, axis=1) / np.maximum(
        sp.ndimage.uniform_filter1d(freedom, width, axis=1), 1e-9
    )
    variance = np.where(n > 1, np.maximum(pooled, sigma[:, None] ** 2), sigma[:, None] ** 2)
    return mean, np.where(n > 0, np.sqrt(variance / np.maximum(n, 1)), np.nan)


def _usual_spikes(at_s: np.ndarray, spike_s: np.ndarray) -> tuple[float, ...]:
    """Times in ms after the fiducial point at which most beats have a spike."""
    if len(spike_s) == 0:
        return ()
    lag_ms = np.sort((1000 * (spike_s[None, :] - at_s[:, None])).ravel())
    lag_ms = lag_ms[(lag_ms > -_BEFORE_MS) & (lag_ms < ALIGN_MS[1])]
    groups = np.split(lag_ms, np.flatnonzero(np.diff(lag_ms) > 15) + 1)
    return tuple(float(np.median(g)) for g in groups if len(g) >= 0.5 * len(at_s))


def _quiet_nanmedian(values: np.ndarray, axis: int) -> np.ndarray:
    """Median of the finite values, NaN where there is none."""
    ordered = np.sort(values, axis=axis)  # NaN goes last
    n = np.isfinite(values).sum(axis=axis)
    low, high = np.maximum((n - 1) // 2, 0), n // 2
    high = np.minimum(high, values.shape[axis] - 1)
    pick = [
        np.take_along_axis(ordered, np.expand_dims(k, axis), axis).squeeze(axis)
        for k in (low, high)
    ]
    return (pick[0] + pick[1]) / 2

"""Beats cut out of their panels and shifted until they lie on one another.

Each beat is shifted by a fraction of a sample until the leads that show it fit the average best.
Where columns follow one another the strip alone sees all beats, and it alone decides; columns that
share no lead are brought together by where their QRS begins.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy as sp

from digitize.tracing import Panel
from measure.activity import leads_of
from measure.edges import qrs_edges

ALIGN_MS = (-120, 160)  # the QRS, whose shape aligns
QRS_MS = (-90, 110)  # this much of a beat must be visible, or the QRS counts as cut
_SHIFTS_MS = np.arange(-90.0, 90.5, 1.0)  # a beat may be found at either peak of a notched R
_ROUNDS = 3
_MEDOIDS = 3
_COMMON = 0.75
_COLUMN_SE_MS = 5.0  # leads of one column may show the first part of a QRS later than others


@dataclass(frozen=True, eq=False)
class Strip:
    """One lead over time, ready to be read between its samples."""

    start_s: float
    fs_hz: float
    spline: np.ndarray  # cubic B-spline coefficients of the bridged samples, (n,)
    seen: np.ndarray  # True where there is a sample, (n,)


def strip_of(panel: Panel, mv: np.ndarray) -> Strip:
    """A lead whose millivolts (n,) stand at the times of `panel`."""
    index = np.arange(len(mv))
    seen = np.isfinite(mv)
    bridged = np.interp(index, index[seen], mv[seen]) if seen.any() else np.zeros(len(mv))
    spline = sp.ndimage.spline_filter1d(bridged, order=3, mode="nearest")
    return Strip(panel.start_s, panel.fs_hz, spline, seen)


def cut_beats(strips: Sequence[Strip], at_s: np.ndarray, raster_ms: np.ndarray) -> np.ndarray:
    """Return every lead around every beat, (leads, beats, n).

    NaN outside the panel and in gaps, and throughout where the QRS is not seen whole.
    """
    return np.stack([_cut(strip, at_s, raster_ms) for strip in strips])


def align_beats(
    strips: Sequence[Strip], at_s: np.ndarray, raster_ms: np.ndarray
) -> tuple[np.ndarray, float]:
    """Return the shift of each beat in ms that brings all leads together, and its error.

    Beats that show the same leads (a column) are aligned by all of them, then moved as one.
    """
    shift_ms = np.zeros(len(at_s))
    near_ms = raster_ms[_near(raster_ms, 1)]
    seen = np.isfinite(cut_beats(strips, at_s, near_ms)).any(axis=2)
    _, column = np.unique(seen, axis=1, return_inverse=True)
    averages = []
    for number in range(int(column.max()) + 1):
        members = np.flatnonzero(column == number)
        for turn in range(_ROUNDS):
            cut = cut_beats(strips, at_s[members] + shift_ms[members] / 1000, near_ms)
            shift_ms[members] += _shifts(cut, near_ms, medoid=turn == 0)
            shift_ms[members] -= np.median(shift_ms[members])
        cut = cut_beats(strips, at_s[members] + shift_ms[members] / 1000, raster_ms)
        averages.append(quiet_mean(cut, axis=1))
    moved_ms, se_ms = _meet(np.stack(averages, axis=1), raster_ms)
    return shift_ms + moved_ms[column], se_ms


def _meet(columns: np.ndarray, raster_ms: np.ndarray) -> tuple[np.ndarray, float]:
    """Shift of each column's average, (leads, columns, n), by the leads that columns share.

    Columns that share none are brought together by where their QRS begins.
    """
    seen = np.isfinite(columns).any(axis=2)
    moved_ms = np.zeros(columns.shape[1])
    together = seen.T.astype(int) @ seen.astype(int) > 0
    count, group = sp.sparse.csgraph.connected_components(together, directed=False)
    onset_ms = np.full(len(moved_ms), np.nan)
    for number in range(count):
        members = np.flatnonzero(group == number)
        if not seen[:, members].any():
            continue
        for turn in range(_ROUNDS):
            moved = _moved(columns[:, members], moved_ms[members], raster_ms)
            moved_ms[members] += _shifts(moved[_common(moved)], raster_ms, medoid=turn == 0)
            moved_ms[members] -= np.median(moved_ms[members])
        moved = _moved(columns[:, members], moved_ms[members], raster_ms)
        onset_ms[members] = qrs_edges(leads_of(raster_ms, quiet_mean(moved, axis=1)))[0].at_ms
    apart = len(np.unique(onset_ms[np.isfinite(onset_ms)])) > 1
    if not apart:
        return moved_ms, 0.0
    return moved_ms + np.nan_to_num(onset_ms - np.nanmedian(onset_ms)), _COLUMN_SE_MS


def _moved(columns: np.ndarray, by_ms: np.ndarray, raster_ms: np.ndarray) -> np.ndarray:
    """Each column's average later by its own shift, NaN where nothing was seen."""
    moved = np.full_like(columns, np.nan)
    for lead, column in np.argwhere(np.isfinite(columns).any(axis=2)):
        row = columns[lead, column]
        moved[lead, column] = np.interp(raster_ms + by_ms[column], raster_ms, row)
    return moved


def quiet_mean(values: np.ndarray, axis: int) -> np.ndarray:
    """Mean of the finite values, NaN where there is none."""
    n = np.isfinite(values).sum(axis=axis)
    return np.where(n > 0, np.nansum(values, axis=axis) / np.maximum(n, 1), np.nan)


def _cut(strip: Strip, at_s: np.ndarray, raster_ms: np.ndarray) -> np.ndarray:
    """One lead around each beat, (beats, n)."""
    at = (at_s[:, None] + raster_ms[None, :] / 1000 - strip.start_s) * strip.fs_hz
    left, right = np.floor(at).astype(int), np.ceil(at).astype(int)
    last = len(strip.seen) - 1
    seen = (left >= 0) & (right <= last)
    seen &= strip.seen[np.clip(left, 0, last)] & strip.seen[np.clip(right, 0, last)]
    qrs = (raster_ms >= QRS_MS[0]) & (raster_ms <= QRS_MS[1])
    seen &= seen[:, qrs].all(axis=1, keepdims=True)
    values = np.full(at.shape, np.nan)
    values[seen] = sp.ndimage.map_coordinates(
        strip.spline, at[seen][None], order=3, mode="nearest", prefilter=False
    )
    return values


def _common(cut: np.ndarray) -> np.ndarray:
    """True for the leads that show the most beats.

    Where columns follow one another only the strip sees all beats. The leads of a column would
    hold its beats together, at whatever time each was put, against the one lead that knows better.
    """
    count = np.isfinite(cut).any(axis=2).sum(axis=1)
    return count >= _COMMON * count.max()


def _shifts(cut: np.ndarray, raster_ms: np.ndarray, *, medoid: bool) -> np.ndarray:
    """Shift of each beat in ms at which its leads fit a reference best, to a fraction.

    The reference is the average, or at first, when the average is still blurred, that one of a
    few beats which the others fit best.
    """
    slope = np.diff(cut, axis=2)[:, :, _near(raster_ms)]
    inner = slice(-int(_SHIFTS_MS[0]), slope.shape[2] - int(_SHIFTS_MS[-1]))
    if medoid:
        tried = np.unique(np.linspace(0, cut.shape[1] - 1, _MEDOIDS + 2).astype(int)[1:-1])
        references = [slope[:, k, inner] for k in tried]
    else:
        references = [quiet_mean(slope[:, :, inner], axis=1)]
    cost = min(_costs(slope, references), key=lambda c: float(c.min(axis=1).sum()))
    best = np.argmin(cost, axis=1)
    return np.array([_vertex(row, k) for row, k in zip(cost, best, strict=True)])


def _near(raster_ms: np.ndarray, beyond_ms: float = 0) -> slice:
    """The places at which a beat may be looked at while it is shifted; the step is 1 ms."""
    low_ms, high_ms = ALIGN_MS[0] + _SHIFTS_MS[0], ALIGN_MS[1] + _SHIFTS_MS[-1] + beyond_ms
    start, stop = np.searchsorted(raster_ms, [low_ms - 0.5, high_ms + 0.5])
    return slice(int(start), int(stop))


def _costs(slope: np.ndarray, references: Sequence[np.ndarray]) -> list[np.ndarray]:
    """Squared difference of each beat from each reference at each shift, (beats, shifts).

    Over the places p that both show, the sum of (slope[p + shift] - reference[p]) squared is three
    correlations, which are products of spectra. `slope` is (leads, beats, n) and holds the places
    at every shift, a reference (leads, n - shifts + 1).
    """
    size = sp.fft.next_fast_len(slope.shape[2], real=True)
    beats = [sp.fft.rfft(part, size) for part in _squares_values_ones(slope)]
    costs = []
    for reference in references:
        squares, values, ones = (
            sp.fft.rfft(part, size).conj()[:, None] for part in _squares_values_ones(reference)
        )
        spectrum = beats[0] * ones - 2 * beats[1] * values + beats[2] * squares
        costs.append(sp.fft.irfft(spectrum.sum(axis=0), size)[:, : len(_SHIFTS_MS)])
    return costs


def _squares_values_ones(values: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Squares, values, and 1 for each value; 0 where there is none."""
    filled = np.nan_to_num(values)
    return filled**2, filled, np.isfinite(values).astype(float)


def _vertex(cost: np.ndarray, k: int) -> float:
    """Shift at the minimum of a parabola through the lowest cost and its neighbours."""
    if np.ptp(cost) == 0:
        return 0.0
    if not 0 < k < len(cost) - 1:
        return float(_SHIFTS_MS[k])
    left, middle, right = cost[k - 1 : k + 2]
    bend = left - 2 * middle + right
    return float(_SHIFTS_MS[k] + (0.5 * (left - right) / bend if bend > 0 else 0))

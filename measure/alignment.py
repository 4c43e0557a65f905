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
    seen: np.ndarray  # 1.0 where there is a sample, (n,)


def strip_of(panel: Panel, mv: np.ndarray) -> Strip:
    """A lead whose millivolts (n,) stand at the times of `panel`."""
    index = np.arange(len(mv))
    seen = np.isfinite(mv)
    bridged = np.interp(index, index[seen], mv[seen]) if seen.any() else np.zeros(len(mv))
    spline = sp.ndimage.spline_filter1d(bridged, order=3, mode="nearest")
    return Strip(panel.start_s, panel.fs_hz, spline, seen.astype(float))


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
    seen = np.isfinite(cut_beats(strips, at_s, raster_ms)).any(axis=2)
    _, column = np.unique(seen, axis=1, return_inverse=True)
    averages = []
    for number in range(int(column.max()) + 1):
        members = np.flatnonzero(column == number)
        for turn in range(_ROUNDS):
            cut = cut_beats(strips, at_s[members] + shift_ms[members] / 1000, raster_ms)
            shift_ms[members] += _shifts(cut, raster_ms, medoid=turn == 0)
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
    values = sp.ndimage.map_coordinates(
        strip.spline, at[None], order=3, mode="nearest", prefilter=False
    )
    index = np.arange(len(strip.seen))
    values[np.interp(at, index, strip.seen, left=0, right=0) < 1 - 1e-9] = np.nan
    qrs = (raster_ms >= QRS_MS[0]) & (raster_ms <= QRS_MS[1])
    values[~np.isfinite(values[:, qrs]).all(axis=1)] = np.nan
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
    inside = (raster_ms >= ALIGN_MS[0]) & (raster_ms <= ALIGN_MS[1])
    places = np.flatnonzero(inside)
    slope = np.diff(cut, axis=2)
    if medoid:
        tried = np.unique(np.linspace(0, cut.shape[1] - 1, _MEDOIDS + 2).astype(int)[1:-1])
        references = [slope[:, k : k + 1, places] for k in tried]
    else:
        references = [quiet_mean(slope[:, :, places], axis=1)[:, None, :]]
    costs = [_costs(slope, reference, places) for reference in references]
    cost = min(costs, key=lambda c: float(c.min(axis=1).sum()))
    best = np.argmin(cost, axis=1)
    return np.array([_vertex(row, k) for row, k in zip(cost, best, strict=True)])


def _costs(slope: np.ndarray, reference: np.ndarray, places: np.ndarray) -> np.ndarray:
    """Squared difference of each beat from the reference at each shift, (beats, shifts)."""
    steps = _SHIFTS_MS.astype(int)  # the raster's step is 1 ms
    return np.stack(
        [np.nansum((slope[:, :, places + step] - reference) ** 2, axis=(0, 2)) for step in steps],
        axis=1,
    )


def _vertex(cost: np.ndarray, k: int) -> float:
    """Shift at the minimum of a parabola through the lowest cost and its neighbours."""
    if np.ptp(cost) == 0:
        return 0.0
    if not 0 < k < len(cost) - 1:
        return float(_SHIFTS_MS[k])
    left, middle, right = cost[k - 1 : k + 2]
    bend = left - 2 * middle + right
    return float(_SHIFTS_MS[k] + (0.5 * (left - right) / bend if bend > 0 else 0))

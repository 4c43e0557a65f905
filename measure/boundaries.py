"""Where P, QRS and T begin and end, over all leads and lead by lead.

QRS first, since it is the clearest; then the end of T, which limits where the P wave of the next
beat may begin; then P. The same search runs over all leads together and over each alone.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from measure.activity import Leads, leads_of
from measure.average import DominantBeat
from measure.beats import Beats
from measure.edges import Edge, p_edges, qrs_edges, t_end
from measure.p_wave import is_p_wave
from measure.quantity import Quantity, missing

_SHORTEST_WAVE_MS = 6.0  # CSE working party (from memory)
_LONGEST_PR_MS = 330
_BEFORE_QRS_MS = 150  # a T wave must be over this long before the next QRS
_LATEST_T_PEAK_MS = 480  # after the QRS onset, at 60/min; shortens as the cube root of RR


@dataclass(frozen=True)
class Edges:
    """Boundaries of one lead or of all leads together, in ms after the fiducial point."""

    p_on_ms: Quantity
    p_off_ms: Quantity
    qrs_on_ms: Quantity
    qrs_off_ms: Quantity
    t_off_ms: Quantity


@dataclass(frozen=True)
class Boundaries:
    """Boundaries of the dominant beat: `overall` over all leads, `by_lead` for each lead.

    `paced_spike_ms` is the time of a pacing spike before the QRS, None where there is none.
    """

    overall: Edges
    by_lead: Mapping[str, Edges]
    paced_spike_ms: float | None = None


def find_boundaries(beat: DominantBeat, beats: Beats) -> Boundaries:
    """Return the boundaries of the dominant beat with their standard errors.

    A paced QRS begins after its spike, not at it. A P wave is reported only where it stands out of
    the scatter of the averaged beats: the waves of fibrillation do not keep step with the QRS.
    """
    used = [k for k, count in enumerate(beat.beats) if count > 0]
    spikes = [ms for ms in beat.spike_ms if -160 < ms < 30]
    spike_ms = max(spikes) if spikes else None
    overall = _edges_of(beat, used, beats, spike_ms, None)
    by_lead = {
        name: _edges_of(beat, [k], beats, spike_ms, overall)
        if k in used
        else _no_edges("no whole beat of this lead is visible")
        for k, name in enumerate(beat.leads)
    }
    return Boundaries(overall, by_lead, spike_ms)


def _usual_rr_ms(beats: Beats) -> float | None:
    """Median interval that ends in a dominant beat, None with a single beat."""
    rr_ms = 1000 * beats.rr_s
    if len(rr_ms) == 0:
        return None
    before_dominant = rr_ms[beats.dominant[1:]]
    return float(np.median(before_dominant if len(before_dominant) else rr_ms))


def _edges_of(
    beat: DominantBeat,
    rows: list[int],
    beats: Beats,
    spike_ms: float | None,
    overall: Edges | None,
) -> Edges:
    """Boundaries of some leads together; those of one lead stay within the overall ones."""
    if not rows:
        return _no_edges("no whole beat is visible")
    single_mv = beat.single_mv if len(rows) > 1 else None  # the scatter of one lead is unsure
    leads = leads_of(beat.time_ms, beat.mv, rows, single_mv)
    names = tuple(beat.leads[k] for k in rows)
    count = max(beat.beats[k] for k in rows)

    def quantity(edge: Edge) -> Quantity:
        columns_ms = beat.column_se_ms if len(rows) > 1 else 0.0
        se_ms = math.hypot(edge.se_ms, columns_ms, beat.sample_ms / math.sqrt(12))
        return Quantity(edge.at_ms, se_ms, "ms", names, count)

    if overall is not None and not overall.qrs_on_ms.known:
        return overall
    within_ms = (overall.qrs_on_ms.value, overall.qrs_off_ms.value) if overall else None
    onset, offset = qrs_edges(leads, spike_ms, within_ms)
    if overall is not None:
        low_ms, high_ms = overall.qrs_on_ms.value, overall.qrs_off_ms.value
        onset = _within(onset, low_ms, high_ms, low_ms)
        offset = _within(offset, onset.at_ms, high_ms, high_ms)
    rr_ms = _usual_rr_ms(beats)
    t_off = _t_off(leads, onset, offset, rr_ms)
    p = _p_wave(beat, leads, rows, beats, onset, t_off)
    no_p = missing("ms", "no P wave stands out before the QRS")
    return Edges(
        p_on_ms=quantity(p[0]) if p else no_p,
        p_off_ms=quantity(p[1]) if p else no_p,
        qrs_on_ms=quantity(onset),
        qrs_off_ms=quantity(offset),
        t_off_ms=quantity(t_off) if t_off else missing("ms", "no end of the T wave can be seen"),
    )


def _within(edge: Edge, low_ms: float, high_ms: float, end_ms: float) -> Edge:
    """The edge of one lead within the QRS of all leads, whose own edge is `end_ms`.

    A lead that shows nothing yet may only look across the movement: between the two edges it is
    unsure. And what lasts less than 6 ms does not count as a wave, there or not.
    """
    at_ms = min(max(edge.at_ms, low_ms), high_ms)
    return Edge(at_ms, math.hypot(edge.se_ms, _SHORTEST_WAVE_MS / 2, (at_ms - end_ms) / 2))


def _t_off(leads: Leads, qrs_on: Edge, qrs_off: Edge, rr_ms: float | None) -> Edge | None:
    latest_ms = qrs_off.at_ms + 520
    peak_ms = qrs_on.at_ms + _LATEST_T_PEAK_MS
    if rr_ms is not None:
        latest_ms = min(latest_ms, max(rr_ms - _BEFORE_QRS_MS, qrs_off.at_ms + 200))
        peak_ms = qrs_on.at_ms + _LATEST_T_PEAK_MS * (rr_ms / 1000) ** (1 / 3)
    seen = np.flatnonzero(leads.seen.any(axis=0))
    return t_end(leads, qrs_off.at_ms, peak_ms, min(latest_ms, float(leads.time_ms[seen[-1]])))


def _p_wave(
    beat: DominantBeat,
    leads: Leads,
    rows: list[int],
    beats: Beats,
    qrs_on: Edge,
    t_off: Edge | None,
) -> tuple[Edge, Edge] | None:
    """Edges of a P wave that stands out of the scatter of the averaged beats."""
    earliest_ms = qrs_on.at_ms - _LONGEST_PR_MS
    rr_ms = _usual_rr_ms(beats)
    if t_off is not None and rr_ms is not None:
        earliest_ms = max(earliest_ms, t_off.at_ms - rr_ms)
    seen = np.flatnonzero(leads.seen.any(axis=0))
    found = p_edges(leads, qrs_on.at_ms, max(earliest_ms, float(leads.time_ms[seen[0]]) + 5))
    return found if found is not None and is_p_wave(beat, leads, rows, beats, found) else None


def _no_edges(reason: str) -> Edges:
    gap = missing("ms", reason)
    return Edges(gap, gap, gap, gap, gap)

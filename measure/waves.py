"""The shape of the dominant beat, lead by lead: deflections, notches, ST and T.

Amplitudes are measured from the level just before the QRS onset, the P wave from the line between
its own ends.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from measure.average import DominantBeat
from measure.boundaries import Boundaries, Edges
from measure.deflections import Deflection, Notch, find_deflections, find_notches, letters, smallest
from measure.levelled import LevelledLead, about_level
from measure.quantity import Quantity, missing

__all__ = ["Deflection", "LeadWaves", "Notch", "measure_waves"]

_START_MS = 20  # where a q or a small r begins
_ST_AFTER_J_MS = (0, 40, 60, 80)
_ST_HALF_WIDTH_MS = 4
_T_FROM_J_MS = 60


@dataclass(frozen=True)
class LeadWaves:
    """Everything measured within one lead of the dominant beat.

    `smallest_mv` is the amplitude from which a deflection at the start of the QRS counts in this
    lead: the published limit, or more where the noise asks for it; it is what an absent q was
    compared with.
    `st_mv` is keyed by ms after the J point: 0, 40, 60, 80. `qrs_complete` is False where the
    edge of the panel cuts the QRS.
    """

    lead: str
    shape: str  # "qRs", "rSR'", "QS", ...; a notched R says so
    deflections: tuple[Deflection, ...]
    notches: tuple[Notch, ...]
    r_peak_time_ms: Quantity  # lead's own QRS onset to the peak of the last R that is a peak
    net_area_mv_ms: Quantity
    st_mv: Mapping[int, Quantity]
    t_mv: Quantity  # signed peak of T
    p_mv: Quantity  # signed peak of P
    smallest_mv: float
    qrs_complete: bool
    beats: int

    def find(self, name: str) -> Deflection | None:
        """The deflection called `name`, None where there is none."""
        return next((d for d in self.deflections if d.name == name), None)


def measure_waves(beat: DominantBeat, boundaries: Boundaries) -> dict[str, LeadWaves]:
    """Return the waves of every lead of the tracing, keyed by lead."""
    overall = boundaries.overall
    return {
        name: _waves_of(
            about_level(beat, k, overall.qrs_on_ms.value), overall, boundaries.by_lead[name]
        )
        if beat.beats[k] > 0 and overall.qrs_on_ms.known
        else _nothing(name)
        for k, name in enumerate(beat.leads)
    }


def _waves_of(lead: LevelledLead, overall: Edges, own: Edges) -> LeadWaves:
    onset_ms, offset_ms = overall.qrs_on_ms.value, overall.qrs_off_ms.value
    qrs = lead.inside(onset_ms, offset_ms)
    time_ms, mv = lead.time_ms[qrs] - onset_ms, lead.mv[qrs]
    se_mv = lead.se_mv[qrs]
    deflections = find_deflections(time_ms, mv, se_mv)
    notches = find_notches(time_ms, mv, lead.bend_se_mv[qrs], deflections)
    area_se = float(se_mv.mean()) * (offset_ms - onset_ms)  # as if all errors had one sign
    return LeadWaves(
        lead=lead.name,
        shape=letters(deflections, notches),
        deflections=deflections,
        notches=notches,
        r_peak_time_ms=_r_peak_time(lead, deflections, own, onset_ms),
        net_area_mv_ms=lead.quantity(mv.sum() * (time_ms[1] - time_ms[0]), area_se, "mV ms"),
        st_mv={after: _st(lead, offset_ms + after) for after in _ST_AFTER_J_MS},
        t_mv=_t_wave(lead, overall),
        p_mv=_p_wave(lead, overall),
        smallest_mv=float(smallest(np.median(se_mv[:_START_MS]))),
        qrs_complete=True,
        beats=lead.beats,
    )


def _r_peak_time(
    lead: LevelledLead, deflections: tuple[Deflection, ...], own: Edges, onset_ms: float
) -> Quantity:
    """Time of the last R's highest point after the lead's own onset; flat tops are unsure."""
    upward = [d for d in deflections if d.amplitude_mv > 0]
    if not upward:
        return missing("ms", f"there is no R wave in {lead.name}")
    last = upward[-1]
    span = lead.inside(onset_ms + last.onset_ms, onset_ms + last.offset_ms)
    near_top = np.count_nonzero(lead.mv[span] > last.amplitude_mv - last.se_mv)
    onset = own.qrs_on_ms
    return lead.quantity(
        last.peak_ms + onset_ms - onset.value, np.hypot(onset.se, near_top / 4), "ms"
    )


def _st(lead: LevelledLead, at_ms: float) -> Quantity:
    near = lead.inside(at_ms - _ST_HALF_WIDTH_MS, at_ms + _ST_HALF_WIDTH_MS)
    if not np.isfinite(lead.mv[near]).all() or near.stop == near.start:
        return missing("mV", "the ST segment is not visible here")
    se = lead.se_mv[near].mean()
    return lead.quantity(lead.mv[near].mean(), se)


def _t_wave(lead: LevelledLead, overall: Edges) -> Quantity:
    if not overall.t_off_ms.known:
        return missing("mV", "no end of the T wave can be seen")
    from_ms = overall.qrs_off_ms.value + _T_FROM_J_MS
    return _peak(lead, from_ms, overall.t_off_ms.value, lead.mv, "the T wave is not visible here")


def _p_wave(lead: LevelledLead, overall: Edges) -> Quantity:
    if not overall.p_on_ms.known:
        return missing("mV", overall.p_on_ms.reason or "no P wave")
    ends_ms = [overall.p_on_ms.value, overall.p_off_ms.value]
    line = np.interp(lead.time_ms, ends_ms, [_level_at(lead, ms) for ms in ends_ms])
    start_ms, end_ms = ends_ms
    return _peak(lead, start_ms, end_ms, lead.mv - line, "the P wave is not visible here")


def _level_at(lead: LevelledLead, at_ms: float) -> float:
    near = lead.mv[lead.inside(at_ms - _ST_HALF_WIDTH_MS, at_ms + _ST_HALF_WIDTH_MS)]
    return float(near.mean()) if len(near) else float("nan")


def _peak(
    lead: LevelledLead, from_ms: float, to_ms: float, mv: np.ndarray, reason: str
) -> Quantity:
    """Signed value furthest from zero between two times."""
    span = lead.inside(from_ms, to_ms)
    part = mv[span]
    if len(part) == 0 or not np.isfinite(part).all():
        return missing("mV", reason)
    k = int(np.argmax(np.abs(part)))
    return lead.quantity(part[k], lead.se_mv[span][k])


def _nothing(name: str) -> LeadWaves:
    reason = "no whole beat of this lead is visible"
    gap = missing("mV", reason)
    return LeadWaves(
        lead=name,
        shape="not measured",
        deflections=(),
        notches=(),
        r_peak_time_ms=missing("ms", reason),
        net_area_mv_ms=missing("mV ms", reason),
        st_mv=dict.fromkeys(_ST_AFTER_J_MS, gap),
        t_mv=gap,
        p_mv=gap,
        smallest_mv=float(smallest(np.array(0.0))),
        qrs_complete=False,
        beats=0,
    )

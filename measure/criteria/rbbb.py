"""Right bundle branch block, complete and incomplete, by the AHA/ACCF/HRS statement of 2009."""

from measure.criteria import shape
from measure.criteria.case import Case
from measure.criteria.decide import (
    Limit,
    Look,
    clause,
    every,
    finding,
    look_at,
    some,
)
from measure.criteria.finding import Clause, Finding
from measure.criteria.lbbb import AHA
from measure.quantity import Quantity
from measure.waves import LeadWaves

WIDE_MS = 40.0  # the definition's measure of a wide S, taken for a wide R in V1 too
LATE_RPT_MS = 50.0
NORMAL_LATERAL_RPT_MS = 60.0  # what the statement calls late in V5 and V6 is beyond this


def judge(case: Case, precondition: Clause) -> tuple[Finding, ...]:
    """Complete and incomplete right bundle branch block."""
    shapes = pattern(case)
    complete = case.interval("qrs_ms", Limit(">=", 120, "ms"), what="QRS duration")
    incomplete = case.interval_within(
        "qrs_ms", Limit(">=", 110, "ms"), Limit("<", 120, "ms"), what="QRS duration"
    )
    return (
        finding(
            "rbbb_complete",
            "complete right bundle branch block (AHA/ACCF/HRS 2009)",
            AHA,
            [precondition, clause("QRS >= 120 ms", complete), *shapes],
        ),
        finding(
            "rbbb_incomplete",
            "incomplete right bundle branch block (AHA/ACCF/HRS 2009)",
            AHA,
            [precondition, clause("QRS 110 to 119 ms", incomplete), *shapes],
        ),
    )


def pattern(case: Case) -> tuple[Clause, ...]:
    """The clauses on shape, which complete and incomplete block share."""
    double = some(case.in_leads(("V1", "V2"), _r_then_larger_r))
    single = some(case.in_leads(("V1", "V2"), lambda w: _wide_r(case, w)))
    late = case.in_lead("V1", _late_in_v1)
    normal = every(case.in_leads(("V5", "V6"), _normal_in_lateral))
    return (
        clause("rsr', rsR' or rSR', or a wide R, in V1 or V2", some([double, single])),
        clause(
            "S longer than R, or > 40 ms, in I and V6",
            every(case.in_leads(("I", "V6"), lambda w: _wide_s(case, w))),
        ),
        # Needed only where the R stands alone: an r' speaks for itself.
        clause(
            "R peak time > 50 ms in V1 and normal in V5, V6 (needed with a single R in V1)",
            every([late, normal]),
            required=double.result != "met",
        ),
        clause(
            "R' wider than the first r in V1 or V2",
            some(case.in_leads(("V1", "V2"), lambda w: _wider_second_r(case, w))),
            required=False,
        ),
    )


def _r_then_larger_r(waves: LeadWaves) -> Look:
    """r, s or S, then an R' that counts."""
    names = tuple(d.name for d in waves.deflections)
    second = waves.find("R'")
    if names[:3] != ("R", "S", "R'") or second is None:
        return shape.described("not met", waves, "rsr', rsR' or rSR'")
    counts = look_at(
        Quantity(second.amplitude_mv, second.se_mv, "mV"),
        Limit(">=", waves.smallest_mv, "mV"),
        lead=waves.lead,
        what="R' amplitude",
        time_ms=second.peak_ms,
    )
    return every([counts, shape.described("met", waves, "rsr', rsR' or rSR'")])


def _wide_r(case: Case, waves: LeadWaves) -> Look:
    """A wide R that dominates, alone or after a q."""
    tallest = max(shape.upward(waves), key=lambda d: d.amplitude_mv, default=None)
    if tallest is None:
        return shape.described("not met", waves, "a wide R")
    wide = look_at(
        Quantity(tallest.duration_ms, case.edge_se_ms(waves.lead), "ms"),
        Limit(">", WIDE_MS, "ms"),
        lead=waves.lead,
        what="width of the R",
        time_ms=tallest.peak_ms,
    )
    return every([shape.upright(waves), wide])


def _wide_s(case: Case, waves: LeadWaves) -> Look:
    """The longest S (a small s may stand before the R') against the tallest R."""
    below = [d for d in waves.deflections if d.name.startswith("S")]
    s = max(below, key=lambda d: d.duration_ms, default=None)
    if s is None:
        return shape.described("not met", waves, "an S longer than R or > 40 ms")
    se_ms = case.edge_se_ms(waves.lead)
    long_s = look_at(
        Quantity(s.duration_ms, se_ms, "ms"),
        Limit(">", WIDE_MS, "ms"),
        lead=waves.lead,
        what="S duration",
        time_ms=s.peak_ms,
    )
    r = max(shape.upward(waves), key=lambda d: d.amplitude_mv, default=None)
    if r is None:
        return long_s
    longer = look_at(
        Quantity(s.duration_ms - r.duration_ms, se_ms, "ms"),
        Limit(">", 0.0, "ms"),
        lead=waves.lead,
        what="S beyond R in length",
        time_ms=s.peak_ms,
    )
    return some([long_s, longer])


def _late_in_v1(waves: LeadWaves) -> Look:
    limit = Limit(">", LATE_RPT_MS, "ms")
    return look_at(waves.r_peak_time_ms, limit, lead=waves.lead, what="R peak time")


def _normal_in_lateral(waves: LeadWaves) -> Look:
    limit = Limit("<=", NORMAL_LATERAL_RPT_MS, "ms")
    return look_at(waves.r_peak_time_ms, limit, lead=waves.lead, what="R peak time")


def _wider_second_r(case: Case, waves: LeadWaves) -> Look:
    first, second = waves.find("R"), waves.find("R'")
    if first is None or second is None:
        return shape.described("not met", waves, "an R' wider than r")
    gain = Quantity(second.duration_ms - first.duration_ms, case.edge_se_ms(waves.lead), "ms")
    limit = Limit(">", 0.0, "ms")
    return look_at(gain, limit, lead=waves.lead, what="R' beyond r in length")

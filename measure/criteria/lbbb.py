"""Left bundle branch block: five published definitions and the bedside signs."""

from measure.criteria import shape
from measure.criteria.case import Case
from measure.criteria.decide import Limit, Look, at_least, by_sex, clause, every, finding, some
from measure.criteria.decide import look_at as compare
from measure.criteria.finding import Clause, Finding
from measure.waves import LeadWaves

AHA = "AHA/ACCF/HRS 2009 part III (Surawicz et al., Circulation 119:e235)"
STRICT = "Strauss, Selvester, Wagner, Am J Cardiol 2011;107:927"
EUROPEAN_2013 = "European guideline on pacing and resynchronisation 2013"
EUROPEAN_2021 = "European guideline on pacing and resynchronisation 2021"

LATERAL = ("I", "aVL", "V5", "V6")
NOTCH_LEADS = ("V1", "V2", "V5", "V6", "I", "aVL")
LATE_RPT_MS = 60.0
NORMAL_RPT_MS = 50.0  # right precordial leads; the bound the statement itself uses in V1
UNSEEN_PACING = "Pacing whose spikes do not show on this tracing gives the same picture."
STRICT_FIRST_MS = 40.0  # the strict definition's notch starts after the first 40 ms


def judge(case: Case, precondition: Clause) -> tuple[Finding, ...]:
    """Every definition of left bundle branch block, complete ones first."""
    return (
        _aha_complete(case, precondition),
        _aha_incomplete(case, precondition),
        _strict(case, precondition),
        _european_2013(case, precondition),
        _european_2021(case, precondition),
        _bedside(case, precondition),
    )


def _aha_complete(case: Case, precondition: Clause) -> Finding:
    wide = case.interval("qrs_ms", Limit(">=", 120, "ms"), what="QRS duration")
    return finding(
        "lbbb_aha",
        "complete left bundle branch block (AHA/ACCF/HRS 2009)",
        AHA,
        [
            precondition,
            clause("QRS >= 120 ms", wide),
            clause(
                "broad notched or slurred R in I, aVL, V5 and V6 (RS allowed in V5, V6)",
                every(case.in_leads(LATERAL, lambda w: _broad_notched_r(case, w))),
            ),
            clause("no q in I, V5 and V6", _no_q(case, "I", "V5", "V6")),
            clause("R peak time > 60 ms in V5 and V6", _late_r(case, "V5", "V6")),
            clause("R peak time normal in V1-V3 where an initial r is seen", _early_r(case)),
            clause("ST and T usually opposite to the QRS", _discordance(case), required=False),
        ],
        [UNSEEN_PACING],
    )


def _aha_incomplete(case: Case, precondition: Clause) -> Finding:
    band = case.interval_within(
        "qrs_ms", Limit(">=", 110, "ms"), Limit("<", 120, "ms"), what="QRS duration"
    )
    return finding(
        "lbbb_aha_incomplete",
        "incomplete left bundle branch block (AHA/ACCF/HRS 2009)",
        AHA,
        [
            precondition,
            clause("QRS 110 to 119 ms", band),
            clause("R peak time > 60 ms in V4, V5 and V6", _late_r(case, "V4", "V5", "V6")),
            clause("no q in I, V5 and V6", _no_q(case, "I", "V5", "V6")),
        ],
        [UNSEEN_PACING],
    )


def _strict(case: Case, precondition: Clause) -> Finding:
    wide = by_sex(
        case.person.sex,
        male=case.interval("qrs_ms", Limit(">=", 140, "ms"), what="QRS duration"),
        female=case.interval("qrs_ms", Limit(">=", 130, "ms"), what="QRS duration"),
    )
    two_thirds_ms = case.intervals["qrs_ms"].value * 2 / 3

    def mid_notch(waves: LeadWaves) -> Look:
        return shape.notched_or_slurred(
            waves, from_ms=STRICT_FIRST_MS, to_ms=two_thirds_ms, at="onset_ms"
        )

    return finding(
        "lbbb_strict",
        "left bundle branch block (strict)",
        STRICT,
        [
            precondition,
            clause("QRS >= 140 ms in men, >= 130 ms in women", wide),
            clause("QS or rS in V1 and V2", every(case.in_leads(("V1", "V2"), shape.qs_or_rs))),
            clause(
                "notch or slur after the first 40 ms and before two thirds of the QRS "
                "in two or more of V1, V2, V5, V6, I, aVL",
                at_least(2, case.in_leads(NOTCH_LEADS, mid_notch)),
            ),
        ],
        [UNSEEN_PACING],
    )


def _european_2013(case: Case, precondition: Clause) -> Finding:
    wide = case.interval("qrs_ms", Limit(">=", 120, "ms"), what="QRS duration")

    def broad_r(waves: LeadWaves) -> Look:
        return shape.broad_notched_or_slurred(case, waves)

    return finding(
        "lbbb_european_2013",
        "left bundle branch block (European 2013)",
        EUROPEAN_2013,
        [
            precondition,
            clause("QRS >= 120 ms", wide),
            clause("QS or rS in V1", case.in_lead("V1", shape.qs_or_rs)),
            clause(
                "broad, notched or slurred R in I, aVL, V5 or V6",
                some(case.in_leads(LATERAL, broad_r)),
            ),
            clause("no q in V5 and V6", _no_q(case, "V5", "V6")),
        ],
        [UNSEEN_PACING],
    )


def _european_2021(case: Case, precondition: Clause) -> Finding:
    qrs_ms = case.intervals["qrs_ms"].value
    wide = case.interval("qrs_ms", Limit(">=", 120, "ms"), what="QRS duration")

    def mid_notch(waves: LeadWaves) -> Look:
        return shape.notched_or_slurred(waves, from_ms=qrs_ms / 3, to_ms=qrs_ms * 2 / 3)

    return finding(
        "lbbb_european_2021",
        "left bundle branch block (European 2021)",
        EUROPEAN_2021,
        [
            precondition,
            clause("QRS >= 120 ms", wide),
            clause(
                "notch or slur in the middle third of the QRS in two or more of "
                "V1, V2, V5, V6, I, aVL",
                at_least(2, case.in_leads(NOTCH_LEADS, mid_notch)),
            ),
            clause("R peak time > 60 ms in V5 and V6", _late_r(case, "V5", "V6")),
            clause("QS or rS in V1", case.in_lead("V1", shape.qs_or_rs)),
            clause("ST and T opposite to the QRS", _discordance(case)),
        ],
        [UNSEEN_PACING],
    )


def _bedside(case: Case, precondition: Clause) -> Finding:
    qrs_ms = case.intervals["qrs_ms"].value

    def late_force(waves: LeadWaves) -> Look:
        return every(
            [
                shape.upright(waves),
                shape.notched_or_slurred_r(waves, from_ms=qrs_ms / 3, to_ms=qrs_ms),
            ]
        )

    return finding(
        "lbbb_bedside",
        "bedside signs of left bundle branch block",
        "common practice",
        [
            precondition,
            clause(
                "late positive force (a second R) in two or more of I, aVL, V5, V6",
                at_least(2, case.in_leads(LATERAL, late_force)),
            ),
            clause("septal r in V1 gone or below 0.1 mV", case.in_lead("V1", _small_r)),
            clause("T opposite to the QRS", _discordance(case)),
        ],
        [UNSEEN_PACING],
    )


def _broad_notched_r(case: Case, waves: LeadWaves) -> Look:
    """Broad and notched or slurred; upright as a whole, but V5 and V6 may be RS."""
    bent = shape.notched_or_slurred_r(waves, from_ms=0.0, to_ms=case.intervals["qrs_ms"].value)
    looks = [shape.broad(case, waves), bent]
    if waves.lead not in ("V5", "V6"):
        looks.append(shape.upright(waves))
    return every(looks)


def _no_q(case: Case, *leads: str) -> Look:
    return every(case.in_leads(leads, lambda w: shape.no_q(case, w)))


def _late_r(case: Case, *leads: str) -> Look:
    limit = Limit(">", LATE_RPT_MS, "ms")
    return every(case.in_leads(leads, lambda w: _r_peak_time(w, limit)))


def _early_r(case: Case) -> Look:
    """Only leads with an initial r are judged; with none there is nothing to fail."""
    limit = Limit("<=", NORMAL_RPT_MS, "ms")

    def early(waves: LeadWaves) -> Look:
        if not waves.deflections or waves.deflections[0].name != "R":
            return shape.described("met", waves, "no initial r to judge")
        r = waves.deflections[0]
        time = shape.Quantity(r.peak_ms - r.onset_ms, case.edge_se_ms(waves.lead), "ms")
        return compare(
            time, limit, lead=waves.lead, what="peak of the initial r", time_ms=r.peak_ms
        )

    return every(case.in_leads(("V1", "V2", "V3"), early))


def _r_peak_time(waves: LeadWaves, limit: Limit) -> Look:
    last = shape.upward(waves)[-1:]
    return compare(
        waves.r_peak_time_ms,
        limit,
        lead=waves.lead,
        what="R peak time",
        time_ms=last[0].peak_ms if last else None,
    )


def _discordance(case: Case) -> Look:
    """In four or more of the six leads that show the block best; no statement gives a count."""
    return at_least(4, case.in_leads(NOTCH_LEADS, shape.discordant))


def _small_r(waves: LeadWaves) -> Look:
    r = waves.deflections[0] if waves.deflections else None
    if r is None or r.name != "R":
        return shape.described("met", waves, "no initial r")
    amplitude = shape.Quantity(r.amplitude_mv, r.se_mv, "mV")
    limit = Limit("<", 0.1, "mV")
    return compare(amplitude, limit, lead=waves.lead, what="initial r", time_ms=r.peak_ms)

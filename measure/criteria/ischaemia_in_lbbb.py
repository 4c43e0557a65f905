"""Signs of acute ischaemia within left bundle branch block, original and modified.

ST is taken at the J point.
"""

from collections.abc import Callable
from dataclasses import replace

from measure.criteria import shape
from measure.criteria.case import Case
from measure.criteria.decide import Limit, Look, clause, every, finding, look_at, some, unseen
from measure.criteria.finding import Finding
from measure.quantity import Quantity
from measure.waves import LeadWaves

ORIGINAL = "Sgarbossa et al., N Engl J Med 1996;334:481"
MODIFIED = "Smith et al., Ann Emerg Med 2012"
POINTS = {"concordant elevation": 5, "depression": 3, "discordant elevation": 2}
POSITIVE_POINTS = 3
NOTE = "A negative result does not exclude infarction; compare older ECGs, and the patient."


def judge(case: Case, lbbb: Look) -> tuple[Finding, ...]:
    """The original score and the modified rule, only where left bundle branch block is there."""
    present = clause("left bundle branch block by one of the definitions", lbbb)
    concordant = _in_any(case, tuple(case.waves), _concordant_elevation)
    depression = _in_any(case, ("V1", "V2", "V3"), _depression)
    excessive = _in_any(case, tuple(case.waves), _discordant_elevation)
    out_of_proportion = _in_any(case, tuple(case.waves), _out_of_proportion)
    texts = (
        clause("ST up 1 mm or more with the QRS, in any lead", concordant, required=False),
        clause("ST down 1 mm or more in V1, V2 or V3", depression, required=False),
    )
    return (
        finding(
            "ischaemia_in_lbbb_original",
            "acute ischaemia within left bundle branch block (original score)",
            ORIGINAL,
            [
                present,
                *texts,
                clause("ST up 5 mm or more against the QRS", excessive, required=False),
                clause("3 points or more", _score(concordant, depression, excessive)),
            ],
            [NOTE],
        ),
        finding(
            "ischaemia_in_lbbb_modified",
            "acute ischaemia within left bundle branch block (modified rule)",
            MODIFIED,
            [
                present,
                *texts,
                clause("ST up 1 mm or more and ST/S <= -0.25", out_of_proportion, required=False),
                clause(
                    "one of these signs",
                    _bare(some([concordant, depression, out_of_proportion])),
                ),
            ],
            [NOTE],
        ),
    )


def _in_any(case: Case, leads: tuple[str, ...], judge: Callable[[LeadWaves], Look]) -> Look:
    """One lead with the sign is enough; shown are the leads that decide, none where none does."""
    looks = case.in_leads(leads, judge)
    found = some(looks)
    telling = tuple(look for look in looks if look.result == found.result != "not met")
    return replace(found, evidence=tuple(e for look in telling for e in look.evidence))


def _score(concordant: Look, depression: Look, excessive: Look) -> Look:
    """Points that are sure, and points that are possible."""
    looks = dict(zip(POINTS, (concordant, depression, excessive), strict=True))
    sure = sum(POINTS[name] for name, look in looks.items() if look.result == "met")
    open_points = sum(POINTS[name] for name, look in looks.items() if look.result == "undecided")
    if sure >= POSITIVE_POINTS:
        return Look("met")
    if sure + open_points >= POSITIVE_POINTS:
        return _bare(some(looks.values()))
    return Look("not met")


def _concordant_elevation(waves: LeadWaves) -> Look:
    return every([shape.upright(waves), _st(waves, Limit(">=", 0.1, "mV"))])


def _depression(waves: LeadWaves) -> Look:
    return _st(waves, Limit("<=", -0.1, "mV"))


def _discordant_elevation(waves: LeadWaves) -> Look:
    return every([_downward(waves), _st(waves, Limit(">=", 0.5, "mV"))])


def _out_of_proportion(waves: LeadWaves) -> Look:
    """ST elevation of a quarter of the depth of the S or more."""
    deepest = min(waves.deflections, key=lambda d: d.amplitude_mv, default=None)
    st = waves.st_mv[0]
    if not st.known:
        return unseen(waves.lead, f"ST: {st.reason}")
    if deepest is None or deepest.amplitude_mv >= 0:
        return shape.described("not met", waves, "an S")
    ratio = st.value / deepest.amplitude_mv
    relative = (st.se / max(abs(st.value), st.se, 1e-9), deepest.se_mv / deepest.amplitude_mv)
    se = abs(ratio) * (relative[0] ** 2 + relative[1] ** 2) ** 0.5
    return every(
        [
            _downward(waves),
            _st(waves, Limit(">=", 0.1, "mV")),
            look_at(Quantity(ratio, se, ""), Limit("<=", -0.25, ""), lead=waves.lead, what="ST/S"),
        ]
    )


def _downward(waves: LeadWaves) -> Look:
    limit = Limit("<", 0.0, "mV ms")
    return look_at(waves.net_area_mv_ms, limit, lead=waves.lead, what="net area of the QRS")


def _st(waves: LeadWaves, limit: Limit) -> Look:
    return look_at(waves.st_mv[0], limit, lead=waves.lead, what="ST at J")


def _bare(look: Look) -> Look:
    """Without the evidence, which the clauses above show already."""
    return Look(look.result, (), look.open)

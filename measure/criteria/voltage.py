"""QRS voltage of left ventricular hypertrophy; withheld with left bundle branch block.

The block itself raises and lowers these sums, so they say nothing about the muscle then.
"""

from collections.abc import Callable

from measure.criteria.case import Case
from measure.criteria.decide import (
    OVERALL,
    Limit,
    Look,
    by_sex,
    clause,
    finding,
    look_at,
    some,
    unseen,
)
from measure.criteria.finding import Finding
from measure.quantity import Quantity, missing

SOKOLOW = "Sokolow and Lyon, Am Heart J 1949"
CORNELL = "Casale et al. (Cornell), J Am Coll Cardiol 1985"


def judge(case: Case, lbbb: Look) -> tuple[Finding, ...]:
    """The two voltage sums, each with the clause that withholds it."""
    allowed = clause("(precondition) no left bundle branch block", _allowed(lbbb))
    judged = allowed.result == "met"
    sum_limit = Limit(">=", 3.5, "mV")
    sokolow = some(
        look_at(_sum(case, "V1", "S", lateral, "R"), sum_limit, lead=f"V1, {lateral}", what="S + R")
        for lateral in ("V5", "V6")
    )
    cornell = _sum(case, "V3", "S", "aVL", "R")
    compare: Callable[[float], Look] = lambda mv: look_at(  # noqa: E731
        cornell, Limit(">", mv, "mV"), lead="aVL, V3", what="R + S"
    )
    return (
        finding(
            "voltage_sokolow_lyon",
            "left ventricular voltage (Sokolow-Lyon)",
            SOKOLOW,
            [
                allowed,
                # Withheld means undecided, also where the sum is small.
                clause("S in V1 + R in V5 or V6 >= 3.5 mV", sokolow, required=judged),
            ],
        ),
        finding(
            "voltage_cornell",
            "left ventricular voltage (Cornell)",
            CORNELL,
            [
                allowed,
                clause(
                    "R in aVL + S in V3 > 2.8 mV in men, > 2.0 mV in women",
                    by_sex(case.person.sex, male=compare(2.8), female=compare(2.0)),
                    required=judged,
                ),
            ],
        ),
    )


def _allowed(lbbb: Look) -> Look:
    if lbbb.result == "not met":
        return Look("met")
    because = "is there" if lbbb.result == "met" else "may be there"
    return unseen(OVERALL, f"withheld: left bundle branch block {because} and alters the voltage")


def _sum(case: Case, s_lead: str, s_name: str, r_lead: str, r_name: str) -> Quantity:
    """Depth of the S (or QS) in one lead plus height of the R in another."""
    depth, height = _extreme(case, s_lead, -1.0), _extreme(case, r_lead, 1.0)
    for part in (depth, height):
        if not part.known:
            return part
    return Quantity(
        depth.value + height.value,
        (depth.se**2 + height.se**2) ** 0.5,
        "mV",
        (s_lead, r_lead),
        min(depth.beats, height.beats),
    )


def _extreme(case: Case, lead: str, sign: float) -> Quantity:
    """Largest deflection on one side of the baseline, as a positive number; 0 without one."""
    waves = case.waves.get(lead)
    if waves is None or waves.beats == 0 or not waves.qrs_complete:
        return missing("mV", f"{lead} was not measured")
    best = max(waves.deflections, key=lambda d: sign * d.amplitude_mv, default=None)
    if best is None or sign * best.amplitude_mv <= 0:
        return Quantity(0.0, waves.smallest_mv, "mV", (lead,), waves.beats)
    return Quantity(sign * best.amplitude_mv, best.se_mv, "mV", (lead,), waves.beats)

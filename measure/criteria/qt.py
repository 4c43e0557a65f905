"""Long QT by four corrections for rate, and QT freed of a wide QRS.

The four corrections disagree away from 60/min, so a prolonged QTc is met or not met only where
all four say the same. With a wide QRS the depolarisation itself lengthens QT: the plain finding
stays undecided and QT less 48.5 % of the QRS is judged in its place.
"""

from measure.criteria.case import Case
from measure.criteria.decide import (
    OVERALL,
    Limit,
    Look,
    by_sex,
    clause,
    every,
    finding,
    look_at,
    some,
    unseen,
)
from measure.criteria.finding import Finding
from measure.quantity import Quantity, missing

PART_IV = "AHA/ACCF/HRS 2009 part IV"
BOGOSSIAN = "Bogossian et al., Heart Rhythm 2014"
QRS_SHARE = 0.485
FORMULAS = ("bazett", "fridericia", "framingham", "hodges")


def judge(case: Case) -> tuple[Finding, ...]:
    """Prolonged QTc as measured, and with the share of a wide QRS taken off."""
    wide = case.interval("qrs_ms", Limit(">=", 120, "ms"), what="QRS duration")
    plain = {name: case.intervals[f"qtc_{name}_ms"] for name in FORMULAS}
    freed = {name: _freed(case, qtc) for name, qtc in plain.items()}
    return (
        finding(
            "qtc_long",
            "prolonged QTc",
            PART_IV,
            [
                clause("(precondition) QRS < 120 ms", _narrow(wide)),
                clause(
                    "QTc >= 450 ms in men, >= 460 ms in women, all four agree", _agree(case, plain)
                ),
            ],
        ),
        finding(
            "qtc_long_wide_qrs",
            "prolonged QTc in a wide QRS",
            BOGOSSIAN,
            [
                clause("QRS >= 120 ms", wide),
                clause(
                    "QT less 48.5 % of QRS, corrected for rate, >= 450 ms in men, "
                    ">= 460 ms in women, all four agree",
                    _agree(case, freed),
                ),
            ],
        ),
    )


def _narrow(wide: Look) -> Look:
    if wide.result == "not met":
        return Look("met", wide.evidence)
    return unseen(OVERALL, "QRS is or may be wide; see QT freed of the wide QRS")


def _agree(case: Case, by_formula: dict[str, Quantity]) -> Look:
    looks = [
        by_sex(
            case.person.sex,
            male=_long(name, qtc, 450.0),
            female=_long(name, qtc, 460.0),
        )
        for name, qtc in by_formula.items()
    ]
    all_long, any_long = every(looks), some(looks)
    if all_long.result == any_long.result:
        return all_long
    disagree = "the four corrections disagree: judge by one, or at a rate near 60"
    return Look("undecided", all_long.evidence, any_long.open or ((OVERALL, disagree),))


def _long(name: str, qtc: Quantity, limit_ms: float) -> Look:
    return look_at(qtc, Limit(">=", limit_ms, "ms"), lead=OVERALL, what=f"QTc {name.capitalize()}")


def _freed(case: Case, qtc: Quantity) -> Quantity:
    """QTc of the QT less 48.5 % of the QRS: the correction for rate is kept as it was."""
    qt, qrs = case.intervals["qt_ms"], case.intervals["qrs_ms"]
    for part in (qtc, qt, qrs):
        if not part.known:
            return missing("ms", part.reason or "not measured")
    share_ms = QRS_SHARE * qrs.value
    return Quantity(
        qtc.value - share_ms * qtc.value / qt.value,
        (qtc.se**2 + (QRS_SHARE * qrs.se) ** 2) ** 0.5,
        "ms",
        qtc.leads,
        qtc.beats,
    )

"""QRS bands within left bundle branch block that guide resynchronisation."""

from measure.criteria.case import Case
from measure.criteria.decide import Limit, Look, clause, finding
from measure.criteria.finding import Finding
from measure.criteria.lbbb import EUROPEAN_2021

NOTE = "A band is one part of that guideline's advice; symptoms and function are not on paper."


def judge(case: Case, lbbb: Look) -> tuple[Finding, ...]:
    """QRS of 150 ms or more, 130 to 149 ms, below 130 ms, each with left bundle branch block."""
    at_150, at_130 = Limit(">=", 150, "ms"), Limit(">=", 130, "ms")
    below_150, below_130 = Limit("<", 150, "ms"), Limit("<", 130, "ms")
    what = "QRS duration"
    bands = (
        ("crt_qrs_150", "QRS >= 150 ms", case.interval("qrs_ms", at_150, what=what)),
        (
            "crt_qrs_130_149",
            "QRS 130 to 149 ms",
            case.interval_within("qrs_ms", at_130, below_150, what=what),
        ),
        ("crt_qrs_below_130", "QRS < 130 ms", case.interval("qrs_ms", below_130, what=what)),
    )
    present = clause("left bundle branch block by one of the definitions", lbbb)
    return tuple(
        finding(
            key,
            f"resynchronisation band: left bundle branch block with {text}",
            EUROPEAN_2021,
            [present, clause(text, look)],
            [NOTE],
        )
        for key, text, look in bands
    )

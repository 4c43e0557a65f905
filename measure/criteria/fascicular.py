"""Left anterior and posterior fascicular block, alone and with right bundle branch block."""

from measure.criteria import shape
from measure.criteria.axis import axis_between
from measure.criteria.case import Case
from measure.criteria.decide import Limit, as_look, clause, every, finding, look_at
from measure.criteria.finding import Clause, Finding
from measure.criteria.lbbb import AHA

LATE_RPT_AVL_MS = 45.0


def judge(case: Case, precondition: Clause, rbbb_complete: Finding) -> tuple[Finding, ...]:
    """Either fascicular block with a narrow QRS, and either with complete right bundle block."""
    narrow = clause(
        "QRS < 120 ms", case.interval("qrs_ms", Limit("<", 120, "ms"), what="QRS duration")
    )
    with_rbbb = clause(
        "complete right bundle branch block (in place of QRS < 120 ms)", as_look(rbbb_complete)
    )
    anterior, posterior = _anterior(case), _posterior(case)
    return (
        finding("lafb", "left anterior fascicular block", AHA, [precondition, *anterior, narrow]),
        finding(
            "lpfb",
            "left posterior fascicular block",
            AHA,
            [precondition, *posterior, narrow],
            ["Right ventricular overload and a lateral infarct look alike and are not excluded."],
        ),
        finding(
            "rbbb_lafb",
            "right bundle branch block with left anterior fascicular block",
            AHA,
            [precondition, with_rbbb, *anterior],
        ),
        finding(
            "rbbb_lpfb",
            "right bundle branch block with left posterior fascicular block",
            AHA,
            [precondition, with_rbbb, *posterior],
        ),
    )


def _anterior(case: Case) -> tuple[Clause, ...]:
    late = case.in_lead(
        "aVL",
        lambda w: look_at(
            w.r_peak_time_ms,
            Limit(">=", LATE_RPT_AVL_MS, "ms"),
            lead=w.lead,
            what="R peak time",
        ),
    )
    return (
        clause("QRS axis -45 to -90 degrees", axis_between(case, -90.0, -45.0)),
        clause("qR in aVL", case.in_lead("aVL", lambda w: shape.qr(case, w))),
        clause("R peak time >= 45 ms in aVL", late),
    )


def _posterior(case: Case) -> tuple[Clause, ...]:
    return (
        clause("QRS axis +90 to +180 degrees", axis_between(case, 90.0, 180.0)),
        clause("rS in I and aVL", every(case.in_leads(("I", "aVL"), shape.rs))),
        clause(
            "qR in III and aVF",
            every(case.in_leads(("III", "aVF"), lambda w: shape.qr(case, w))),
        ),
    )

"""Left anterior and posterior fascicular block, alone and with right bundle branch block."""

from measure.criteria import shape
from measure.criteria.axis import INITIAL_MS, axis_between, initial_axis
from measure.criteria.case import Case
from measure.criteria.decide import Limit, as_look, clause, every, finding, look_at
from measure.criteria.finding import Clause, Finding
from measure.criteria.lbbb import AHA
from measure.quantity import Quantity

LATE_RPT_AVL_MS = 45.0


def judge(case: Case, precondition: Clause, rbbb_complete: Finding) -> tuple[Finding, ...]:
    """Either fascicular block with a narrow QRS, and either with complete right bundle block."""
    narrow = clause(
        "QRS < 120 ms", case.interval("qrs_ms", Limit("<", 120, "ms"), what="QRS duration")
    )
    with_rbbb = clause(
        "complete right bundle branch block (in place of QRS < 120 ms)", as_look(rbbb_complete)
    )
    anterior, posterior = _anterior_shape(case), _posterior_shape(case)
    whole, initial = case.intervals["qrs_axis_deg"], initial_axis(case)
    return (
        finding(
            "lafb",
            "left anterior fascicular block",
            AHA,
            [
                precondition,
                clause("QRS axis -45 to -90 degrees", axis_between(whole, -90.0, -45.0)),
                *anterior,
                narrow,
            ],
        ),
        finding(
            "lpfb",
            "left posterior fascicular block",
            AHA,
            [
                precondition,
                clause("QRS axis +90 to +180 degrees", axis_between(whole, 90.0, 180.0)),
                *posterior,
                narrow,
            ],
            ["Right ventricular overload and a lateral infarct look alike and are not excluded."],
        ),
        finding(
            "rbbb_lafb",
            "right bundle branch block with left anterior fascicular block",
            AHA,
            [precondition, with_rbbb, _initial(initial, -90.0, -45.0), *anterior],
        ),
        finding(
            "rbbb_lpfb",
            "right bundle branch block with left posterior fascicular block",
            AHA,
            [precondition, with_rbbb, _initial(initial, 90.0, 180.0), *posterior],
        ),
    )


def _initial(axis: Quantity, low_deg: float, high_deg: float) -> Clause:
    """The axis before the late right ventricle joins in, in place of the axis of the whole QRS."""
    what = f"axis of the first {INITIAL_MS:.0f} ms"
    return clause(
        f"QRS {what} {low_deg:+.0f} to {high_deg:+.0f} degrees",
        axis_between(axis, low_deg, high_deg, what),
    )


def _anterior_shape(case: Case) -> tuple[Clause, ...]:
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
        clause("qR in aVL", case.in_lead("aVL", lambda w: shape.qr(case, w))),
        clause("R peak time >= 45 ms in aVL", late),
    )


def _posterior_shape(case: Case) -> tuple[Clause, ...]:
    return (
        clause("rS in I and aVL", every(case.in_leads(("I", "aVL"), shape.rs))),
        clause(
            "qR in III and aVF",
            every(case.in_leads(("III", "aVF"), lambda w: shape.qr(case, w))),
        ),
    )

"""The frontal QRS axis by name: normal, left, right, and how far."""

from measure.criteria.case import Case
from measure.criteria.decide import OVERALL, Limit, Look, clause, every, finding, look_at, unseen
from measure.criteria.finding import Finding
from measure.criteria.lbbb import AHA
from measure.quantity import Quantity

# (key, name, from, to) in degrees, counted clockwise from lead I; the bounds of the statement.
BANDS = (
    ("axis_normal", "normal QRS axis", -30.0, 90.0),
    ("axis_left", "left axis deviation", -90.0, -30.0),
    ("axis_left_marked", "marked left axis deviation", -90.0, -45.0),
    ("axis_right", "right axis deviation", 90.0, 180.0),
    ("axis_right_marked", "marked right axis deviation", 120.0, 180.0),
)


def judge(case: Case) -> tuple[Finding, ...]:
    """The names of the axis, each as a finding."""
    return tuple(
        finding(
            key,
            name,
            AHA,
            [clause(f"QRS axis {low:+.0f} to {high:+.0f} degrees", axis_between(case, low, high))],
        )
        for key, name, low, high in BANDS
    )


def axis_between(case: Case, low_deg: float, high_deg: float) -> Look:
    """The axis lies between two directions, going round the circle the short way."""
    axis = case.intervals["qrs_axis_deg"]
    if not axis.known:
        return unseen(OVERALL, f"QRS axis: {axis.reason}")
    # Turn the circle so that the band is centred and its far side is as far as can be.
    middle = (low_deg + high_deg) / 2
    turned = (axis.value - middle + 180.0) % 360.0 - 180.0 + middle
    near = Quantity(turned, axis.se, "deg", axis.leads, axis.beats)
    return every(
        look_at(near, limit, lead=OVERALL, what="QRS axis")
        for limit in (Limit(">=", low_deg, "deg"), Limit("<=", high_deg, "deg"))
    )

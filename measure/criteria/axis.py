"""The frontal QRS axis by name: normal, left, right, and how far."""

import numpy as np

from measure.criteria.case import Case
from measure.criteria.decide import OVERALL, Limit, Look, clause, every, finding, look_at, unseen
from measure.criteria.finding import Finding
from measure.criteria.lbbb import AHA
from measure.intervals import frontal_axis
from measure.quantity import Quantity, missing

INITIAL_MS = 80.0  # within which the left ventricle is activated (common practice: 60 to 80 ms)
LEVEL_MS = 12.0  # the level before the QRS, as amplitudes are measured

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
    whole = case.intervals["qrs_axis_deg"]
    return tuple(
        finding(
            key,
            name,
            AHA,
            [clause(f"QRS axis {low:+.0f} to {high:+.0f} degrees", axis_between(whole, low, high))],
        )
        for key, name, low, high in BANDS
    )


def initial_axis(case: Case) -> Quantity:
    """Axis of the beginning of the QRS.

    In right bundle branch block the right ventricle comes late and turns the axis of the whole
    QRS towards itself, whichever fascicle of the left bundle conducts.
    """
    if not case.boundaries.overall.qrs_on_ms.known:
        return missing("deg", "the QRS onset cannot be seen")
    leads = [lead for lead in ("I", "II", "III", "aVF") if lead in case.waves]
    return frontal_axis({lead: _initial_area(case, lead) for lead in leads})


def _initial_area(case: Case, lead: str) -> Quantity:
    waves = case.waves[lead]
    if waves.beats == 0 or not waves.qrs_complete:
        return missing("mV ms", f"the QRS of {lead} was not measured whole")
    time_ms, mv, se_mv = case.samples(lead)
    inside = (time_ms >= 0) & (time_ms <= INITIAL_MS)
    level_mv = mv[(time_ms >= -LEVEL_MS) & (time_ms <= 0)].mean()
    area = float((mv[inside] - level_mv).mean() * INITIAL_MS)
    if np.isnan(area):
        return missing("mV ms", f"the beginning of the QRS of {lead} is not visible")
    se = float(se_mv[inside].mean() * INITIAL_MS)  # as if all errors had one sign
    return Quantity(area, se, "mV ms", (lead,), waves.beats)


def axis_between(axis: Quantity, low_deg: float, high_deg: float, what: str = "QRS axis") -> Look:
    """The axis lies between two directions, going round the circle the short way."""
    if not axis.known:
        return unseen(OVERALL, f"{what}: {axis.reason}")
    # Turn the circle so that the band is centred and its far side is as far as can be.
    middle = (low_deg + high_deg) / 2
    turned = (axis.value - middle + 180.0) % 360.0 - 180.0 + middle
    near = Quantity(turned, axis.se, "deg", axis.leads, axis.beats)
    return every(
        look_at(near, limit, lead=OVERALL, what=what)
        for limit in (Limit(">=", low_deg, "deg"), Limit("<=", high_deg, "deg"))
    )

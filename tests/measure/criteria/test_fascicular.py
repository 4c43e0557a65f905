"""Fascicular blocks, AHA/ACCF/HRS 2009 part III, clause by clause (from memory)."""

import math
from dataclasses import replace

import pytest

from measure.quantity import Quantity
from tests.measure import made
from tests.measure.made import lead, ms, normal_leads, rbbb_leads, wave


def axis(value, se=0.0):
    return Quantity(float(value), se, "deg", ("I", "aVF"), 8)


def anterior_leads(base=None):
    leads = base or normal_leads()
    leads["aVL"] = lead("aVL", "qR", wave("Q", -0.1, 0, 15), wave("R", 0.9, 15, 100, peak_ms=50))
    return leads


def posterior_leads(base=None):
    leads = base or normal_leads()
    for name in ("I", "aVL"):
        leads[name] = lead(name, "rS", wave("R", 0.2, 0, 25), wave("S", -0.8, 25, 100))
    for name in ("III", "aVF"):
        leads[name] = lead(name, "qR", wave("Q", -0.1, 0, 15), wave("R", 1.0, 15, 100))
    return leads


def lafb(leads=None, axis_deg=-60, qrs_ms=100, se=0.0):
    leads = leads or anterior_leads()
    found = made.findings(leads, qrs_ms=ms(qrs_ms), qrs_axis_deg=axis(axis_deg, se))
    return found["lafb"]


def lpfb(leads=None, axis_deg=120, qrs_ms=100):
    leads = leads or posterior_leads()
    return made.findings(leads, qrs_ms=ms(qrs_ms), qrs_axis_deg=axis(axis_deg))["lpfb"]


@pytest.mark.parametrize(
    ("axis_deg", "result"),
    [(-44, "not met"), (-45, "met"), (-46, "met"), (-89, "met"), (-90, "met"), (-91, "not met")],
)
def test_aha_2009_anterior_axis(axis_deg, result):
    assert lafb(axis_deg=axis_deg).result == result


def test_aha_2009_anterior_axis_within_its_error_is_undecided():
    assert lafb(axis_deg=-47, se=3.0).result == "undecided"


@pytest.mark.parametrize(("peak_ms", "result"), [(44, "not met"), (45, "met"), (46, "met")])
def test_aha_2009_anterior_r_peak_time_in_avl(peak_ms, result):
    leads = anterior_leads()
    leads["aVL"] = replace(leads["aVL"], r_peak_time_ms=ms(peak_ms))
    assert lafb(leads).result == result


@pytest.mark.parametrize(("q_mv", "result"), [(-0.019, "not met"), (-0.02, "met"), (-0.021, "met")])
def test_aha_2009_anterior_q_in_avl(q_mv, result):
    leads = anterior_leads()
    r = leads["aVL"].deflections[1]
    leads["aVL"] = replace(leads["aVL"], deflections=(wave("Q", q_mv, 0, 15), r))
    assert lafb(leads).result == result


@pytest.mark.parametrize(("qrs_ms", "result"), [(119, "met"), (120, "not met"), (121, "not met")])
def test_aha_2009_both_ask_qrs_below_120_ms(qrs_ms, result):
    assert lafb(qrs_ms=qrs_ms).result == result
    assert lpfb(qrs_ms=qrs_ms).result == result


@pytest.mark.parametrize(
    ("axis_deg", "result"),
    [(89, "not met"), (90, "met"), (91, "met"), (179, "met"), (180, "met"), (-179, "not met")],
)
def test_aha_2009_posterior_axis(axis_deg, result):
    assert lpfb(axis_deg=axis_deg).result == result


@pytest.mark.parametrize("name", ["I", "aVL"])
@pytest.mark.parametrize(("r_mv", "result"), [(0.79, "met"), (0.8, "not met"), (0.81, "not met")])
def test_aha_2009_posterior_rs_in_i_and_avl(name, r_mv, result):
    leads = posterior_leads()
    leads[name] = lead(name, "RS", wave("R", r_mv, 0, 25), wave("S", -0.8, 25, 100))
    assert lpfb(leads).result == result


@pytest.mark.parametrize("name", ["III", "aVF"])
def test_aha_2009_posterior_qr_in_iii_and_avf(name):
    leads = posterior_leads()
    leads[name] = lead(name, "R", wave("R", 1.0, 0, 100))
    assert lpfb(leads).result == "not met"


def anterior_with_right_block(foot_mv, late_mv=-0.4):
    """Right block whose net area in aVF begins at `foot_mv`, and whose S in I is `late_mv`."""
    leads = anterior_leads(rbbb_leads())
    leads["I"] = lead("I", "RS", wave("R", 0.8, 0, 80), wave("S", late_mv, 80, 140))
    leads["aVF"] = lead("aVF", "S", wave("S", foot_mv, 0, 80))
    return leads


def test_right_block_with_either_fascicular_block():
    wide = {"qrs_ms": ms(140)}
    anterior = made.findings(anterior_with_right_block(-1.2), qrs_axis_deg=axis(-60), **wide)
    assert anterior["rbbb_complete"].result == "met"
    assert anterior["rbbb_lafb"].result == "met"
    assert anterior["lafb"].result == "not met"  # its own QRS limit
    assert anterior["rbbb_lpfb"].result == "not met"
    leads = rbbb_leads()
    for name in ("III", "aVF"):
        leads[name] = lead(name, "qR", wave("Q", -0.1, 0, 15), wave("R", 1.0, 15, 140))
    for name in ("I", "aVL"):
        leads[name] = lead(name, "rS", wave("R", 0.2, 0, 25), wave("S", -0.8, 25, 140))
    posterior = made.findings(leads, qrs_axis_deg=axis(120), **wide)
    assert posterior["rbbb_lpfb"].result == "met"
    assert posterior["rbbb_lafb"].result == "not met"


@pytest.mark.parametrize(("turned_deg", "result"), [(-43, "not met"), (-47, "met")])
def test_right_block_the_axis_is_that_of_the_beginning(turned_deg, result):
    """Both waves have one shape, so that their areas are to each other as their heights."""
    foot_mv = 0.8 * math.tan(math.radians(turned_deg)) * math.sqrt(3) / 2
    late = anterior_with_right_block(foot_mv, late_mv=-1.6)
    found = made.findings(late, qrs_ms=ms(140), qrs_axis_deg=axis(-120))
    assert made.clause(found["rbbb_lafb"], "QRS axis of the first 80 ms").result == result

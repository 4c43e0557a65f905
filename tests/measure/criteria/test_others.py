"""Delay, bands, axis, PR, QT, voltage and ischaemia: each limit at, below and above it.

All thresholds are from memory of the sources named beside the definitions.
"""

from dataclasses import replace

import pytest

from measure.quantity import Quantity, missing
from tests.measure import made
from tests.measure.made import FEMALE, MALE, UNKNOWN, lbbb_leads, lead, ms, mv, normal_leads, wave


@pytest.mark.parametrize(("qrs_ms", "result"), [(110, "not met"), (111, "met"), (150, "met")])
def test_aha_2009_nonspecific_delay_qrs_beyond_110_ms(qrs_ms, result):
    found = made.findings(normal_leads(), qrs_ms=ms(qrs_ms))
    assert found["nonspecific_delay"].result == result


def test_aha_2009_nonspecific_delay_with_neither_pattern():
    left = made.findings(lbbb_leads())["nonspecific_delay"]
    right = made.findings(made.rbbb_leads(), qrs_ms=ms(140))["nonspecific_delay"]
    assert left.result == right.result == "not met"


@pytest.mark.parametrize(
    ("qrs_ms", "band"),
    [
        (129, "crt_qrs_below_130"),
        (130, "crt_qrs_130_149"),
        (149, "crt_qrs_130_149"),
        (150, "crt_qrs_150"),
        (151, "crt_qrs_150"),
    ],
)
def test_european_2021_resynchronisation_bands(qrs_ms, band):
    found = made.findings(lbbb_leads(), qrs_ms=ms(qrs_ms))
    met = {key for key, f in found.items() if key.startswith("crt") and f.result == "met"}
    assert met == {band}


def test_resynchronisation_bands_ask_for_left_bundle_branch_block():
    found = made.findings(made.rbbb_leads(), qrs_ms=ms(160))
    assert all(found[k].result == "not met" for k in found if k.startswith("crt"))


@pytest.mark.parametrize(
    ("axis_deg", "names"),
    [
        (-31, {"axis_left"}),
        (-30, {"axis_left", "axis_normal"}),
        (-29, {"axis_normal"}),
        (-45, {"axis_left", "axis_left_marked"}),
        (-44, {"axis_left"}),
        (89, {"axis_normal"}),
        (90, {"axis_normal", "axis_right"}),
        (91, {"axis_right"}),
        (119, {"axis_right"}),
        (120, {"axis_right", "axis_right_marked"}),
        (180, {"axis_right", "axis_right_marked"}),
        (-180, {"axis_right", "axis_right_marked"}),
        (-135, set()),
    ],
)
def test_aha_2009_axis_names(axis_deg, names):
    axis = Quantity(float(axis_deg), 0.0, "deg")
    found = made.findings(normal_leads(), qrs_axis_deg=axis)
    assert {k for k, f in found.items() if k.startswith("axis") and f.result == "met"} == names


@pytest.mark.parametrize(
    ("pr_ms", "key", "result"),
    [
        (200, "pr_long", "not met"),
        (201, "pr_long", "met"),
        (120, "pr_short", "not met"),
        (119, "pr_short", "met"),
    ],
)
def test_pr_120_to_200_ms(pr_ms, key, result):  # common practice
    assert made.findings(normal_leads(), pr_ms=ms(pr_ms))[key].result == result


def test_pr_without_a_p_wave_is_undecided_with_the_reason():
    found = made.findings(normal_leads(), pr_ms=missing("ms", "no P wave found"))
    assert found["pr_long"].clauses[0].settle == "PR: no P wave found"


def qtc(value):
    return {
        f"qtc_{name}_ms": ms(value) for name in ("bazett", "fridericia", "framingham", "hodges")
    }


@pytest.mark.parametrize(
    ("person", "qtc_ms", "result"),
    [
        (MALE, 449, "not met"),
        (MALE, 450, "met"),
        (FEMALE, 459, "not met"),
        (FEMALE, 460, "met"),
        (UNKNOWN, 449, "not met"),
        (UNKNOWN, 455, "undecided"),
        (UNKNOWN, 460, "met"),
    ],
)
def test_aha_2009_part_iv_prolonged_qtc(person, qtc_ms, result):
    found = made.findings(normal_leads(), person, qrs_ms=ms(90), **qtc(qtc_ms))
    assert found["qtc_long"].result == result


def test_qtc_where_the_corrections_disagree():
    # QT 360 ms at 100/min gives 465, 427, 422, 430 ms by the four published formulas
    values = {
        "qtc_bazett_ms": ms(465),
        "qtc_fridericia_ms": ms(427),
        "qtc_framingham_ms": ms(422),
        "qtc_hodges_ms": ms(430),
    }
    found = made.findings(normal_leads(), qrs_ms=ms(90), **values)["qtc_long"]
    assert found.result == "undecided"
    assert "four corrections disagree" in found.clauses[1].settle


# QT 500 ms, QRS 100 ms wide: 500 - 48.5 = 451.5 ms (Bogossian et al. 2014)
@pytest.mark.parametrize(
    ("qrs_ms", "qt_ms", "result"),
    [(120, 508.2, "met"), (120, 508.1, "not met"), (160, 527.6, "met"), (160, 527.5, "not met")],
)
def test_bogossian_2014_qt_less_48_5_percent_of_qrs(qrs_ms, qt_ms, result):
    found = made.findings(lbbb_leads(), qrs_ms=ms(qrs_ms), qt_ms=ms(qt_ms), **qtc(qt_ms))
    assert found["qtc_long_wide_qrs"].result == result
    assert found["qtc_long"].result == "undecided"


def voltage_leads(s_v1, r_v5):
    leads = normal_leads()
    leads["V1"] = lead("V1", "rS", wave("R", 0.2, 0, 30), wave("S", -s_v1, 30, 90))
    leads["V5"] = lead("V5", "R", wave("R", r_v5, 0, 90))
    return leads


@pytest.mark.parametrize(
    ("s_mv", "r_mv", "result"),
    [(1.5, 1.99, "not met"), (1.5, 2.0, "met"), (1.5, 2.01, "met")],
)
def test_sokolow_lyon_1949_3_5_mv(s_mv, r_mv, result):
    found = made.findings(voltage_leads(s_mv, r_mv), qrs_ms=ms(90))
    assert found["voltage_sokolow_lyon"].result == result


@pytest.mark.parametrize(
    ("person", "r_mv", "result"),
    [  # with an S of 1.0 mV in V3
        (MALE, 1.79, "not met"),
        (MALE, 1.81, "met"),
        (FEMALE, 0.99, "not met"),
        (FEMALE, 1.0, "not met"),  # exactly 2.0 mV is not beyond it
        (FEMALE, 1.01, "met"),
        (UNKNOWN, 1.5, "undecided"),
    ],
)
def test_cornell_1985(person, r_mv, result):
    leads = normal_leads()
    leads["aVL"] = lead("aVL", "R", wave("R", r_mv, 0, 90))
    found = made.findings(leads, person, qrs_ms=ms(90))
    assert found["voltage_cornell"].result == result


def test_voltage_is_withheld_with_left_bundle_branch_block():
    found = made.findings(lbbb_leads())
    for key in ("voltage_sokolow_lyon", "voltage_cornell"):
        assert found[key].result == "undecided"
        assert "withheld: left bundle branch block is there" in found[key].clauses[0].settle


def st(leads, name, value_mv):
    leads[name] = replace(leads[name], st_mv={**leads[name].st_mv, 0: mv(value_mv)})
    return leads


def ischaemia(leads):
    found = made.findings(leads)
    return found["ischaemia_in_lbbb_original"].result, found["ischaemia_in_lbbb_modified"].result


@pytest.mark.parametrize(("st_mv", "result"), [(0.09, "not met"), (0.1, "met"), (0.11, "met")])
def test_sgarbossa_1996_concordant_elevation_1_mm(st_mv, result):
    assert ischaemia(st(lbbb_leads(), "V5", st_mv)) == (result, result)


@pytest.mark.parametrize("name", ["V1", "V2", "V3"])
@pytest.mark.parametrize(("st_mv", "result"), [(-0.09, "not met"), (-0.1, "met"), (-0.11, "met")])
def test_sgarbossa_1996_depression_1_mm_in_v1_to_v3(name, st_mv, result):
    assert ischaemia(st(lbbb_leads(), name, st_mv)) == (result, result)


def test_sgarbossa_1996_depression_elsewhere_does_not_count():
    assert ischaemia(st(lbbb_leads(), "V6", -0.2)) == ("not met", "not met")


@pytest.mark.parametrize(("st_mv", "result"), [(0.49, "not met"), (0.5, "met"), (0.51, "met")])
def test_sgarbossa_1996_discordant_elevation_5_mm_alone_is_2_points(st_mv, result):
    found = made.findings(st(lbbb_leads(), "V1", st_mv))["ischaemia_in_lbbb_original"]
    assert made.clause(found, "ST up 5 mm").result == result
    assert found.result == "not met"  # 3 points are needed


@pytest.mark.parametrize(
    ("st_mv", "result"),
    [(0.37, "not met"), (0.375, "met"), (0.38, "met")],  # S is 1.5 mV deep
)
def test_smith_2012_st_over_s(st_mv, result):
    assert ischaemia(st(lbbb_leads(), "V1", st_mv))[1] == result


def test_ischaemia_is_judged_only_within_left_bundle_branch_block():
    found = made.findings(st(normal_leads(), "V5", 0.3), qrs_ms=ms(90))
    assert found["ischaemia_in_lbbb_original"].result == "not met"
    assert found["ischaemia_in_lbbb_original"].clauses[0].result == "not met"


@pytest.mark.parametrize(
    ("pr_ms", "qrs_ms", "slow_ms", "names", "result"),
    [
        (119, 150, 40, ("I", "V5", "V6"), "met"),
        (120, 150, 40, ("I", "V5", "V6"), "not met"),
        (100, 111, 40, ("I", "V5", "V6"), "met"),
        (100, 110, 40, ("I", "V5", "V6"), "not met"),
        (100, 150, 31, ("I", "V5", "V6"), "met"),
        (100, 150, 27, ("I", "V5", "V6"), "not met"),  # the slope is seen to within 2 ms
        (100, 150, 40, ("V5", "V6"), "not met"),
    ],
)
def test_short_pr_with_slurred_onset(pr_ms, qrs_ms, slow_ms, names, result):
    leads = lbbb_leads()
    drawn = made.with_delta(made.beat(leads), leads, names, slow_ms)
    found = made.findings(leads, drawn=drawn, pr_ms=ms(pr_ms), qrs_ms=ms(qrs_ms))
    assert found["short_pr_slurred_onset"].result == result


def test_children_get_a_caution():
    child = replace(UNKNOWN, age_years=9.0)
    assert all(
        any("for adults" in c for c in f.cautions)
        for f in made.findings(normal_leads(), child).values()
    )


def test_every_ecg_gets_the_same_findings():
    assert list(made.findings(lbbb_leads())) == list(made.findings(normal_leads(), FEMALE))

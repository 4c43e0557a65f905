"""Each check says yes, no or not known, and a failed one names the lead and what to do."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.checks import find_checks
from digitize.geometry import to_geometry
from digitize.tracing import Known
from tests.digitize.made_tracing import grid, layout_of, leads_at, panel, tracing


def check(made, name):
    return next(item for item in find_checks(made) if item.name == name)


def with_panel(made, index, **fields):
    panels = list(made.panels)
    panels[index] = replace(panels[index], **fields)
    return replace(made, panels=tuple(panels))


def test_a_perfect_page_passes_everything():
    assert [item for item in find_checks(tracing()) if not item.passed] == []


def test_an_empty_page_passes_without_a_crash():
    assert check(tracing(()), "coverage").passed


@pytest.mark.parametrize(
    ("field", "name", "value", "option"),
    [
        ("speed_mm_s", "speed", 25.0, "--speed"),
        ("gain_mm_mv", "gain", 10.0, "--gain"),
        ("layout", "layout", "3x4+1", "--layout"),
    ],
)
def test_what_is_assumed_is_flagged_with_the_option_that_settles_it(field, name, value, option):
    found = check(tracing(**{field: Known(value, "assumed")}), name)
    assert found.passed is False
    assert "assumed" in found.message
    assert option in found.message


@pytest.mark.parametrize("source", ["found", "printed", "given"])
def test_what_is_known_says_how(source):
    message = check(tracing(speed_mm_s=Known(50.0, source)), "speed").message
    assert "50 mm/s" in message
    assert {"found": "measured", "printed": "printed", "given": "given"}[source] in message


@pytest.mark.parametrize(("se", "passed"), [(0.29, True), (0.31, False)])
def test_a_gain_found_too_roughly_is_flagged(se, passed):
    assert check(tracing(gain_mm_mv=Known(10.0, "found", se)), "gain").passed is passed


def test_assumed_timing_is_not_known_rather_than_wrong():
    assert check(tracing(timing=Known("consecutive", "assumed")), "timing").passed is None


def test_lead_names_by_place():
    made = tracing()
    few = replace(
        made,
        panels=tuple(
            replace(p, lead_source="assumed" if k < 6 else "printed")
            for k, p in enumerate(made.panels)
        ),
    )
    assert check(few, "lead_names").passed
    most = with_panel(few, 7, lead_source="assumed")
    found = check(most, "lead_names")
    assert found.passed is False
    assert set(found.leads) == {p.lead for p in most.panels if p.lead_source == "assumed"}


def test_a_lead_named_twice_in_one_column_is_flagged():
    found = check(with_panel(tracing(), 1, lead="I"), "lead_names")
    assert found.passed is False
    assert found.leads == ("I",)


def test_missing_leads_are_listed():
    made = tracing()
    short = replace(made, panels=tuple(p for p in made.panels if p.lead != "V3"))
    assert check(short, "twelve_leads").passed is None
    assert check(short, "twelve_leads").leads == ("V3",)
    unread = with_panel(made, 8, mv=np.full(1250, np.nan))
    assert check(unread, "twelve_leads").leads == ("V3",)


# ---- a panel against its strip ---------------------------------------------------------------


def test_panel_and_strip_that_differ_are_flagged():
    made = with_panel(tracing(), 1, mv=leads_at(np.arange(1250) / 500)["V1"])
    found = check(made, "repeated_lead")
    assert found.passed is False
    assert found.leads == ("II",)


def test_wrong_gain_of_one_row_shows_against_the_strip():
    made = tracing()
    assert check(with_panel(made, 1, mv=2 * made.panels[1].mv), "repeated_lead").passed is False


def test_a_panel_at_another_time_says_where_it_fits():
    # A rhythm with one early beat, so that no two stretches of the strip are alike.
    time_s = np.arange(5000) / 500
    warped = time_s + 0.25 * np.sin(2 * np.pi * time_s / 7)
    strip = leads_at(warped)["II"]
    made = tracing((panel("II", strip[:1250], start_s=5.0), panel("II", strip, strip=True, row=1)))
    found = check(made, "repeated_lead")
    assert found.passed is False
    assert "fits the strip at 0.00 s instead of 5.00 s" in found.message
    assert "--timing" in found.message


# ---- what was read ---------------------------------------------------------------------------


@pytest.mark.parametrize(("missing", "passed"), [(125, True), (126, False)])
def test_coverage(missing, passed):
    made = tracing()
    mv = made.panels[4].mv.copy()
    mv[:missing] = np.nan
    found = check(with_panel(made, 4, mv=mv), "coverage")
    assert found.passed is passed
    assert found.leads == (() if passed else ("aVL",))
    assert found.value == pytest.approx(1 - missing / 1250)


@pytest.mark.parametrize(("share", "passed"), [(0.25, True), (0.3, False), (float("nan"), True)])
def test_ink_that_the_trace_does_not_account_for(share, passed):
    made = tracing()
    layout, strokes = layout_of(made)
    strokes = (replace(strokes[0], unexplained=share), *strokes[1:])
    made = replace(made, geometry=to_geometry(grid(), layout, strokes))
    assert check(made, "ink").passed is passed
    assert check(made, "ink").leads == (() if passed else ("I",))


def test_peaks_cut_off_at_one_height_are_flagged():
    time_s = np.arange(1250) / 500
    tall = 3 * np.exp(-((((time_s % 0.8) - 0.3) / 0.05) ** 2))
    for sign in (1, -1):
        cut = tracing((panel("V3", sign * np.minimum(tall, 2.0)),))
        assert check(cut, "cut_off").leads == ("V3",)
    whole = tracing((panel("V3", tall),))
    assert "cut_off" not in [item.name for item in find_checks(whole)]

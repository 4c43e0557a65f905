"""Advice on the page leads to the page's own fields and tools."""

import re
from dataclasses import fields, replace
from importlib.resources import files

import pytest

from digitize.checks import find_checks
from digitize.options import Options
from digitize.tracing import Known
from measure.overread.view import overview
from measure.overread.wording import FIELDS, PLACES, on_page
from tests.digitize.made_tracing import tracing
from tests.measure.overread.made import digital_chain, session

OPTIONS = {
    "speed_mm_s": "--speed",
    "gain_mm_mv": "--gain",
    "layout": "--layout",
    "lead_order": "--leads",
    "turn_deg": "--turn",
    "timing": "--timing",
    "px_per_mm": "--px-per-mm",
}


def test_every_option_that_a_page_takes_has_its_place():
    """All but the limit, which refuses a page before there is one to look at."""
    assert {f.name for f in fields(Options)} == {*OPTIONS, "max_megapixels"}
    assert set(OPTIONS.values()) == set(PLACES)


@pytest.mark.parametrize("name", ["speed_mm_s", "gain_mm_mv", "layout", "timing"])
def test_a_doubt_about_what_was_assumed_leads_to_its_field(name, tmp_path):
    over = session(digital_chain(), tmp_path)
    made = tracing()
    made = replace(made, **{name: Known(getattr(made, name).value, "assumed")})
    made = replace(made, checks=find_checks(made))
    shown = overview(_Showing(over, made))["doubts"]
    (doubt,) = [d for d in shown if d["field"] == FIELDS[OPTIONS[name].removeprefix("--")]]
    assert "--" not in doubt["message"]
    page = (files("measure.overread") / "page" / "panel.js").read_text("utf-8")
    assert f'"{doubt["field"]}"' in page


class _Showing:
    """A session whose reading rests on another tracing."""

    def __init__(self, over, made):
        self._over, self._made = over, made

    def __getattr__(self, name):
        return getattr(self._over, name)

    def reading(self):
        return replace(self._over.reading(), tracing=self._made)


def test_the_advice_names_the_place():
    said = on_page("25 mm/s is assumed. Give --speed if you know it.")
    assert said == "25 mm/s is assumed. Give the speed under “Page and patient” if you know it."
    assert not re.search("--[a-z]", on_page("give --layout, --leads, --turn (see --timing)"))
    assert on_page("no option") == "no option"

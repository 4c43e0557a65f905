"""What strips repeat and how columns relate in time, on made panels of known truth."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.strips import name_strips, settle_timing
from digitize.tracing import FS_HZ, LEADS, Known, Panel
from tests.digitize.made_tracing import COLUMNS, leads_at, page_3x4_1, panel
from tests.drawn.heart import HeartSpec, record_model

ASSUMED = Known("consecutive", "assumed")


def with_strip(lead: str, **fields) -> tuple[Panel, ...]:
    """A 3x4+1 page whose strip really shows `lead`, under the name that `fields` gives it."""
    mv = leads_at(np.arange(5000) / FS_HZ)[lead]
    strip = panel("II", mv, strip=True, row=3, **{"lead_source": "assumed", **fields})
    return (*page_3x4_1()[:-1], strip)


# ---- names --------------------------------------------------------------------------------------


@pytest.mark.parametrize("lead", ["V1", "V5", "aVF"])
def test_an_unread_strip_is_named_after_the_lead_it_repeats(lead):
    strip = name_strips(with_strip(lead))[-1]
    assert (strip.lead, strip.lead_source) == (lead, "found")
    assert any("repeats that lead" in note for note in strip.notes)


@pytest.mark.parametrize("source", ["given", "printed"])
def test_a_name_given_or_read_stays_whatever_the_trace_says(source):
    strip = name_strips(with_strip("V1", lead_source=source))[-1]
    assert (strip.lead, strip.lead_source, strip.notes) == ("II", source, ())


def test_a_strip_that_repeats_nothing_keeps_its_name():
    rng = np.random.default_rng(8)
    strip = replace(with_strip("II")[-1], mv=rng.normal(0, 0.3, 5000))
    named = name_strips((*page_3x4_1()[:-1], strip))[-1]
    assert (named.lead, named.lead_source) == ("II", "assumed")


def test_two_leads_that_look_alike_settle_nothing():
    # V2 overwritten by V1: the strip repeats both, so neither name is certain.
    panels = list(with_strip("V1"))
    one = next(p for p in panels if p.lead == "V1")
    panels = [replace(p, mv=one.mv) if p.lead == "V2" else p for p in panels]
    assert name_strips(panels)[-1].lead == "II"


def test_a_lead_that_was_hardly_read_is_not_replaced_by_one_that_looks_like_it():
    # V5 shows what II would show where it stands; of II itself a third is left
    strip = with_strip("II")[-1]
    panels = []
    for p in with_strip("II")[:-1]:
        first = round(p.start_s * FS_HZ)
        if p.lead == "II":
            p = replace(p, mv=np.where(np.arange(len(p.mv)) < len(p.mv) / 3, p.mv, np.nan))
        elif p.lead == "V5":
            p = replace(p, mv=strip.mv[first : first + len(p.mv)])
        panels.append(p)
    named = name_strips((*panels, strip))[-1]
    assert (named.lead, named.lead_source) == ("II", "assumed")


def test_missing_samples_take_no_part():
    panels = list(with_strip("V5"))
    mv = panels[-1].mv.copy()
    mv[4000:4300] = np.nan
    panels[-1] = replace(panels[-1], mv=mv)
    assert name_strips(panels)[-1].lead == "V5"


# ---- timing -------------------------------------------------------------------------------------


def page(*, simultaneous: bool, strip: bool, seed: int = 3) -> tuple[Panel, ...]:
    """A page of a heart that does not beat in step with the columns."""
    mv = record_model(HeartSpec(rate_bpm=67.0, seed=seed)).mv
    panels = []
    for column, names in enumerate(COLUMNS):
        first = 0 if simultaneous else 1250 * column
        for row, name in enumerate(names):
            part = mv[LEADS.index(name), first : first + 1250]
            panels.append(panel(name, part, start_s=2.5 * column, row=row))
    if strip:
        panels.append(panel("II", mv[1], strip=True, row=3))
    return tuple(panels)


@pytest.mark.parametrize("simultaneous", [False, True], ids=["consecutive", "simultaneous"])
def test_the_strip_settles_how_columns_relate(simultaneous):
    panels, timing = settle_timing(page(simultaneous=simultaneous, strip=True), ASSUMED)
    assert (timing.value, timing.source) == (
        "simultaneous" if simultaneous else "consecutive",
        "found",
    )
    starts = {p.start_s for p in panels if not p.strip}
    assert starts == ({0.0} if simultaneous else {0.0, 2.5, 5.0, 7.5})


def test_columns_of_one_instant_show_without_a_strip():
    panels, timing = settle_timing(page(simultaneous=True, strip=False), ASSUMED)
    assert (timing.value, timing.source) == ("simultaneous", "found")
    assert {p.start_s for p in panels} == {0.0}


def test_what_a_person_gives_is_not_weighed():
    given = Known("consecutive", "given")
    panels = page(simultaneous=True, strip=True)
    assert settle_timing(panels, given) == (panels, given)


def test_one_column_has_no_timing_to_settle():
    panels = tuple(p for p in page(simultaneous=False, strip=True) if p.start_s == 0)
    assert settle_timing(panels, ASSUMED) == (panels, ASSUMED)

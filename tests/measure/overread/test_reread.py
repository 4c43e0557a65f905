"""Page turn, crop, ignored regions and arrangement as inputs of their stages, on a sample page."""

import functools
import time

import numpy as np
import pytest

from digitize.errors import InputError
from measure.overread.chain import Chain
from measure.overread.corrections import (
    Arrangement,
    Boundary,
    Crop,
    Gain,
    Ignore,
    LeadName,
    Measured,
    Refused,
    Speed,
    StrikeOut,
    Turn,
    counted,
    in_force,
)
from measure.reading import Person
from tests.measure.overread.made import page_stages

STAMP_MM = 6.0


@functools.cache
def chain():
    return Chain(page_stages().tracing, page_stages(), Person())


def stamp_on(panel):
    """A region in the middle of a panel."""
    left, top, right, bottom = page_stages().tracing.panels[panel].box_mm
    x, y = (left + right) / 2, (top + bottom) / 2
    return Ignore(x - STAMP_MM, y - STAMP_MM, x + STAMP_MM, y + STAMP_MM)


def test_an_ignored_region_is_not_read_and_the_rest_stays():
    found, region = page_stages().tracing, stamp_on(3)
    panels = chain().reading([region]).tracing.panels
    own = panels[3]
    x_mm = own.box_mm[0] + np.arange(len(own.mv)) / own.fs_hz * own.speed_mm_s
    inside = (x_mm > region.left_mm + 0.5) & (x_mm < region.right_mm - 0.5)
    baseline = page_stages().layout.panels[3].baseline_mm
    assert region.top_mm < baseline < region.bottom_mm
    assert np.isnan(own.mv[inside]).mean() > 0.9
    far = np.abs(x_mm - (region.left_mm + region.right_mm) / 2) > STAMP_MM + 6
    np.testing.assert_array_equal(own.mv[far], found.panels[3].mv[far])
    np.testing.assert_array_equal(panels[0].mv, found.panels[0].mv)
    assert any("ignored" in note for note in own.notes)


def test_names_given_before_a_region_is_ignored_still_count():
    reading = chain().reading([LeadName(0, "V9"), stamp_on(3)])
    assert reading.tracing.panels[0].lead == "V9"


def test_a_crop_leaves_the_panels_inside_it():
    """The left half of a 6x2 page is six rows of one column (the layouts that README lists)."""
    first, second = (page_stages().layout.panels[k].box for k in (0, 1))
    assert second.left_mm >= first.right_mm
    left, top, _, bottom = page_stages().grid.ruled_mm
    tracing = chain().reading([Crop(left, top, first.right_mm + 1.0, bottom)]).tracing
    assert tracing.layout.value == "6x1"
    assert all(panel.box_mm[2] < first.right_mm + 2 for panel in tracing.panels)
    assert tracing.source == page_stages().tracing.source


def test_an_arrangement_that_is_given_is_taken():
    names = ("aVL", "V1", "I", "V2", "aVR", "V3", "II", "V4", "aVF", "V5", "III", "V6")
    tracing = chain().reading([Arrangement("6x2", names)]).tracing
    assert (tracing.layout.value, tracing.layout.source) == ("6x2", "given")
    assert tuple(panel.lead for panel in tracing.panels) == names
    assert tracing.options == page_stages().tracing.options


def test_an_arrangement_that_the_page_cannot_have_is_refused():
    with pytest.raises(InputError):
        chain().reading([Arrangement("12x1")])
    with pytest.raises(Refused, match="is no layout"):
        Arrangement("three by four")


def test_a_turn_reads_the_page_as_it_lies_then():
    """Upside down the traces are read upside down, from right to left; the record says so."""
    stages = chain().stages([Turn(180)])
    assert stages.tracing.geometry["turn_deg"] == 180
    np.testing.assert_array_equal(stages.page.pixels, page_stages().page.pixels[::-1, ::-1])
    assert stages.tracing.source == page_stages().tracing.source
    assert chain().stages([Turn(0)]).page is page_stages().page


def test_what_names_a_panel_is_void_once_the_panels_are_found_anew():
    steps = (
        Gain(5.0),
        LeadName(0, "V9"),
        StrikeOut(0, 10.0, 20.0),
        Ignore(0.0, 0.0, 5.0, 5.0),
        Boundary("qrs_on_ms", -40.0),
        Arrangement("6x2"),
        Measured(1, ((1.0, 2.0), (3.0, 4.0))),
    )
    assert counted(steps) == (True, False, False, True, False, True, True)
    assert in_force((*steps, Speed(50.0)))[-1] == Speed(50.0)
    # a place on the paper is another one once the page is turned; of two turns the last one counts
    assert in_force((*steps, Turn(180))) == (Gain(5.0), Arrangement("6x2"), Turn(180))
    assert in_force((Turn(90), Turn(180))) == (Turn(180),)


def test_calipers_change_nothing_and_must_stand_in_a_panel():
    before = chain().reading()
    after = chain().reading([Measured(0, ((1.0, 2.0), (3.0, 4.0)))])
    assert after is before
    with pytest.raises(Refused, match="no panel 99"):
        chain().reading([Measured(99, ((1.0, 2.0), (3.0, 4.0)))])


def test_an_undone_region_costs_nothing():
    region = stamp_on(5)
    chain().reading([region])
    began = time.perf_counter()
    chain().reading([])
    chain().reading([region])
    assert time.perf_counter() - began < 0.5  # reading the page takes many times that

"""Whole pages of perfect ink: every lead at its place, at the right time and scale, or said so."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.errors import NoTrace
from digitize.layout import Layout, find_layout
from digitize.marks import find_marks
from digitize.options import Options
from digitize.rows import find_rows
from digitize.tracing import LEADS
from digitize.words import NAMES, Printing, Word, read_printing
from tests.digitize.drawn_ink import CHART, perfect_sheet, read_words, rows_of
from tests.drawn.spec import LayoutSpec, LetterSpec, PageSpec

TALL = replace(CHART.paper, size_mm=(290.0, 205.0))
LONG = replace(CHART.paper, size_mm=(290.0, 215.0))


def chart(**layout) -> PageSpec:
    return replace(CHART, layout=replace(CHART.layout, **layout))


PAGES = {
    "3x4+1": CHART,
    "3x4": chart(strips=()),
    "3x4+3": replace(chart(strips=("V1", "II", "V5"), pitch_mm=28.0), paper=TALL),
    "3x4+1 Cabrera": chart(order="cabrera"),
    "6x2": replace(
        CHART,
        paper=TALL,
        layout=LayoutSpec(
            rows=6, columns=2, strips=(), panel_s=5.0, top_mm=24.0, pitch_mm=28.0, gap_mm=6.0
        ),
    ),
    "12x1": replace(
        CHART,
        paper=LONG,
        letters=replace(CHART.letters, label_place="left", label_mm=2.4),
        layout=LayoutSpec(
            rows=12,
            columns=1,
            strips=(),
            panel_s=9.6,
            left_mm=30.0,
            top_mm=18.0,
            pitch_mm=15.5,
            mark="none",
        ),
    ),
    "3x4 at 50 mm/s": replace(
        chart(strips=(), speed_mm_s=50.0, panel_s=1.25),
        letters=LetterSpec(footer=("50 mm/s 10 mm/mV",)),
    ),
    "3x4 with half gain in the chest": replace(
        chart(strips=(), chest_gain_mm_mv=5.0, mark="both", panel_s=2.35),
        letters=LetterSpec(footer=("25 mm/s  Limb 10 mm/mV  Chest 5 mm/mV",)),
    ),
}


def layout_of(spec: PageSpec, options: Options | None = None) -> Layout:
    """The layout of a perfect sheet."""
    ink = perfect_sheet(spec).ink
    return find_layout(ink, read_words(spec), rows_of(spec), find_marks(ink), options)


@pytest.mark.parametrize("page", PAGES)
def test_every_lead_stands_where_it_was_drawn(page):
    spec = PAGES[page]
    found, truth = layout_of(spec), perfect_sheet(spec).composition.panels
    assert found.name.value == spec.layout.name
    assert found.name.source == "found"
    drawn = {(p.row, p.column): p for p in truth}
    assert {(p.row, p.column): p.lead for p in found.panels} == {
        place: panel.lead for place, panel in drawn.items()
    }
    for panel in found.panels:
        expected = drawn[panel.row, panel.column]
        # Half a millimetre: a column of ink is looked at every quarter.
        assert panel.box.left_mm == pytest.approx(expected.x_mm[0], abs=0.5)
        assert panel.box.right_mm == pytest.approx(expected.x_mm[-1], abs=0.5)
        assert panel.start_s == pytest.approx(expected.start_s, abs=0.5 / spec.layout.speed_mm_s)
        assert panel.strip == expected.strip
        assert panel.gain_mm_mv == expected.gain_mm_mv
        assert panel.speed_mm_s == expected.speed_mm_s


@pytest.mark.parametrize("page", ["3x4+1", "6x2"])
def test_zero_stands_where_the_mark_stands(page):
    spec = PAGES[page]
    drawn = {(p.row, p.column): p for p in perfect_sheet(spec).composition.panels}
    for panel in layout_of(spec).panels:
        expected = drawn[panel.row, panel.column].baseline_mm
        assert panel.baseline_mm == pytest.approx(expected, abs=0.05)  # 5 µV


def test_names_are_read_and_not_assumed():
    found = layout_of(CHART)
    read = [panel.lead for panel in found.panels if panel.lead_source == "printed"]
    assert {"aVR", "aVL", "aVF", "V1", "V2", "V3", "V4", "V5", "V6"} <= set(read)
    assert not any(panel.lead_source == "assumed" for panel in found.panels)


def test_without_a_word_on_the_page_names_are_assumed_and_said_to_be():
    silent = replace(CHART, letters=LetterSpec(label_place="none"))
    found = layout_of(silent)
    assert {panel.lead_source for panel in found.panels} == {"assumed"}
    assert any("not read" in note for note in found.notes)


def test_what_a_person_gives_is_taken():
    order = (*LEADS[6:], *LEADS[:6])
    found = layout_of(PAGES["6x2"], Options(layout="6x2", lead_order=order, timing="simultaneous"))
    assert (found.name.value, found.name.source) == ("6x2", "given")
    assert tuple(panel.lead for panel in found.panels) == order
    assert {panel.lead_source for panel in found.panels} == {"given"}
    assert (found.timing.value, found.timing.source) == ("simultaneous", "given")
    assert {panel.start_s for panel in found.panels} == {0.0}


def test_leads_printed_at_unusual_places_keep_their_printed_names():
    # V1 and V2 exchanged at the time of recording, and labelled as they are.
    sheet = perfect_sheet(CHART)
    words = read_words(CHART).words
    one, two = (
        next(w for w in words if w.text == text and w.box.left_mm > 140) for text in ("V1", "V2")
    )
    swap = {id(one): replace(one, names=two.names), id(two): replace(two, names=one.names)}
    printing = replace(read_words(CHART), words=tuple(swap.get(id(w), w) for w in words))
    found = find_layout(sheet.ink, printing, rows_of(CHART), find_marks(sheet.ink))
    at = {(p.row, p.column): p.lead for p in found.panels}
    assert (at[0, 2], at[1, 2]) == ("V2", "V1")
    assert any("V2 where V1 is usual" in note for note in found.notes)


def renamed(names: dict[str, str]) -> Printing:
    """The printing of the chart with other names in place of some, clearly read."""

    def other(word: Word) -> Word:
        name = names.get(word.text)
        likely = {n: 0.0 if n == name else -20.0 for n in NAMES}
        return word if name is None else replace(word, text=name, names=likely)

    printing = read_words(CHART)
    return replace(printing, words=tuple(other(word) for word in printing.words))


@pytest.mark.parametrize(
    "names", [{"V4": "V7", "V5": "V8", "V6": "V9"}, {"V1": "V3R", "V2": "V4R"}]
)
def test_leads_of_other_places_on_the_chest_are_named_as_printed(names):
    ink = perfect_sheet(CHART).ink
    found = find_layout(ink, renamed(names), rows_of(CHART), find_marks(ink))
    at = {(p.row, p.column): p.lead for p in found.panels}
    for panel in perfect_sheet(CHART).composition.panels:
        assert at[panel.row, panel.column] == names.get(panel.lead, panel.lead)


@pytest.mark.parametrize("lost_mm", [12.0, 25.0])
def test_a_page_cut_off_at_the_right_keeps_its_columns_and_says_so(lost_mm):
    whole = perfect_sheet(CHART).ink
    right_mm = max(p.x_mm[-1] for p in perfect_sheet(CHART).composition.panels) - lost_mm
    cols = round(whole.raster.col(right_mm))
    ink = replace(whole, density=whole.density[:, :cols], hidden=whole.hidden[:, :cols])
    printing = read_printing(ink)
    found = find_layout(ink, printing, find_rows(ink, printing.letters), find_marks(ink))
    drawn = {(p.row, p.column): p for p in perfect_sheet(CHART).composition.panels}
    assert any("right edge of the picture" in note for note in found.notes)
    for panel in found.panels:
        expected = drawn[panel.row, panel.column]
        assert panel.lead == expected.lead
        assert panel.box.left_mm == pytest.approx(expected.x_mm[0], abs=0.5)
        last = min(expected.x_mm[-1], right_mm)
        assert panel.box.right_mm == pytest.approx(last, abs=0.5)


def test_a_page_shifted_and_larger_has_the_same_layout():
    moved = replace(
        chart(left_mm=31.0, top_mm=37.0),
        paper=replace(CHART.paper, size_mm=(310.0, 165.0)),
    )
    one, other = layout_of(CHART), layout_of(moved)
    assert [p.lead for p in one.panels] == [p.lead for p in other.panels]
    for a, b in zip(one.panels, other.panels, strict=True):
        assert b.box.left_mm - a.box.left_mm == pytest.approx(11.0, abs=0.25)
        assert b.baseline_mm - a.baseline_mm == pytest.approx(13.0, abs=0.05)
        assert b.start_s == pytest.approx(a.start_s, abs=0.01)


def test_boxes_of_a_row_do_not_overlap():
    found = layout_of(CHART)
    for row in range(3):
        boxes = sorted((p.box for p in found.panels if p.row == row), key=lambda b: b.left_mm)
        rights, lefts = [b.right_mm for b in boxes[:-1]], [b.left_mm for b in boxes[1:]]
        assert np.all(np.array(lefts) - np.array(rights) >= -0.3)  # a pen's width


def test_no_row_no_layout():
    rows = replace(rows_of(CHART), rows=())
    with pytest.raises(NoTrace, match="no ECG trace"):
        find_layout(perfect_sheet(CHART).ink, read_words(CHART), rows, ())


def test_a_layout_that_cannot_be_is_refused_with_advice():
    with pytest.raises(NoTrace, match=r"4 rows of trace.*--layout"):
        layout_of(CHART, Options(layout="12x1"))


def test_a_calibration_mark_without_a_row_is_told():
    ink, printing = perfect_sheet(CHART).ink, read_words(CHART)
    rows, marks = rows_of(CHART), find_marks(perfect_sheet(CHART).ink)
    assert find_layout(ink, printing, rows, marks).name.source == "found"
    fewer = replace(rows, rows=rows.rows[:-1])  # the strip was not seen
    found = find_layout(ink, printing, fewer, marks)
    assert found.name.source == "assumed"
    assert "a calibration mark stands where no trace was found: a row may be missing" in found.notes

"""Corrections as inputs of stages, what follows from them, and the journal that keeps them."""

import json

import numpy as np
import pytest

from digitize.errors import CannotWrite, NoTrace, UnreadableFile
from measure.overread.corrections import (
    Arrangement,
    BeatUse,
    Boundary,
    ColumnTiming,
    Crop,
    Flip,
    Gain,
    Ignore,
    LeadName,
    Measured,
    PanelEdges,
    Patient,
    Redraw,
    Refused,
    Speed,
    StrikeOut,
    Swap,
    Turn,
    in_force,
)
from measure.overread.corrections_json import from_plain, to_plain
from measure.overread.session import UNSIGNED
from tests.measure.overread.made import digital_chain, page_chain, page_stages, session

EVERY = (
    Turn(180),
    Arrangement("3x4+1"),
    Arrangement("3x1", ("V1", "II", "V5")),
    Crop(0.0, 0.0, 100.0, 60.0),
    Ignore(10.5, 20.0, 30.0, 28.0),
    Measured(2, ((1.0, 2.0), (3.0, 4.5))),
    LeadName(0, "V1"),
    Swap(0, 3),
    Flip(2),
    Speed(50.0),
    Gain(5.0, 3),
    Gain(20.0),
    ColumnTiming("simultaneous"),
    PanelEdges(1, 20.0, 80.5),
    StrikeOut(1, 30.0, 31.5),
    Redraw(0, ((1.0, 2.0), (3.0, 4.5))),
    Boundary("qrs_on_ms", -42.0),
    BeatUse(3.25, False),
    Patient("female", 61.0),
)


@pytest.mark.parametrize("correction", EVERY, ids=lambda c: type(c).__name__)
def test_a_correction_survives_json(correction):
    assert from_plain(json.loads(json.dumps(to_plain(correction)))) == correction


@pytest.mark.parametrize(
    "entry",
    [
        {},
        {"kind": "stamp"},
        {"kind": "speed"},
        {"kind": "speed", "mm_s": "25"},
        {"kind": "speed", "mm_s": True},
        {"kind": "speed", "mm_s": float("nan")},
        {"kind": "speed", "mm_s": 0.0},
        {"kind": "speed", "mm_s": 25.0, "path": "/etc"},
        {"kind": "lead name", "panel": 0, "lead": "<b>"},
        {"kind": "lead name", "panel": 0.5, "lead": "V1"},
        {"kind": "panel edges", "panel": 0, "left_mm": 50, "right_mm": 40},
        {"kind": "redraw", "panel": 0, "points": [[1, 2]]},
        {"kind": "redraw", "panel": 0, "points": [[3, 2], [1, 2]]},
        {"kind": "redraw", "panel": 0, "points": [1, 2]},
        {"kind": "boundary", "edge": "value", "at_ms": 0},
        {"kind": "patient", "sex": "x"},
    ],
)
def test_what_no_page_can_have_is_refused(entry):
    with pytest.raises(Refused):
        from_plain(entry)


def test_places_in_time_are_void_after_the_speed_changed():
    early, late = Boundary("qrs_on_ms", -40.0), Boundary("qrs_on_ms", -20.0)
    assert in_force((early, BeatUse(1.0, False), Speed(50.0), late)) == (Speed(50.0), late)


def test_a_moved_boundary_moves_the_interval_by_as_much():
    chain = digital_chain()
    before = chain.reading()
    at_ms = before.boundaries.overall.qrs_off_ms.value + 30
    after = chain.reading([Boundary("qrs_off_ms", at_ms)])
    change = after.intervals["qrs_ms"].value - before.intervals["qrs_ms"].value
    assert change == pytest.approx(30)
    assert after.intervals["qt_ms"] == before.intervals["qt_ms"]
    assert after.beat is before.beat  # what it does not depend on is not computed again
    assert after.intervals["qrs_ms"].se == before.intervals["qrs_ms"].se


def test_findings_follow_the_boundaries():
    chain = digital_chain()
    onset_ms = chain.reading().boundaries.overall.qrs_on_ms.value
    narrow, wide = (
        {f.key: f.result for f in chain.reading(moves).findings}
        for moves in ([], [Boundary("qrs_off_ms", onset_ms + 140)])
    )
    # more than 110 ms without a pattern of block (AHA/ACCF/HRS 2009 part III, from memory)
    assert (narrow["nonspecific_delay"], wide["nonspecific_delay"]) == ("not met", "met")


def test_the_qrs_of_a_lead_stays_within_the_overall_one():
    chain = digital_chain()
    onset_ms = chain.reading().boundaries.overall.qrs_on_ms.value + 24
    edges = chain.reading([Boundary("qrs_on_ms", onset_ms)]).boundaries.by_lead
    assert min(own.qrs_on_ms.value for own in edges.values()) == onset_ms


def test_boundaries_must_follow_one_another():
    chain = digital_chain()
    off_ms = chain.reading().boundaries.overall.qrs_off_ms.value
    with pytest.raises(Refused, match="follow one another"):
        chain.reading([Boundary("qrs_on_ms", off_ms + 2)])


def test_a_beat_taken_out_is_no_longer_averaged():
    chain = digital_chain()
    before = chain.reading()
    out = BeatUse(float(before.beats.time_s[2]), False)
    after = chain.reading([out])
    assert max(after.beat.beats) == max(before.beat.beats) - 1
    assert chain.reading([out, BeatUse(out.time_s, True)]).beat.beats == before.beat.beats


def test_one_beat_at_least_stays():
    chain = digital_chain()
    with pytest.raises(Refused, match="one beat at least"):
        chain.reading([BeatUse(float(t), False) for t in chain.reading().beats.time_s])


def test_a_digital_ecg_has_no_paper_to_correct():
    with pytest.raises(Refused, match="no page"):
        digital_chain().reading([Speed(50.0)])


def test_no_correction_leaves_a_page_as_it_was_found():
    tracing = page_stages().tracing
    # a name that is given again leads once through all stages
    again = page_chain().reading([LeadName(0, tracing.panels[0].lead)]).tracing
    for old, new in zip(tracing.panels, again.panels, strict=True):
        np.testing.assert_array_equal(old.mv, new.mv)
        assert (old.start_s, old.box_mm) == (new.start_s, new.box_mm)
    assert again.panels[0].lead_source == "given"
    assert again.geometry["turn_deg"] == tracing.geometry["turn_deg"]


def test_names_are_given_swapped_and_turned_over():
    found = page_stages().tracing.panels
    panels = page_chain().reading([Swap(0, 1), Flip(2)]).tracing.panels
    assert (panels[0].lead, panels[1].lead) == (found[1].lead, found[0].lead)
    assert panels[2].lead == found[2].lead
    np.testing.assert_array_equal(panels[2].mv, -found[2].mv)


def test_twice_the_speed_halves_the_times():
    before, after = page_chain().reading(), page_chain().reading([Speed(50.0)])
    rates = [r.intervals["rate_bpm"].value for r in (before, after)]
    assert rates[1] == pytest.approx(2 * rates[0], rel=0.01)
    assert after.tracing.speed_mm_s.source == "given"


def test_half_the_gain_doubles_the_voltages_of_one_panel():
    found = page_stages().tracing.panels
    panels = page_chain().reading([Gain(found[0].gain_mm_mv / 2, 0)]).tracing.panels
    np.testing.assert_allclose(panels[0].mv, 2 * found[0].mv)
    np.testing.assert_array_equal(panels[1].mv, found[1].mv)


def test_a_stretch_struck_out_is_missing_and_says_why():
    left, _, right, _ = page_stages().tracing.panels[0].box_mm
    middle = (left + right) / 2
    panel = page_chain().reading([StrikeOut(0, middle - 5, middle + 5)]).tracing.panels[0]
    x_mm = left + np.arange(len(panel.mv)) / panel.fs_hz * panel.speed_mm_s
    inside = np.abs(x_mm - middle) < 4.9
    assert np.isnan(panel.mv[inside]).all()
    assert np.isfinite(panel.mv[np.abs(x_mm - middle) > 5.1]).mean() > 0.95
    assert any("struck out" in note for note in panel.notes)


def test_a_stretch_redrawn_coarsely_is_fitted_to_the_ink():
    """Points 1.5 mm apart, each 0.5 mm off, end where the page's own fit had put the line."""
    stroke, found = page_stages().strokes[0], page_stages().tracing.panels[0]
    at = slice(200, 500, 30)
    offs = 0.5 * (-1.0) ** np.arange(len(stroke.x_mm[at]))
    points = tuple(zip(stroke.x_mm[at].tolist(), (stroke.y_mm[at] + offs).tolist(), strict=True))
    panel = page_chain().reading([Redraw(0, points)]).tracing.panels[0]
    assert any("redrawn" in note for note in panel.notes)
    apart_mv = np.abs(panel.mv - found.mv)
    # 25 uV is what IEC 60601-2-25 allows of an amplitude up to 0.5 mV (from memory)
    assert np.nanquantile(apart_mv, 0.95) < 0.025


def test_nothing_is_drawn_where_there_is_no_ink():
    left, top, right, _ = page_stages().tracing.panels[0].box_mm
    bare = ((left + 15.0, top - 8.0), (left + 25.0, top - 8.0))
    with pytest.raises(NoTrace, match="no ink"):
        page_chain().reading([Redraw(0, bare)])
    with pytest.raises(NoTrace, match="beside the panel"):
        page_chain().reading([Redraw(0, ((right + 30, top), (right + 40, top)))])


def test_moved_edges_cut_another_stretch_of_the_same_line():
    found = page_stages().tracing.panels[0]
    left, _, right, _ = found.box_mm
    moved = PanelEdges(0, left + 2.0, right - 10.0)
    panel = page_chain().reading([moved]).tracing.panels[0]
    assert panel.start_s == pytest.approx(found.start_s + 2.0 / found.speed_mm_s, abs=0.002)
    first = round((panel.start_s - found.start_s) * found.fs_hz)
    same = found.mv[first : first + len(panel.mv)]
    np.testing.assert_allclose(panel.mv, same, atol=0.01)


def test_a_panel_that_is_not_there_is_refused():
    with pytest.raises(Refused, match="no panel 99"):
        page_chain().reading([LeadName(99, "V1")])


def test_undo_and_redo_lead_there_and_back(tmp_path):
    over = session(digital_chain(), tmp_path)
    auto = over.reading().intervals["qrs_ms"]
    edge = over.reading().boundaries.overall.qrs_off_ms.value
    for more in (10, 20, 30):
        over.correct(Boundary("qrs_off_ms", edge + more), "A. Reader")
    wide = over.reading().intervals["qrs_ms"]
    for _ in range(3):
        over.undo()
    assert over.reading().intervals["qrs_ms"] == auto
    with pytest.raises(Refused, match="nothing to undo"):
        over.undo()
    for _ in range(3):
        over.redo()
    assert over.reading().intervals["qrs_ms"] == wide
    assert over.automatic.intervals["qrs_ms"] == auto


def test_the_journal_brings_everything_back(tmp_path):
    over = session(digital_chain(), tmp_path)
    edge = over.reading().boundaries.overall.qrs_off_ms.value
    over.correct(Boundary("qrs_off_ms", edge + 10), "A. Reader")
    over.correct(Patient("male", 70.0), "A. Reader")
    over.undo()
    again = session(digital_chain(), tmp_path)
    assert (again.steps, again.undone) == (over.steps, over.undone)
    assert again.steps[0].who == "A. Reader"
    assert again.reading().intervals == over.reading().intervals


def test_what_is_refused_changes_neither_session_nor_journal(tmp_path):
    over = session(digital_chain(), tmp_path)
    over.correct(Patient("male", 70.0), "")
    before = (tmp_path / "ecg.overread.json").read_bytes()
    with pytest.raises(Refused):
        over.correct(Speed(50.0), "")
    assert len(over.steps) == 1
    assert (tmp_path / "ecg.overread.json").read_bytes() == before


def test_a_journal_that_cannot_be_written_changes_nothing(tmp_path):
    over = session(digital_chain(), tmp_path / "ecg.overread.json")
    (tmp_path / "ecg.overread.json").write_text("in the way")
    with pytest.raises(CannotWrite):
        over.correct(Patient("male", 70.0), "")
    assert over.steps == ()


@pytest.mark.parametrize("content", ["", "[]", "{}", '{"format": "else"}', "\udce9"])
def test_a_damaged_journal_is_refused_and_left_alone(tmp_path, content):
    path = tmp_path / "ecg.overread.json"
    path.write_bytes(content.encode("utf-8", "surrogateescape"))
    with pytest.raises(UnreadableFile, match="move it away"):
        session(digital_chain(), tmp_path)
    assert path.read_bytes() == content.encode("utf-8", "surrogateescape")


def test_the_journal_of_another_page_is_refused(tmp_path):
    session(digital_chain(), tmp_path).correct(Patient("male", 70.0), "")
    with pytest.raises(UnreadableFile, match="another page"):
        session(page_chain(), tmp_path)


def test_signing_adds_and_a_later_change_leaves_it_unsigned(tmp_path):
    over = session(digital_chain(), tmp_path)
    assert over.reading().cautions[0] == UNSIGNED
    with pytest.raises(Refused, match="type your name"):
        over.sign("  ", "")
    over.sign("A. Reader", "sound")
    assert over.reading().cautions[0].startswith("Signed by A. Reader")
    edge = over.reading().boundaries.overall.qrs_off_ms.value
    over.correct(Boundary("qrs_off_ms", edge + 10), "B. Reader")
    assert over.signed is None
    assert over.reading().cautions[0] == UNSIGNED
    over.sign("B. Reader", "QRS ends later")
    first, second = json.loads((tmp_path / "ecg.overread.json").read_text())["signatures"]
    assert (first["name"], second["name"]) == ("A. Reader", "B. Reader")
    assert second["page_sha256"] == over.automatic.tracing.source.sha256
    auto, signed = (second[k]["intervals"]["qrs_ms"]["value"] for k in ("automatic", "signed"))
    assert signed == pytest.approx(auto + 10)
    assert second["corrections"][0]["who"] == "B. Reader"

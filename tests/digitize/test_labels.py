"""Lead names as soft evidence: what one reading says, and which readings belong to the traces."""

from dataclasses import replace

import pytest

from digitize.labels import LabelFit, Slot, fit_labels, look_again, posterior
from digitize.sheet import Box
from digitize.templates import TEMPLATES
from digitize.words import NAMES, Word
from tests.digitize.drawn_ink import CHART, perfect_sheet, read_words

PITCH_MM = 30.0
TEMPLATE = next(t for t in TEMPLATES if t.name == "3x4")
SLOTS = tuple(
    Slot(r, c, 20.0 + 62.5 * c, 40.0 + PITCH_MM * r, lead)
    for r, leads in enumerate(TEMPLATE.leads)
    for c, lead in enumerate(leads)
)


def word(name: str, x_mm: float, y_mm: float, *, doubt: float = 0.0) -> Word:
    """A crop read as `name`; `doubt` in log probability, shared by all other names at -8."""
    names = dict.fromkeys(NAMES, -8.0) | {name: -0.01 - doubt}
    return Word(Box(x_mm, y_mm, x_mm + 5.0, y_mm + 2.6), name, 0.95, names)


def words_at(offset_mm: tuple[float, float], leave_out: tuple[str, ...] = ()) -> list[Word]:
    """Every name at one place relative to the start of its trace."""
    return [
        word(s.name, s.x_mm + offset_mm[0], s.y_mm + offset_mm[1])
        for s in SLOTS
        if s.name is not None and s.name not in leave_out
    ]


# ---- one reading --------------------------------------------------------------------------------


def test_probabilities_of_a_reading_add_up_to_one():
    shares = posterior(word("V4", 0, 0, doubt=1.0))
    assert sum(shares.values()) == pytest.approx(1.0)
    assert max(shares, key=lambda n: shares[n]) == "V4"


def test_a_poorer_reading_is_less_sure():
    shares = [posterior(word("aVL", 0, 0, doubt=d))["aVL"] for d in (0.0, 1.0, 3.0)]
    assert shares == sorted(shares, reverse=True)
    assert shares[0] > 0.95


def test_a_crop_that_no_name_explains_says_nothing():
    assert posterior(word("V1", 0, 0, doubt=7.0)) == {}
    assert posterior(Word(Box(0, 0, 9, 3), "25 mm/s", 0.9, {})) == {}


# ---- readings against an arrangement -----------------------------------------------------------


@pytest.mark.parametrize("offset_mm", [(1.0, -9.0), (-6.0, -2.0), (1.0, 8.0)])
def test_names_are_taken_from_the_place_they_share(offset_mm):
    fit = fit_labels(words_at(offset_mm), SLOTS, PITCH_MM)
    assert {key: name for key, (name, _) in fit.names.items()} == {
        (s.row, s.column): s.name for s in SLOTS
    }
    assert fit.offset_mm == pytest.approx((offset_mm[0], offset_mm[1] + 1.3), abs=0.01)


def test_the_right_arrangement_explains_the_names_better_than_another():
    turned = tuple(replace(s, name=TEMPLATE.leads[s.row][3 - s.column]) for s in SLOTS)
    words = words_at((1.0, -9.0))
    right, wrong = (fit_labels(words, slots, PITCH_MM).score for slots in (SLOTS, turned))
    assert right > wrong + 10


def test_names_elsewhere_on_the_page_do_not_count():
    stray = [word("V6", 90.0, 12.0), word("aVR", 22.0, 3.0)]
    plain = fit_labels(words_at((1.0, -9.0)), SLOTS, PITCH_MM)
    fit = fit_labels([*words_at((1.0, -9.0)), *stray], SLOTS, PITCH_MM)
    assert fit.names == plain.names
    assert fit.score == pytest.approx(plain.score)


def test_names_in_the_first_column_may_stand_aside_for_a_calibration_mark():
    words = [
        replace(w, box=replace(w.box, left_mm=w.box.left_mm - 9, right_mm=w.box.right_mm - 9))
        if w.box.left_mm < 40
        else w
        for w in words_at((1.0, -9.0))
    ]
    assert len(fit_labels(words, SLOTS, PITCH_MM).names) == 12


def test_names_of_the_first_column_may_stand_left_of_their_traces_and_the_others_above():
    words = words_at((1.0, -8.0), leave_out=("I", "II", "III"))
    beside = [word(n, 12.0, 37.5 + PITCH_MM * r) for r, n in enumerate(("I", "II", "III"))]
    fit = fit_labels(words + beside, SLOTS, PITCH_MM)
    read = {SLOTS[k].name: fit.names[SLOTS[k].row, SLOTS[k].column][0] for k in range(len(SLOTS))}
    assert read == {slot.name: slot.name for slot in SLOTS}
    assert fit.offset_mm == pytest.approx((-8.0, -1.2))
    assert fit.inner_offset_mm == pytest.approx((1.0, -6.7))


def test_an_unread_name_leaves_its_place_empty():
    fit = fit_labels(words_at((1.0, -9.0), leave_out=("V3",)), SLOTS, PITCH_MM)
    assert (2, 2) not in fit.names
    assert len(fit.names) == 11


def test_ticks_between_columns_that_read_as_i_say_nothing_of_the_names_there():
    ticks = [word("I", s.x_mm - 0.5, s.y_mm - 9.0, doubt=0.3) for s in SLOTS if s.column > 0]
    left = [w for w in words_at((1.0, -9.0)) if w.box.left_mm < 40]
    fit = fit_labels([*left, *ticks], SLOTS, PITCH_MM)
    assert fit.score == pytest.approx(fit_labels(left, SLOTS, PITCH_MM).score)
    assert set(fit.names) == {(0, 0), (1, 0), (2, 0)}


def test_names_belong_to_the_nearer_row():
    near = fit_labels(words_at((1.0, 7.0)), SLOTS, PITCH_MM)
    far = fit_labels(words_at((1.0, -22.0)), SLOTS, PITCH_MM)
    assert len(near.names) == len(far.names) == 12
    assert near.score > far.score + 1


def test_no_word_no_evidence():
    assert fit_labels([], SLOTS, PITCH_MM) == LabelFit(0.0, {}, None, False, ())


def test_a_missed_name_is_looked_for_where_the_others_say_it_stands():
    sheet = perfect_sheet(CHART)
    panels = [p for p in sheet.composition.panels if not p.strip]
    slots = tuple(Slot(p.row, p.column, p.x_mm[0], p.baseline_mm, p.lead) for p in panels)
    fit = fit_labels(read_words(CHART).words, slots, CHART.layout.pitch_mm)
    kept = {key: name for key, name in fit.names.items() if key not in ((0, 1), (2, 3))}
    again = look_again(sheet.ink, replace(fit, names=kept), slots)
    assert again.names[0, 1][0] == "aVR"
    assert again.names[2, 3][0] == "V6"


def test_a_name_that_a_tall_complex_crosses_is_read_without_it():
    sheet = perfect_sheet(CHART)
    panels = [p for p in sheet.composition.panels if not p.strip]
    slots = tuple(Slot(p.row, p.column, p.x_mm[0], p.baseline_mm, p.lead) for p in panels)
    fit = fit_labels(read_words(CHART).words, slots, CHART.layout.pitch_mm)
    box, ink = fit.places[2, 3], sheet.ink
    density, r = ink.density.copy(), ink.raster
    middle = int(r.col(box.left_mm + 0.25 * (box.right_mm - box.left_mm)))
    high = slice(int(r.row(box.top_mm - 8)), int(r.row(box.bottom_mm + 8)))
    density[high, middle - 2 : middle + 2] = 1.0
    kept = {key: name for key, name in fit.names.items() if key != (2, 3)}
    again = look_again(replace(ink, density=density), replace(fit, names=kept), slots)
    assert again.names[2, 3][0] == "V6"
    assert again.names[2, 3][1] > 0.9


def test_where_no_two_names_agree_there_is_no_place_to_look():
    ink = perfect_sheet(CHART).ink
    fit = fit_labels([], SLOTS, PITCH_MM)
    assert look_again(ink, fit, SLOTS) is fit

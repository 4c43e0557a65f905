"""Speed and gain: as given, as printed, as the marks show, as assumed, in that order of trust."""

import numpy as np
import pytest

from digitize.marks import Mark
from digitize.options import Options
from digitize.rows import Row, Rows, Runs
from digitize.scale import find_scale
from digitize.sheet import Box
from digitize.words import Printing, Word

NOTHING = np.empty(0)
ROWS = Rows((Row(40.0, 10, 260), Row(80.0, 10, 260)), 40.0, Runs(NOTHING, NOTHING, NOTHING), ())


def printing(*lines: str) -> Printing:
    """Lines of print, from top to bottom."""
    words = (Word(Box(0, 5.0 * k, 60, 5.0 * k + 3), text, 0.9, {}) for k, text in enumerate(lines))
    return Printing((), tuple(words), ())


def mark(row_mm: float, *, width_mm: float = 5.0, height_mm: float = 10.0, left_mm: float = 4.0):
    return Mark(left_mm, left_mm + width_mm, row_mm - height_mm, row_mm)


MARKS = (mark(40.0), mark(80.0, width_mm=5.04, height_mm=9.96))


def test_what_a_person_gives_stands_above_all():
    options = Options(speed_mm_s=50.0, gain_mm_mv=20.0)
    scale = find_scale(printing("25 mm/s 10 mm/mV"), ROWS, MARKS, options)
    assert (scale.speed_mm_s.value, scale.speed_mm_s.source) == (50.0, "given")
    assert (scale.gain_mm_mv.value, scale.gain_mm_mv.source) == (20.0, "given")
    assert scale.gain_of(40.0, "II") == scale.gain_of(40.0, "V2") == 20.0


def test_print_and_marks_that_agree():
    scale = find_scale(printing("25 mm/s 10 mm/mV"), ROWS, MARKS, Options())
    assert (scale.speed_mm_s.value, scale.speed_mm_s.source) == (25.0, "printed")
    assert (scale.gain_mm_mv.value, scale.gain_mm_mv.source) == (10.0, "printed")
    assert scale.notes == ()


@pytest.mark.parametrize(
    ("width_mm", "height_mm", "speed", "gain"),
    [(5.0, 10.0, 25, 10), (10.1, 19.8, 50, 20), (5.1, 5.05, 25, 5)],
)
def test_marks_alone_are_measured(width_mm, height_mm, speed, gain):
    marks = [mark(y, width_mm=width_mm, height_mm=height_mm) for y in (40.0, 80.0)]
    scale = find_scale(printing(), ROWS, marks, Options())
    assert (scale.speed_mm_s.value, scale.speed_mm_s.source) == (speed, "found")
    assert (scale.gain_mm_mv.value, scale.gain_mm_mv.source) == (gain, "found")


def test_a_speed_from_narrow_marks_that_makes_rows_too_long_is_doubted():
    marks = [mark(y, width_mm=2.5) for y in (40.0, 80.0)]  # 0.2 s at 12.5 mm/s, 0.1 s at 25 mm/s
    scale = find_scale(printing(), ROWS, marks, Options())  # rows of 250 mm: 20 s or 10 s
    assert (scale.speed_mm_s.value, scale.speed_mm_s.source) == (25.0, "assumed")
    assert "2.5 mm wide" in scale.notes[0]
    short = Rows((Row(40.0, 10, 140), Row(80.0, 10, 140)), 40.0, ROWS.runs, ())
    scale = find_scale(printing(), short, marks, Options())
    assert (scale.speed_mm_s.value, scale.speed_mm_s.source) == (12.5, "found")


def test_nothing_said_is_assumed_and_said_to_be():
    scale = find_scale(printing("Invented patient 0417"), ROWS, (), Options())
    # Common practice: 25 mm/s, 10 mm/mV.
    assert (scale.speed_mm_s.value, scale.speed_mm_s.source) == (25.0, "assumed")
    assert (scale.gain_mm_mv.value, scale.gain_mm_mv.source) == (10.0, "assumed")
    assert any("--speed" in note for note in scale.notes)
    assert any("--gain" in note for note in scale.notes)


def test_marks_against_print_are_told():
    wide = [mark(y, width_mm=10.0, height_mm=5.0) for y in (40.0, 80.0)]
    scale = find_scale(printing("25 mm/s 10 mm/mV"), ROWS, wide, Options())
    assert any("50 mm/s" in note for note in scale.notes)
    assert any("10 mm/mV" in note and "5 mm high" in note for note in scale.notes)
    # Height is what was drawn beside the trace; the print may be of the recorder's setting.
    assert (scale.gain_mm_mv.value, scale.gain_mm_mv.source) == (5.0, "found")


def test_two_speeds_are_told():
    scale = find_scale(printing("25 mm/s", "50 mm/s"), ROWS, (), Options())
    assert any("25 and 50 mm/s" in note for note in scale.notes)


def test_half_gain_of_chest_leads_by_print():
    scale = find_scale(printing("Limb 10 mm/mV  Chest 5 mm/mV"), ROWS, (), Options())
    assert scale.gain_of(40.0, "aVF") == 10.0
    assert scale.gain_of(40.0, "V3") == 5.0


def test_half_gain_of_chest_leads_by_marks_at_both_ends():
    marks = [mark(40.0), mark(40.0, height_mm=5.0, left_mm=262.0)]
    scale = find_scale(printing(), ROWS, marks, Options())
    assert scale.gain_of(40.0, "I") == 10.0
    assert scale.gain_of(40.0, "V1") == 5.0


def test_a_mark_of_no_usual_size_scales_nothing():
    odd = [mark(y, width_mm=6.4, height_mm=13.0) for y in (40.0, 80.0)]
    scale = find_scale(printing(), ROWS, odd, Options())
    assert scale.speed_mm_s.source == "assumed"
    assert scale.gain_mm_mv.source == "assumed"


def test_a_strip_of_a_chest_lead_with_a_mark_of_its_own_tells_the_chest_leads_gain():
    marks = (mark(40.0), mark(80.0, height_mm=5.0))
    scale = find_scale(printing("25 mm/s"), ROWS, marks, Options())
    assert scale.gain_of(40.0, "aVL") == 10.0
    assert scale.gain_of(40.0, "V4") == 5.0  # beside limb leads, behind their mark
    assert scale.gain_of(80.0, "V1") == 5.0
    assert any("10 and 5 mm" in note for note in scale.notes)


def test_digits_that_ran_together_are_no_speed():
    scale = find_scale(printing("1025 mm/s"), ROWS, (), Options())
    assert scale.speed_mm_s.source == "assumed"


def test_of_two_marks_side_by_side_the_one_like_the_others_counts():
    black_ruling = mark(40.0, height_mm=20.0, left_mm=16.0)
    scale = find_scale(printing("10 mm/mV"), ROWS, (*MARKS, black_ruling), Options())
    assert scale.gain_of(40.0, "II") == scale.gain_of(40.0, "V2") == 10.0
    at_the_end = mark(40.0, height_mm=5.0, left_mm=262.0)  # chest leads with a mark of their own
    scale = find_scale(printing(), ROWS, (*MARKS, at_the_end), Options())
    assert (scale.gain_of(40.0, "II"), scale.gain_of(40.0, "V2")) == (10.0, 5.0)

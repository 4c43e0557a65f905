"""Printing: words found and read on a page, and the run that they state."""

from dataclasses import replace

import cv2
import numpy as np
import pytest

from digitize.ink import Ink
from digitize.sheet import Box, Raster
from digitize.words import (
    Printing,
    Word,
    apart_from_traces,
    printed_gains,
    printed_speeds,
    read_printing,
)
from tests.digitize.drawn_ink import CHART, perfect_sheet, read_words

# ---- the printed run, from lines as they are read -----------------------------------------------

RUN = [
    ("25 mm/s  10 mm/mV", [25.0], [10.0]),
    ("25mm/s 10mm/mV 0.05-150 Hz", [25.0], [10.0]),
    ("Speed: 50 mm/sec  Gain: 20 mm/mV", [50.0], [20.0]),
    ("12.5 mm/s", [12.5], []),
    ("12,5mm/s 5mm/mV", [12.5], [5.0]),
    ("Limb: 10mm/mV  Chest: 5mm/mV", [], [10.0, 5.0]),
    ("l0mm/mV", [], [10.0]),  # the letter l for a one
    ("lOmm/mV", [], [10.0]),  # and the letter O for a nought
    ("I0 mm/mV 25 mm7s", [25.0], [10.0]),  # 7 for a slash
    ("25 MM/S 10 MM/MV", [25.0], [10.0]),
    ("100 mm/s", [100.0], []),
    ("25 mmm/sec 5.0 mm/mV", [25.0], [5.0]),  # three m from blurred print
    ("10 mm/mV", [], [10.0]),  # is no speed, though it begins like one
    ("250 mm/s", [], []),  # not a usual speed: nothing is cut out of it
    ("0.05-150 Hz  60 Hz", [], []),
    ("25.03.2019  10:25", [], []),
    ("QRS 125 ms  QT 410 ms", [], []),
    ("Invented patient 0417, 58 years", [], []),
]


def line(text: str, top_mm: float = 5.0) -> Word:
    return Word(Box(0.0, top_mm, 60.0, top_mm + 3.0), text, 0.95, {})


@pytest.mark.parametrize(("text", "speeds", "gains"), RUN)
def test_run_is_understood_as_it_is_read(text, speeds, gains):
    printing = Printing((), (line(text),), ())
    assert printed_speeds(printing) == speeds
    assert printed_gains(printing) == gains


def test_lines_speak_from_top_to_bottom_and_repeat_nothing():
    lines = (line("5 mm/mV", 190.0), line("10 mm/mV 25 mm/s", 3.0), line("25 mm/s", 195.0))
    printing = Printing((), lines, ())
    assert printed_gains(printing) == [10.0, 5.0]
    assert printed_speeds(printing) == [25.0]


# ---- the printing of a drawn page ---------------------------------------------------------------


def overlap(a: Box, b: Box) -> bool:
    """Whether two boxes share any paper."""
    across = min(a.right_mm, b.right_mm) - max(a.left_mm, b.left_mm)
    down = min(a.bottom_mm, b.bottom_mm) - max(a.top_mm, b.top_mm)
    return across > 0 and down > 0


@pytest.mark.parametrize("font", ["sans", "serif bold", "mono", "stroke"])
def test_lead_names_are_found_where_they_stand_and_likeliest_as_what_they_are(font):
    spec = replace(CHART, letters=replace(CHART.letters, font=font, label_mm=3.0))
    found = read_words(spec).words
    labels = [w for w in perfect_sheet(spec).composition.words if w.height_mm == 3.0]
    assert len(labels) == 13
    right = 0
    for label in labels:
        spot = Box(label.x_mm, label.y_mm - 3.0, label.x_mm + 3.0, label.y_mm)
        words = [word for word in found if overlap(word.box, spot) and word.names]
        assert words, f"{label.text} was not found"
        # read once more without an upright stroke that may be a tick
        wide = [word.box.right_mm - word.box.left_mm for word in words]
        names = words[int(np.argmax(wide))].names
        right += max(names, key=lambda name: names[name]) == label.text
    # A short upright stroke may be read as another: of I, II, III, one each may be missed.
    assert right >= 10


def test_the_footer_is_read_as_one_line():
    printing = read_words(CHART)
    assert printed_speeds(printing) == [25.0]
    assert printed_gains(printing) == [10.0]
    (run,) = [w for w in printing.lines if "mV" in w.text]
    (footer,) = [w for w in perfect_sheet(CHART).composition.words if "mV" in w.text]
    assert run.box.left_mm == pytest.approx(footer.x_mm, abs=0.5)
    assert run.box.bottom_mm == pytest.approx(footer.y_mm, abs=1.0)  # m/s reaches below the line


def test_letters_of_a_page_are_no_part_of_its_traces():
    printing, sheet = read_words(CHART), perfect_sheet(CHART)
    for panel in sheet.composition.panels:
        at = np.interp([0.2, 0.5, 0.8], [0, 1], [panel.x_mm[0], panel.x_mm[-1]])
        for x_mm, y_mm in zip(at, np.interp(at, panel.x_mm, panel.y_mm), strict=True):
            spot = Box(x_mm, y_mm, x_mm + 0.1, y_mm + 0.1)
            assert not any(overlap(letter, spot) for letter in printing.letters)


def test_pieces_of_a_trace_that_lost_its_tall_complexes_are_no_letters():
    sheet, printing = perfect_sheet(CHART), read_words(CHART)
    trace = max(sheet.composition.panels, key=lambda panel: float(panel.x_mm[-1]))
    left_mm, y_mm = float(trace.x_mm[20]), float(trace.y_mm[20])
    piece = Box(left_mm, y_mm - 1, left_mm + 4, y_mm + 1)
    found = apart_from_traces(replace(printing, letters=(*printing.letters, piece)), sheet.ink)
    assert found.letters == printing.letters


def test_print_whose_letters_blur_has_joined_is_read_as_one_line():
    drawn = np.zeros((300, 900), np.uint8)
    cv2.putText(drawn, "25mm/s 10mm/mV", (60, 100), cv2.FONT_HERSHEY_SIMPLEX, 1.2, 1, 2)
    density = cv2.dilate(drawn, np.ones((1, 5), np.uint8)).astype(np.float32)
    density = cv2.GaussianBlur(density, (0, 0), 0.7)
    ink = Ink(density, density > 2, Raster(0.05, 0.05, 10.0), 0.01, (0, 0, 90, 30), (10.0, 10.0))
    printing = read_printing(ink)
    assert len(printing.letters) <= 1
    (line,) = printing.lines
    assert line.box.left_mm == pytest.approx(6, abs=1)
    assert line.box.right_mm == pytest.approx(37, abs=3)
    assert printed_speeds(Printing((), (line,), ())) == [25.0]

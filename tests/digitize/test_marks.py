"""Calibration marks: size and place of pulses drawn at known size and place."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.marks import Mark, find_marks, mark_box
from tests.digitize.drawn_ink import CHART, STRIP, perfect_sheet
from tests.drawn.heart import HeartSpec
from tests.drawn.pen import draw_stroke

ROOM = replace(STRIP.paper, size_mm=(140.0, 90.0))


def strip(**layout):
    """One lead with a mark that is told."""
    changed = replace(STRIP.layout, **{"left_mm": 30.0, "top_mm": 55.0, **layout})
    return replace(STRIP, paper=ROOM, layout=changed)


@pytest.mark.parametrize("side", ["left", "right"])
@pytest.mark.parametrize("gain_mm_mv", [5.0, 10.0, 20.0])
@pytest.mark.parametrize("speed_mm_s", [25.0, 50.0])
def test_size_and_place_of_a_mark(speed_mm_s, gain_mm_mv, side):
    spec = strip(speed_mm_s=speed_mm_s, gain_mm_mv=gain_mm_mv, mark=side, panel_s=1.2)
    sheet = perfect_sheet(spec)
    ((left, top, right, bottom),) = sheet.composition.marks
    (mark,) = find_marks(sheet.ink)
    # 1 mV for 200 ms (common practice); a twentieth of a millimetre is 5 µV.
    assert mark.height_mm == pytest.approx(gain_mm_mv, abs=0.05)
    assert mark.width_mm == pytest.approx(0.2 * speed_mm_s, abs=0.1)
    assert (mark.top_mm, mark.foot_mm) == pytest.approx((top, bottom), abs=0.05)
    tail_mm = spec.layout.mark_tail_mm
    assert (mark.left_mm, mark.right_mm) == pytest.approx(
        (left + tail_mm, right - tail_mm), abs=0.1
    )


def test_every_row_has_its_own_and_no_qrs_is_one():
    marks = find_marks(perfect_sheet(CHART).ink)
    assert [mark.foot_mm for mark in marks] == pytest.approx([24.0, 50.0, 76.0, 102.0], abs=0.05)


@pytest.mark.parametrize("conduction", ["normal", "lbbb", "rbbb"])
def test_no_mark_where_none_is_drawn(conduction):
    spec = replace(CHART, layout=replace(CHART.layout, mark="none"))
    assert find_marks(perfect_sheet(spec, HeartSpec(conduction, variation=0.0)).ink) == ()


def test_two_gains_on_a_row_are_two_heights():
    layout = replace(CHART.layout, mark="both", chest_gain_mm_mv=5.0)
    marks = find_marks(perfect_sheet(replace(CHART, layout=layout)).ink)
    heights = sorted((mark.left_mm > 150, round(mark.height_mm, 1)) for mark in marks)
    # The strip of II has limb gain at both ends.
    assert heights == [(False, 10.0)] * 4 + [(True, 5.0)] * 3 + [(True, 10.0)]


@pytest.mark.parametrize(
    "points",
    [
        [(40, 30), (40, 20), (47, 20), (47, 30)],  # 7 mm: no usual speed
        [(40, 30), (40, 16), (45, 16), (45, 30)],  # 14 mm: no usual gain
        [(40, 30), (40, 20), (45, 25), (45, 30)],  # its top is not level
    ],
    ids=["wide", "high", "slanted"],
)
def test_other_shapes_are_no_marks(points):
    ink = perfect_sheet(replace(STRIP, layout=replace(STRIP.layout, mark="none"))).ink
    density = np.zeros_like(ink.density)
    x_mm, y_mm = np.array(points, float).T
    draw_stroke(density, ink.raster, x_mm, y_mm, pen_mm=0.3)
    assert find_marks(replace(ink, density=density)) == ()


def test_box_of_a_mark_holds_its_strokes_and_tails():
    box = mark_box(Mark(12.0, 17.0, 14.0, 24.0), tail_mm=1.0)
    assert (box.left_mm, box.right_mm) == (11.0, 18.0)
    assert box.top_mm < 14.0
    assert box.bottom_mm > 24.0

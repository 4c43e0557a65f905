"""Traces followed again about a stamp, on drawn ink whose lines are known."""

from dataclasses import replace

import numpy as np

from digitize.layout import find_layout
from digitize.marks import find_marks
from digitize.retrace import retrace
from digitize.sheet import Box
from digitize.trace import trace_panels
from digitize.unseen import hide
from tests.digitize.drawn_ink import CHART, perfect_sheet, read_words, rows_of


def _page():
    """A drawn 3x4 page with a strip, its layout and its traces."""
    ink = perfect_sheet(CHART).ink
    layout = find_layout(ink, read_words(CHART), rows_of(CHART), find_marks(ink))
    return ink, layout, trace_panels(ink, layout)


def _stamped(ink, box):
    """The ink with a solid stamp over it."""
    stamped = replace(ink, density=ink.density.copy())
    rows = slice(*(round(ink.raster.row(y)) for y in (box.top_mm, box.bottom_mm)))
    cols = slice(*(round(ink.raster.col(x)) for x in (box.left_mm, box.right_mm)))
    stamped.density[rows, cols] = 1.0
    return stamped


def _within(box, by_mm):
    return Box(box.left_mm + by_mm, box.top_mm + by_mm, box.right_mm - by_mm, box.bottom_mm - by_mm)


def test_a_stamp_that_is_ignored_leaves_a_gap_and_the_line_beside_it():
    ink, layout, clean = _page()
    place = layout.panels[5]
    middle_mm = (place.box.left_mm + place.box.right_mm) / 2
    stamp = Box(middle_mm - 4, place.baseline_mm - 4, middle_mm + 4, place.baseline_mm + 4)
    stamped = _stamped(ink, _within(stamp, 0.5))
    misled = trace_panels(stamped, layout)
    again = retrace(hide(stamped, stamp), layout, misled, stamp)[5]
    inside = (again.x_mm > stamp.left_mm + 0.1) & (again.x_mm < stamp.right_mm - 0.1)
    beside = ~inside & (np.abs(again.x_mm - middle_mm) < 8)
    assert np.isnan(again.y_mm[inside]).all()
    assert np.isfinite(misled[5].y_mm[inside]).any()
    apart_mm = np.abs(again.y_mm - clean[5].y_mm)[beside]
    assert np.isfinite(apart_mm).mean() > 0.95
    # 0.05 mm are 5 uV at 10 mm/mV, less than a sample's own standard error
    assert np.nanquantile(apart_mm, 0.9) < 0.05
    assert any("ignored" in note for note in again.notes)


def test_lines_in_other_rows_and_far_away_stay_as_they_were():
    ink, layout, clean = _page()
    place = layout.panels[0]
    left_mm = place.box.left_mm + 10
    stamp = Box(left_mm, place.baseline_mm - 2, left_mm + 4, place.baseline_mm + 2)
    again = retrace(hide(ink, stamp), layout, clean, stamp)
    for k, (new, old) in enumerate(zip(again, clean, strict=True)):
        if layout.panels[k].row != place.row or layout.panels[k].column > 1:
            assert new is old
    far = clean[0].x_mm > stamp.right_mm + 6
    np.testing.assert_array_equal(again[0].y_mm[far], clean[0].y_mm[far])
    assert len(again[0].y_mm) == len(clean[0].y_mm)

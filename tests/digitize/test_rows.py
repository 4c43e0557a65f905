"""Rows of trace: where they run and how far, on sheets of perfect ink."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.ink import Ink
from digitize.rows import find_rows
from tests.digitize.drawn_ink import CHART, perfect_sheet, rows_of
from tests.drawn.heart import HeartSpec
from tests.drawn.pen import draw_stroke
from tests.drawn.spec import LayoutSpec

TALL = (290.0, 230.0)
PAGES = {
    "3x4+1": CHART,
    "3x4+3": replace(
        CHART,
        paper=replace(CHART.paper, size_mm=TALL),
        layout=replace(CHART.layout, strips=("V1", "II", "V5"), pitch_mm=30.0),
    ),
    "6x2": replace(
        CHART,
        paper=replace(CHART.paper, size_mm=TALL),
        layout=LayoutSpec(
            rows=6, columns=2, strips=(), panel_s=5.0, top_mm=25.0, pitch_mm=30.0, gap_mm=5.0
        ),
    ),
    "12x1": replace(
        CHART,
        paper=replace(CHART.paper, size_mm=TALL),
        layout=LayoutSpec(
            rows=12, columns=1, strips=(), panel_s=9.0, top_mm=20.0, pitch_mm=16.0, mark="none"
        ),
    ),
}


@pytest.mark.parametrize("page", PAGES)
def test_each_row_is_found_at_its_zero_line(page):
    truth = perfect_sheet(PAGES[page]).composition.panels
    expected = sorted({panel.baseline_mm for panel in truth})
    rows = rows_of(PAGES[page])
    # A trace spends its time at 0 mV; ST and T draw the usual height aside by less than 0.1 mV.
    np.testing.assert_allclose([row.y_mm for row in rows.rows], expected, atol=1.0)
    assert rows.pitch_mm == pytest.approx(PAGES[page].layout.pitch_mm, abs=0.5)


@pytest.mark.parametrize("page", PAGES)
def test_each_row_reaches_from_its_first_to_its_last_ink(page):
    sheet, rows = perfect_sheet(PAGES[page]), rows_of(PAGES[page])
    for row, found in enumerate(rows.rows):
        panels = [p for p in sheet.composition.panels if p.row == row]
        left = min([p.x_mm[0] for p in panels] + [mark[0] for mark in sheet.composition.marks])
        right = max(p.x_mm[-1] for p in panels)
        # A row begins with the first whole millimetre that is inked for 0.7 mm of it.
        assert found.left_mm == pytest.approx(left, abs=0.75)
        assert found.right_mm == pytest.approx(right, abs=0.75)


def test_tall_complexes_that_cross_into_the_next_row_make_no_row_of_their_own():
    crowded = replace(CHART, layout=replace(CHART.layout, pitch_mm=18.0, top_mm=30.0))
    rows = rows_of(crowded, HeartSpec(size=2.0, variation=0.0))
    np.testing.assert_allclose([r.y_mm for r in rows.rows], [30, 48, 66, 84], atol=1.5)


def ink_with(strokes: list[tuple[list[float], list[float], float]]) -> Ink:
    """The ink of the chart with lines drawn over it."""
    ink = perfect_sheet(CHART).ink
    density = ink.density.copy()
    for x_mm, y_mm, width_mm in strokes:
        draw_stroke(density, ink.raster, np.array(x_mm), np.array(y_mm), pen_mm=width_mm)
    return replace(ink, density=density)


def test_frame_and_separators_are_no_trace():
    frame = [
        ([5.0, 275.0, 275.0, 5.0, 5.0], [10.0, 10.0, 112.0, 112.0, 10.0], 0.3),
        ([145.0, 145.0], [10.0, 112.0], 0.3),
    ]
    rows = find_rows(ink_with(frame), ())
    np.testing.assert_allclose([r.y_mm for r in rows.rows], [24, 50, 76, 102], atol=1.0)
    # Both sides of the frame and the separator, and nothing that a QRS might be.
    middles = sorted((box.left_mm + box.right_mm) / 2 for box in rows.uprights)
    np.testing.assert_allclose(middles, [5, 145, 275], atol=0.5)


def test_a_broad_dark_band_is_no_row():
    rows = find_rows(ink_with([([12.0, 270.0], [120.0, 120.0], 4.0)]), ())
    assert len(rows.rows) == 4


def test_bare_paper_has_no_row():
    ink = perfect_sheet(CHART).ink
    rows = find_rows(replace(ink, density=np.zeros_like(ink.density)), ())
    assert rows.rows == ()


def test_what_is_hidden_does_not_count():
    ink = perfect_sheet(CHART).ink
    hidden = ink.hidden.copy()
    hidden[: round(ink.raster.row(37.0))] = True  # a card over the first row
    rows = find_rows(replace(ink, hidden=hidden), ())
    np.testing.assert_allclose([r.y_mm for r in rows.rows], [50, 76, 102], atol=1.0)

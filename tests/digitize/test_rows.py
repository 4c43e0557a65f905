"""Rows of trace: where they run and how far, on sheets of perfect ink."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.ink import Ink
from digitize.rows import MARKED_ROW, Runs, find_rows, row_choices, row_extent
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
        # Columns are looked at every quarter of a millimetre, and the pen is 0.3 mm wide.
        assert found.left_mm == pytest.approx(left, abs=0.41)
        assert found.right_mm == pytest.approx(right, abs=0.41)


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


def test_a_trace_broken_everywhere_is_followed_to_its_ends():
    sheet = perfect_sheet(CHART)
    rng = np.random.default_rng(5)
    kept = np.repeat(rng.random(sheet.ink.density.shape[1] // 12 + 1) < 0.7, 12)  # 1.5 mm pieces
    broken = replace(sheet.ink, density=sheet.ink.density * kept[: sheet.ink.density.shape[1]])
    whole = rows_of(CHART)
    found = find_rows(broken, ())
    assert len(found.rows) == len(whole.rows)
    for row, other in zip(found.rows, whole.rows, strict=True):
        assert row.right_mm == pytest.approx(other.right_mm, abs=4.5)  # three pieces in a line


def test_halftone_specks_are_no_rows():
    ink = perfect_sheet(CHART).ink
    rng = np.random.default_rng(6)
    density = ink.density.copy()
    rows, cols = (rng.integers(2, n - 2, 9000) for n in density.shape)
    for dy in (-1, 0, 1):
        for dx in (-1, 0, 1):
            density[rows + dy, cols + dx] = 1.0
    found = find_rows(replace(ink, density=density), ())
    expected = [row.y_mm for row in rows_of(CHART).rows]
    np.testing.assert_allclose([row.y_mm for row in found.rows], expected, atol=1.0)


def test_a_faint_row_between_others_is_not_lost():
    ink = perfect_sheet(CHART).ink
    density = ink.density.copy()
    third = rows_of(CHART).rows[2].y_mm
    band = slice(int(ink.raster.row(third - 12)), int(ink.raster.row(third + 12)))
    left, right = int(ink.raster.col(100.0)), int(ink.raster.col(250.0))
    density[band, left:right] = 0
    found = find_rows(replace(ink, density=density), ())
    assert len(found.rows) == 4
    assert found.rows[2].y_mm == pytest.approx(third, abs=1.0)


def test_the_shaded_edge_of_a_sheet_on_a_desk_is_no_row():
    ink = perfect_sheet(CHART).ink
    left, top, right, bottom = ink.ruled_mm
    ruled = (left + 3, top + 6, right - 3, bottom - 12)
    density = ink.density.copy()
    line = int(ink.raster.row(bottom - 5))
    density[line : line + 8] = 0.9  # a millimetre of shade along the whole edge
    found = find_rows(replace(ink, density=density, ruled_mm=ruled), ())
    assert len(found.rows) == 4


def test_a_short_piece_at_the_very_edge_of_the_picture_is_no_start_of_a_row():
    x_mm = np.concatenate([np.arange(2.25, 4.0, 0.25), np.arange(22.25, 142.5, 0.25)])
    runs = Runs(x_mm, np.full(len(x_mm), 49.8), np.full(len(x_mm), 50.2))
    row = row_extent(runs, 50.0, 25.0)
    assert row is not None
    assert (row.left_mm, row.right_mm) == pytest.approx((22.25, 142.25))


def test_a_row_whose_line_fades_everywhere_reaches_over_its_gaps():
    x_mm = np.arange(0, 100, 0.25)
    x_mm = x_mm[x_mm % 5 < 1.25]
    runs = Runs(x_mm, np.full(len(x_mm), 19.9), np.full(len(x_mm), 20.1))
    row = row_extent(runs, 20.0, 30.0)
    assert (row.left_mm, row.right_mm) == pytest.approx((0.0, 96.0), abs=0.3)
    few = x_mm < 20  # three gaps are gaps between leads, not a line that fades
    assert (
        row_extent(Runs(*(a[few] for a in (runs.x_mm, runs.top_mm, runs.bottom_mm))), 20.0, 30.0)
        is None
    )


def test_a_row_that_begins_with_a_calibration_mark_is_hardly_left_out():
    rows = rows_of(CHART)
    count = len(rows.rows)
    plain = {
        (first, len(part.rows)): cost for first, part, cost in row_choices(rows, [False] * count)
    }
    marked = {
        (first, len(part.rows)): cost for first, part, cost in row_choices(rows, [True] * count)
    }
    assert plain[0, count] == marked[0, count] == 0
    assert marked[1, count - 1] == plain[1, count - 1] + MARKED_ROW

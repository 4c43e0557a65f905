"""Columns: where drawn panels begin and end, with every sort of separator."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from digitize.columns import (
    Breaks,
    Span,
    column_spans,
    marks_of_row,
    row_breaks,
    trace_extent,
    without_marks,
)
from digitize.marks import Mark, find_marks
from digitize.rows import Row, Rows, Runs
from tests.digitize.drawn_ink import CHART, perfect_sheet, rows_of
from tests.drawn.spec import PageSpec

STEP_MM = 0.25  # columns of ink are looked at this far apart


def chart(**layout) -> PageSpec:
    return replace(CHART, layout=replace(CHART.layout, **layout))


def bare_rows(spec: PageSpec) -> Rows:
    """The rows of a page with their marks taken off."""
    rows, sheet = rows_of(spec), perfect_sheet(spec)
    marks = find_marks(sheet.ink)
    return without_marks(
        rows, [m for row in rows.rows for m in marks_of_row(row, marks, rows.pitch_mm)]
    )


@pytest.mark.parametrize("mark", ["left", "right", "both"])
def test_marks_and_their_tails_are_taken_off_the_rows(mark):
    spec = chart(mark=mark, panel_s=2.4)
    panels = perfect_sheet(spec).composition.panels
    left, right = panels[0].x_mm[0], panels[-1].x_mm[-1]
    extent = trace_extent(bare_rows(spec))
    assert extent.left_mm == pytest.approx(left, abs=2 * STEP_MM)
    assert extent.right_mm == pytest.approx(right, abs=2 * STEP_MM)


@pytest.mark.parametrize(
    "layout",
    [
        {"separator": "none"},
        {"separator": "notch"},
        {"separator": "ticks"},
        {"gap_mm": 4.0, "panel_s": 2.3},
    ],
    ids=["nothing", "notch", "ticks", "gap"],
)
def test_columns_are_divided_where_the_leads_change(layout):
    spec = chart(**layout)
    rows = bare_rows(spec)
    breaks = row_breaks(rows).of(0, 3)  # the strip does not break
    spans, shared = column_spans(breaks, trace_extent(rows), 4)
    panels = [p for p in perfect_sheet(spec).composition.panels if p.row == 0]
    for span, panel in zip(spans, panels, strict=True):
        # Half a millimetre is 20 ms: less than the break between two leads may be wide.
        assert span.left_mm == pytest.approx(panel.x_mm[0], abs=0.5)
        assert span.right_mm == pytest.approx(panel.x_mm[-1], abs=0.5)
    # Leads that meet at 0 mV run on without a break: the even division alone speaks then.
    assert (shared == pytest.approx(1.0)) == ("gap_mm" in layout)


def test_breaks_speak_for_the_right_number_of_columns():
    rows = bare_rows(chart(gap_mm=3.0, panel_s=2.3))
    breaks, extent = row_breaks(rows).of(0, 3), trace_extent(rows)
    shares = {count: column_spans(breaks, extent, count)[1] for count in (2, 3, 4, 5)}
    assert max(shares, key=lambda count: shares[count]) in (2, 4)  # every second edge of 4 is one
    assert shares[4] == pytest.approx(1.0)
    assert max(shares[3], shares[5]) < 0.5


def breaks_at(places_mm: list[float], bare_mm: tuple[float, float] | None = None) -> Breaks:
    """Three rows of 250 mm that all break at some places, and have no ink in between two."""
    x = np.arange(0.0, 250.0, STEP_MM)
    broken, inked = np.zeros((3, len(x)), bool), np.ones((3, len(x)), bool)
    broken[:, np.searchsorted(x, places_mm)] = True
    if bare_mm is not None:
        inked[:, (x >= bare_mm[0]) & (x < bare_mm[1])] = False
        broken[:, np.searchsorted(x, bare_mm)] = True
    return Breaks(x, broken, inked)


def test_complexes_of_simultaneous_leads_are_no_edges():
    """Their steep flanks break all rows at one place, here one that repeats with the columns."""
    spans, shared = column_spans(breaks_at([59.0, 121.5, 184.0]), Span(0.0, 250.0), 4)
    assert [span.left_mm for span in spans] == pytest.approx([0.0, 62.5, 125.0, 187.5], abs=0.3)
    assert shared == 0.0


def test_a_calibration_mark_within_the_rows_is_no_part_of_a_column():
    wide = (250.0 - 12.0) / 4
    edges = [wide, 2 * wide + 6, 3 * wide + 12]
    breaks = breaks_at([edges[0], edges[2]], (2 * wide, 2 * wide + 12))
    spans, shared = column_spans(breaks, Span(0.0, 250.0), 4)
    assert shared == pytest.approx(1.0)
    middles = [(a.right_mm + b.left_mm) / 2 for a, b in pairwise(spans)]
    assert middles == pytest.approx(edges, abs=0.5)


def test_one_column_is_the_whole_extent():
    rows = bare_rows(chart())
    assert column_spans(row_breaks(rows), Span(3.0, 250.0), 1) == ((Span(3.0, 250.0),), 0.0)


def test_edges_that_no_break_shows_stand_evenly():
    # One unbroken trace: the division is a guess, and the evidence says so.
    x_mm = np.arange(10.0, 110.1, STEP_MM)
    runs = type(rows_of(CHART).runs)(x_mm, np.full_like(x_mm, 20.0), np.full_like(x_mm, 20.4))
    rows = Rows((Row(20.2, 10.0, 110.0),), 40.0, runs, ())
    spans, shared = column_spans(row_breaks(rows), Span(10.0, 110.0), 4)
    assert shared == 0.0
    np.testing.assert_allclose([s.left_mm for s in spans], [10, 35, 60, 85], atol=1e-6)
    np.testing.assert_allclose([s.right_mm for s in spans], [35, 60, 85, 110], atol=1e-6)


def test_a_mark_belongs_to_the_row_on_which_its_foot_stands():
    marks = (Mark(5.0, 10.0, 14.0, 24.0), Mark(5.0, 10.0, 40.5, 50.5), Mark(5.0, 10.0, 31.0, 41.0))
    assert marks_of_row(Row(24.1, 0.0, 100.0), marks, 26.0) == [marks[0]]
    assert marks_of_row(Row(50.0, 0.0, 100.0), marks, 26.0) == [marks[1]]


def test_gaps_of_a_line_that_fades_everywhere_are_no_edges():
    x_mm = np.arange(0, 100, 0.25)
    x_mm = x_mm[x_mm % 5 < 1.25]
    runs = Runs(x_mm, np.full(len(x_mm), 19.9), np.full(len(x_mm), 20.1))
    breaks = row_breaks(Rows((Row(20.0, 0.0, 96.0),), 30.0, runs, ()))
    assert breaks.inked.all()
    assert not breaks.broken.any()

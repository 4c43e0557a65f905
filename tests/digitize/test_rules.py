"""Straight lines and calibration marks taken off, so that names which touch them can be read."""

from dataclasses import replace

import cv2
import numpy as np

from digitize.ink import solid_ink
from digitize.marks import find_marks
from digitize.rules import lettering, straight_rules
from digitize.words import read_printing
from tests.digitize.drawn_ink import CHART, perfect_sheet
from tests.drawn.spec import PageSpec

# Names left of the traces stand inside the marks of the third column.
MARKED = replace(
    CHART,
    paper=replace(CHART.paper, size_mm=(310.0, 140.0)),
    letters=replace(CHART.letters, label_place="left"),
    layout=replace(CHART.layout, mark="middle", gap_mm=11.0, panel_s=2.3),
)


def names(spec: PageSpec, *, taken_off: bool) -> set[str]:
    """Texts of short words on a page as drawn, or without its marks."""
    ink = perfect_sheet(spec).ink
    if taken_off:
        ink = lettering(ink, find_marks(ink))
    return {word.text for word in read_printing(ink).words}


def test_names_inside_calibration_marks_are_read():
    hidden = {"V1", "V2", "V3"} - names(MARKED, taken_off=False)
    assert hidden, "the page does not show what this test is about"
    assert len(names(MARKED, taken_off=True) & hidden) > len(hidden) / 2


def test_strokes_of_marks_are_gone_and_traces_stay():
    ink = perfect_sheet(CHART).ink
    marks = find_marks(ink)
    assert len(marks) == 4
    left = lettering(ink, marks)
    for mark in marks:
        rows = slice(int(ink.raster.row(mark.top_mm + 1)), int(ink.raster.row(mark.foot_mm - 1)))
        cols = slice(int(ink.raster.col(mark.left_mm - 1)), int(ink.raster.col(mark.right_mm + 1)))
        assert ink.density[rows, cols].sum() > 100
        assert left.density[rows, cols].sum() < 1
    beyond = int(ink.raster.col(max(mark.right_mm for mark in marks) + 2))
    assert np.array_equal(ink.density[:, beyond:], left.density[:, beyond:])


def test_separators_through_all_rows_are_rules_and_a_qrs_is_none():
    lined = replace(CHART, layout=replace(CHART.layout, separator="line"))
    ink = perfect_sheet(lined).ink
    rules, uprights = straight_rules(solid_ink(ink), ink)
    assert len(uprights) == 3  # between four columns
    assert rules.any()
    ink = perfect_sheet(CHART).ink
    rules, uprights = straight_rules(solid_ink(ink), ink)
    assert uprights == ()
    assert not rules.any()


def test_rules_are_an_opening_of_the_mask():
    """Held against the library's own opening, with a frame on the page and without one."""
    ink = perfect_sheet(CHART).ink
    plain = solid_ink(ink)
    framed = plain.copy()
    framed[40:44, 100:900], framed[40:800, 100:103] = 1, 1
    scale = ink.raster.px_per_mm
    kernels = [np.ones((round(28 * scale), 1)), np.ones((1, round(70 * scale)))]
    for mask, pieces in ((plain, 0), (framed, 1)):
        opened = [cv2.morphologyEx(mask, cv2.MORPH_OPEN, k.astype(np.uint8)) for k in kernels]
        wanted = cv2.dilate(np.maximum(*opened), np.ones((3, 3), np.uint8)) > 0
        rules, uprights = straight_rules(mask, ink)
        np.testing.assert_array_equal(rules, wanted)
        assert len(uprights) == pieces

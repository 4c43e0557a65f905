"""Pages without a grid: the scale by witnesses that agree, or none at all."""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from digitize.errors import NoGrid
from digitize.grid import Grid
from digitize.gridless import find_plain_scale
from digitize.options import Options
from digitize.pages import Page
from tests.digitize.drawn_ink import page_of
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.page import DrawnPage, draw_page
from tests.drawn.spec import CaptureSpec, LayoutSpec, PageSpec, PaperSpec

FAX = CaptureSpec(
    dpi=(204.0, 98.0), mode="bilevel", noise=2.0, threshold=170.0, tilt_deg=-1.2, dropped_lines=6
)
SCAN = replace(FAX, dpi=(200.0, 200.0), tilt_deg=0.8, dropped_lines=0)
SHEET = PaperSpec(grid="none")  # A4
CUT = PaperSpec(grid="none", size_mm=(287.0, 187.0))  # no usual sheet


@cache
def drawn(capture: CaptureSpec, paper: PaperSpec = SHEET, mark: str = "left") -> DrawnPage:
    """A model ECG, its panels shorter than 2.5 s so that ten seconds are no witness."""
    layout = LayoutSpec(mark=mark, panel_s=2.3)
    return draw_page(
        record_model(HeartSpec(seed=2)), PageSpec(paper=paper, layout=layout, capture=capture)
    )


def off_by(grid: Grid, page: DrawnPage) -> tuple[float, float]:
    """Largest relative error of the scale, and error of the tilt in degrees."""
    true = page.truth.page_map
    x_mm, y_mm = np.array([100.0, 200.0, 100.0]), np.array([80.0, 80.0, 120.0])
    x, y = grid.page_map.to_mm(*true.to_px(x_mm, y_mm))
    if page.spec.capture.turn_deg % 180:  # the page is read as it lies
        x, y = (y, -x) if page.spec.capture.turn_deg == 90 else (-y, x)
    across, down = np.hypot(x[1] - x[0], y[1] - y[0]) / 100, np.hypot(x[2] - x[0], y[2] - y[0]) / 40
    tilt_deg = float(np.rad2deg(np.arctan2(y[1] - y[0], x[1] - x[0])))
    return float(max(abs(across - 1), abs(down - 1))), tilt_deg


@pytest.mark.parametrize(
    "capture",
    [FAX, replace(FAX, dpi=(204.0, 196.0), turn_deg=90), replace(SCAN, turn_deg=270)],
    ids=["fax", "fine fax turned", "scan turned"],
)
def test_a_whole_sheet_and_its_marks_give_the_scale_without_a_tag(capture) -> None:
    page = drawn(capture)
    grid = find_plain_scale(page_of(page))
    scale_error, tilt_deg = off_by(grid, page)
    assert grid.source == "found"
    assert "A4" in grid.method
    assert "calibration marks fit" in grid.method
    # T.4 has 8.04 and 3.85 per mm, fax tags say 204 and 98 per inch: 0.2 % apart.
    assert scale_error < 0.004
    assert scale_error < grid.scale_se
    # A quarter of a degree drifts by 0.3 mm over a panel of 62 mm: a pen's width.
    assert abs(tilt_deg) < 0.25


def test_a_wrong_tag_is_outvoted() -> None:
    page = drawn(FAX)
    grid = find_plain_scale(page_of(page, dpi=(300.0, 300.0)))
    assert off_by(grid, page)[0] < 0.004


def test_equal_marks_are_enough_on_a_cut_page() -> None:
    page = drawn(SCAN, CUT)
    grid = find_plain_scale(page_of(page))
    assert "calibration marks, taken as 25 mm/s and 10 mm/mV" in grid.method
    assert off_by(grid, page)[0] < grid.scale_se <= 0.02


def test_a_tag_alone_is_not_believed_and_advice_is_given() -> None:
    page = drawn(SCAN, CUT, "none")
    with pytest.raises(NoGrid, match=r"the file says 200 x 200 dpi.*--px-per-mm.*--speed"):
        find_plain_scale(page_of(page, dpi=(200.0, 200.0)))


def test_nothing_is_not_believed_either() -> None:
    with pytest.raises(NoGrid, match="nothing else tells the scale"):
        find_plain_scale(page_of(drawn(SCAN, CUT, "none")))


def test_the_size_of_a_grey_page_needs_a_witness() -> None:
    # Of a page with shades a faint grid may only have been missed.
    grey = replace(SCAN, mode="grey")
    with pytest.raises(NoGrid):
        find_plain_scale(page_of(drawn(grey, mark="none"), dpi=(200.0, 200.0)))
    assert "marks fit" in find_plain_scale(page_of(drawn(grey), dpi=(200.0, 200.0))).method


def test_a_given_scale_goes_before_all_and_the_tilt_is_still_found() -> None:
    page = drawn(SCAN, CUT, "none")
    grid = find_plain_scale(page_of(page), Options(px_per_mm=(7.874, 7.874)))
    assert grid.source == "given"
    scale_error, tilt_deg = off_by(grid, page)
    assert scale_error < 1e-3
    assert abs(tilt_deg) < 0.25


def test_an_empty_page_is_refused() -> None:
    page = page_of(drawn(SCAN, CUT, "none"))
    with pytest.raises(NoGrid):
        find_plain_scale(Page(np.full_like(page.pixels, 255), page.source, bilevel=True))

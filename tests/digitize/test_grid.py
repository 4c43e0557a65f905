"""The millimetre map of drawn pages against the map they were drawn through."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.errors import NoGrid
from digitize.grid import Grid, _flat_part, find_grid
from digitize.options import Options
from digitize.pages import Page
from digitize.tracing import PageSource
from tests.digitize.drawn_ink import STRIP, drawn_strip, page_of
from tests.drawn.page import DrawnPage
from tests.drawn.spec import PhotoSpec

SCAN = STRIP.capture
MM_PER_INCH = 25.4


def nodes(drawn: DrawnPage) -> tuple[np.ndarray, np.ndarray]:
    """Crossings of the 5 mm lines, 5 mm and more from the edge of the sheet, in mm."""
    left, top, right, bottom = drawn.truth.page_map.extent_mm
    x = np.arange(np.ceil(left / 5 + 1) * 5, right - 4.9, 5.0)
    y = np.arange(np.ceil(top / 5 + 1) * 5, bottom - 4.9, 5.0)
    x, y = np.meshgrid(x, y)
    return x.ravel(), y.ravel()


def off_lines_mm(grid: Grid, drawn: DrawnPage) -> np.ndarray:
    """How far from whole millimetres the map puts each crossing of the drawn grid, (2, n)."""
    found = np.stack(grid.page_map.to_mm(*drawn.truth.page_map.to_px(*nodes(drawn))))
    return found - np.round(found)


def quarter_px_mm(drawn: DrawnPage) -> float:
    """A quarter of the coarser pixel: what the map has to reach, in mm."""
    return 0.25 * MM_PER_INCH / min(drawn.spec.capture.dpi)


@pytest.mark.parametrize(
    "capture",
    [
        SCAN,
        replace(SCAN, tilt_deg=4.5),
        replace(SCAN, tilt_deg=-2.0, turn_deg=90),
        replace(SCAN, turn_deg=180, tilt_deg=0.7),
        replace(SCAN, dpi=(150.0, 150.0), mode="grey", noise=4.0),
        replace(SCAN, dpi=(204.0, 196.0), mode="bilevel", threshold=225.0),
    ],
    ids=["straight", "tilted", "turned", "upside down", "grey", "fax"],
)
def test_crossings_of_the_grid_lie_on_whole_millimetres(capture):
    drawn = drawn_strip(capture)
    grid = find_grid(page_of(drawn, dpi=capture.dpi))
    assert grid.source == "found"
    off = np.abs(off_lines_mm(grid, drawn))
    assert np.quantile(off, 0.95) < quarter_px_mm(drawn)
    # Neighbouring crossings are 5 mm apart: no line was skipped or counted twice.
    x_mm, y_mm = nodes(drawn)
    found = np.stack(grid.page_map.to_mm(*drawn.truth.page_map.to_px(x_mm, y_mm)))
    apart = np.hypot(*(found[:, 1:] - found[:, :-1]))
    along = np.diff(x_mm) == 5
    np.testing.assert_allclose(apart[along], 5.0, atol=2 * quarter_px_mm(drawn))


@pytest.mark.parametrize(
    "paper",
    [{"grid": "dots", "fine_mm": 0.3, "fine_amount": 1.0}, {"grid": "dotted"}, {"grid": "coarse"}],
    ids=["dots", "dotted", "5 mm alone"],
)
def test_every_sort_of_ruling_is_found(paper):
    drawn = drawn_strip(paper=replace(STRIP.paper, **paper))
    grid = find_grid(page_of(drawn, dpi=SCAN.dpi))
    assert np.quantile(np.abs(off_lines_mm(grid, drawn)), 0.95) < quarter_px_mm(drawn)
    assert grid.px_per_mm == pytest.approx((200 / 25.4, 200 / 25.4), rel=0.005)


def test_a_curled_photograph_is_flattened():
    camera = PhotoSpec(yaw_deg=4.0, pitch_deg=-5.0, curl_mm=1.5, margin=0.03)
    drawn = drawn_strip(replace(SCAN, photo=camera, noise=2.0))
    off = np.abs(off_lines_mm(find_grid(page_of(drawn)), drawn))
    # A quarter of the paper's smallest square would be seen by eye; a twentieth is 2 ms.
    assert np.quantile(off, 0.95) < 0.05


@pytest.mark.parametrize("dpi", [150.0, 200.0, 300.0])
def test_scale_follows_the_resolution_though_the_file_is_silent(dpi):
    drawn = drawn_strip(replace(SCAN, dpi=(dpi, dpi)))
    grid = find_grid(page_of(drawn))
    # A quarter of a pixel over a sheet of 110 mm is below 1 part in 2000 at 150 dpi.
    assert grid.px_per_mm == pytest.approx((dpi / MM_PER_INCH, dpi / MM_PER_INCH), rel=1e-3)


def test_the_file_may_be_wrong_about_its_resolution():
    drawn = drawn_strip(replace(SCAN, tilt_deg=1.0))
    grid = find_grid(page_of(drawn, dpi=(72.0, 72.0)))
    assert grid.px_per_mm[0] == pytest.approx(200 / MM_PER_INCH, rel=1e-3)


def test_ruled_part_is_told_from_the_bare_margin():
    frame = (10.0, 5.0, 90.0, 55.0)
    drawn = drawn_strip(paper=replace(STRIP.paper, frame_mm=frame))
    grid = find_grid(page_of(drawn, dpi=SCAN.dpi))
    left, top, right, bottom = grid.ruled_mm
    corners_px = grid.page_map.to_px(np.array([left, right]), np.array([top, bottom]))
    found = np.transpose(drawn.truth.page_map.to_mm(*corners_px))
    # Phase is read on cells of 16 pixels, blurred over about one more: 2 x 2 mm.
    np.testing.assert_allclose(found.ravel(), frame, atol=4.0)


def bare_page() -> Page:
    pixels = np.random.default_rng(4).integers(230, 256, (400, 640), dtype=np.uint8)
    return Page(pixels, PageSource("bare.png", "00" * 32, 1, 640, 400, None))


def test_without_a_grid_the_scale_is_asked_for():
    with pytest.raises(NoGrid, match="--px-per-mm"):
        find_grid(bare_page())


def test_a_given_scale_stands_in_for_the_grid_and_is_called_given():
    grid = find_grid(bare_page(), Options(px_per_mm=(8.04, 3.85)))
    assert grid.source == "given"
    assert grid.px_per_mm == pytest.approx((8.04, 3.85))
    x_mm, y_mm = grid.page_map.to_mm(np.array([80.4]), np.array([38.5]))
    np.testing.assert_allclose((x_mm, y_mm), 10.0, atol=1e-6)


def test_cells_whose_phase_slipped_are_left_out_of_a_flat_page():
    y_px, x_px = np.mgrid[:20, :30] * 16.0
    x_mm, y_mm = x_px / 8 + 0.01 * y_px, y_px / 4
    x_mm[:, 22:] += np.arange(1, 9)  # a millimetre lost from cell to cell
    seen = np.ones(x_px.shape, bool)
    flat = _flat_part(seen, (x_px, y_px), (x_mm, y_mm))
    assert flat[:, :22].all()
    assert not flat[:, 23:].any()
    bent = _flat_part(seen, (x_px, y_px), (x_mm + (x_px / 60) ** 2, y_mm))
    assert bent.all()  # no plane holds most of them: what they follow is told by the scatter

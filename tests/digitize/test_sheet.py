"""The flattened page: places keep their millimetres, whatever the scanner did."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from digitize.errors import PoorResolution
from digitize.grid import Grid, find_grid
from digitize.pagemap import PageMap
from digitize.pages import Page
from digitize.sheet import Raster, Sheet, flatten
from digitize.tracing import PageSource
from tests.digitize.drawn_ink import STRIP, drawn_strip, page_of

FRAME_MM = (5.0, 5.0, 55.0, 35.0)


def tilted_map(px_per_mm: float, tilt_deg: float) -> PageMap:
    """A paper tilted about its origin, which lies at pixel (90, 40)."""
    c, s = px_per_mm * np.cos(np.deg2rad(tilt_deg)), px_per_mm * np.sin(np.deg2rad(tilt_deg))
    h = np.array([[c, -s, 90.0], [s, c, 40.0], [0, 0, 1]])
    return PageMap(h, np.zeros((2, 5, 6)), (0.0, 0.0, 60.0, 40.0))


def grid_of(page_map: PageMap, px_per_mm: float) -> Grid:
    """A grid known exactly."""
    return Grid(page_map, "found", "made", (px_per_mm, px_per_mm), 0.0, 0.0, FRAME_MM)


def page_with_spot(page_map: PageMap, x_mm: float, y_mm: float, px_per_mm: float) -> Page:
    """White paper with one soft dark spot of 0.6 mm."""
    x_px, y_px = page_map.to_px(np.array([x_mm]), np.array([y_mm]))
    rows, cols = round(48 * px_per_mm), round(75 * px_per_mm)
    y, x = np.mgrid[:rows, :cols]
    spot = np.exp(-0.5 * ((x - x_px) ** 2 + (y - y_px) ** 2) / (0.6 * px_per_mm) ** 2)
    pixels = np.round(250 - 200 * spot).astype(np.uint8)
    return Page(pixels, PageSource("spot.png", "00" * 32, 1, cols, rows, None))


def spot_mm(sheet: Sheet) -> tuple[float, float]:
    """Where the darkness of a sheet gathers, in mm."""
    dark = np.maximum(245.0 - sheet.pixels, 0) * sheet.inside
    rows, cols = np.indices(dark.shape)
    return (
        float(sheet.raster.x_mm(np.sum(dark * cols) / dark.sum())),
        float(sheet.raster.y_mm(np.sum(dark * rows) / dark.sum())),
    )


@pytest.mark.parametrize("tilt_deg", [0.0, 3.0, -5.0])
@pytest.mark.parametrize("px_per_mm", [4.0, 7.87, 11.8, 23.6])
def test_a_spot_keeps_its_place_on_the_paper(px_per_mm, tilt_deg):
    page_map = tilted_map(px_per_mm, tilt_deg)
    page = page_with_spot(page_map, 31.25, 19.5, px_per_mm)
    sheet = flatten(page, grid_of(page_map, px_per_mm))
    # A tenth of the page's own pixel, and what the linear map between its nodes may leave.
    assert spot_mm(sheet) == pytest.approx((31.25, 19.5), abs=0.1 / px_per_mm + 0.005)


@pytest.mark.parametrize(("px_per_mm", "expected"), [(6.0, 8.0), (9.9, 8.0), (11.8, 10.0)])
def test_raster_is_finer_than_coarse_pages_and_no_finer_than_a_pen_needs(px_per_mm, expected):
    page_map = tilted_map(px_per_mm, 0.0)
    sheet = flatten(page_with_spot(page_map, 30, 20, px_per_mm), grid_of(page_map, px_per_mm))
    assert sheet.raster.px_per_mm == expected
    assert sheet.source_px_per_mm == (px_per_mm, px_per_mm)
    rows, cols = sheet.pixels.shape
    # No more than the page itself, in whole millimetres.
    assert (cols % expected, rows % expected) == (0, 0)
    assert cols / expected <= 61
    assert rows / expected <= 41


def test_outside_of_the_page_is_not_called_paper():
    page_map = tilted_map(8.0, 30.0)  # the raster's corners fall off the page
    sheet = flatten(page_with_spot(page_map, 30, 20, 8.0), grid_of(page_map, 8.0))
    x_px, y_px = page_map.to_px(
        *np.meshgrid(
            sheet.raster.x_mm(np.arange(sheet.pixels.shape[1])),
            sheet.raster.y_mm(np.arange(sheet.pixels.shape[0])),
        )
    )
    truly = (x_px > -0.5) & (x_px < 599.5) & (y_px > -0.5) & (y_px < 383.5)
    assert not truly.all()
    assert np.mean(sheet.inside != truly) < 1e-3


def test_grid_lines_of_a_tilted_scan_stand_upright_on_whole_millimetres():
    drawn = drawn_strip(replace(STRIP.capture, tilt_deg=4.0, mode="grey"), flat=True)
    page = page_of(drawn, dpi=(200.0, 200.0))
    sheet = flatten(page, find_grid(page))
    above_trace = slice(round(8 * 8.0), round(24 * 8.0))
    profile = 255.0 - sheet.pixels[above_trace].mean(axis=0)
    at_mm = sheet.raster.x_mm(np.arange(len(profile)))
    left, right = sheet.ruled_mm[0] + 8, sheet.ruled_mm[2] - 8
    for line_mm in np.arange(np.ceil(left), right):
        near = np.abs(at_mm - line_mm) < 0.45
        weight = profile[near] - profile[near].min()
        # A quarter of a pixel of the page.
        assert np.sum(weight * at_mm[near]) / weight.sum() == pytest.approx(line_mm, abs=0.03)


def test_too_coarse_a_page_is_refused_with_its_number():
    page_map = tilted_map(2.0, 0.0)
    page = page_with_spot(page_map, 30, 20, 2.0)
    with pytest.raises(PoorResolution, match=r"2\.0 pixels per millimetre.*150 dpi"):
        flatten(page, grid_of(page_map, 2.0))


@given(
    left=st.floats(-50, 50), top=st.floats(-50, 50), scale=st.floats(4, 24), at=st.floats(-99, 99)
)
def test_raster_places_and_pixels_are_each_other_undone(left, top, scale, at):
    raster = Raster(left, top, scale)
    assert raster.x_mm(raster.col(at)) == pytest.approx(at, abs=1e-9)
    assert raster.y_mm(raster.row(at)) == pytest.approx(at, abs=1e-9)
    assert raster.col(at + 1) - raster.col(at) == pytest.approx(scale)

"""Ink as coverage: what the pen laid down is measured, what was printed as grid is gone."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.grid import find_grid
from digitize.ink import Ink, find_ink
from digitize.pages import Page
from digitize.sheet import flatten
from tests.digitize.drawn_ink import STRIP, drawn_strip, page_of
from tests.drawn.page import DrawnPage

PEN_MM = STRIP.pen.width_mm
SEEN_AS = {
    "red grid": {},
    "red grid, grey scan": {"capture": replace(STRIP.capture, mode="grey")},
    "blue grid": {"paper": replace(STRIP.paper, grid_colour=(120, 150, 205))},
    "grey grid": {"paper": replace(STRIP.paper, grid_colour=(180, 180, 180))},
    "300 dpi": {"capture": replace(STRIP.capture, dpi=(300.0, 300.0))},
}


def ink_of(drawn: DrawnPage, pixels: np.ndarray | None = None) -> tuple[Ink, np.ndarray]:
    """Ink of a drawn page, and the shift (x, y) in mm from the drawn frame to the found one."""
    page = page_of(drawn, dpi=drawn.spec.capture.dpi)
    if pixels is not None:
        page = Page(pixels, page.source)
    grid = find_grid(page)
    origin_px = drawn.truth.page_map.to_px(np.array([50.0]), np.array([30.0]))
    shift = np.ravel(grid.page_map.to_mm(*origin_px)) - (50.0, 30.0)
    return find_ink(flatten(page, grid)), np.round(shift)


def width_mm(ink: Ink, shift: np.ndarray, drawn: DrawnPage) -> np.ndarray:
    """Full ink about the drawn line, summed down columns along it, in mm."""
    x_mm = np.arange(25.0, 90.0, 0.1)
    panel = drawn.truth.panels[0]
    middle = ink.raster.row(np.interp(x_mm, panel.x_mm, panel.y_mm) + shift[1])
    col = np.round(ink.raster.col(x_mm + shift[0])).astype(int)
    reach = round(1.0 * ink.raster.px_per_mm)
    rows = np.round(middle).astype(int)[:, None] + np.arange(-reach, reach + 1)
    return ink.density[rows, col[:, None]].sum(axis=1) / ink.raster.px_per_mm


@pytest.mark.parametrize("seen", SEEN_AS)
def test_a_line_has_the_width_of_its_pen(seen):
    drawn = drawn_strip(flat=True, **SEEN_AS[seen])
    found = width_mm(*ink_of(drawn), drawn)
    # What a full stroke absorbs is read from the darkest ink of the page, which a pen of two or
    # three pixels hardly reaches: it comes out a little wide, and by less than half a pixel.
    assert 0.95 * PEN_MM < np.median(found) < 1.2 * PEN_MM
    # A stroke of constant width: grid and pixels alter it by less than a tenth.
    assert np.std(found) < 0.1 * PEN_MM


@pytest.mark.parametrize("seen", SEEN_AS)
def test_the_grid_leaves_less_than_the_noise_of_a_pen_line(seen):
    drawn = drawn_strip(flat=True, **SEEN_AS[seen])
    ink, (dx, dy) = ink_of(drawn)
    cols = np.round(ink.raster.col(np.arange(25.0, 90.0) + dx)).astype(int)  # on the lines
    rows = slice(round(ink.raster.row(6.0 + dy)), round(ink.raster.row(20.0 + dy)))
    between = cols + round(0.5 * ink.raster.px_per_mm)
    left_over = ink.density[rows, cols].mean() - ink.density[rows, between].mean()
    assert abs(left_over) < 0.02
    # Ink counts as such from 0.35 on: what is left of grid and noise stays far from it.
    assert np.quantile(np.abs(ink.density[rows]), 0.99) < 0.1


def test_noise_is_that_of_bare_paper():
    drawn = drawn_strip(flat=True)
    ink, (dx, dy) = ink_of(drawn)
    rows = slice(round(ink.raster.row(6.0 + dy)), round(ink.raster.row(20.0 + dy)))
    cols = slice(round(ink.raster.col(25.0 + dx)), round(ink.raster.col(90.0 + dx)))
    spread = np.diff(np.quantile(ink.density[rows, cols], [0.16, 0.84]))[0] / 2
    assert ink.noise == pytest.approx(spread, rel=0.4)


def test_more_noise_on_the_page_is_more_noise_in_the_ink():
    quiet, _ = ink_of(drawn_strip(replace(STRIP.capture, noise=1.0), flat=True))
    loud, _ = ink_of(drawn_strip(replace(STRIP.capture, noise=6.0), flat=True))
    assert loud.noise > 2 * quiet.noise


def test_uneven_light_changes_nothing():
    drawn = drawn_strip(flat=True)
    shade = np.linspace(1.0, 0.55, drawn.pixels.shape[1])
    # Light is what a lamp scales: code values by IEC 61966-2-1, here its power of 2.2.
    shaded = (255 * (drawn.pixels / 255) * shade[:, None] ** (1 / 2.2)).astype(np.uint8)
    one = width_mm(*ink_of(drawn), drawn)
    other = width_mm(*ink_of(drawn, shaded), drawn)
    assert np.median(other) == pytest.approx(np.median(one), rel=0.05)
    light, dark = np.array_split(other, 2)
    assert np.median(light) == pytest.approx(np.median(dark), rel=0.08)


def test_what_covers_the_paper_is_hidden():
    drawn = drawn_strip(flat=True)
    pixels = drawn.pixels.copy()
    x_px, y_px = (np.round(v).astype(int) for v in drawn.truth.page_map.to_px(
        np.array([60.0, 85.0]), np.array([45.0, 60.0])
    ))  # fmt: skip
    pixels[y_px[0] : y_px[1], x_px[0] : x_px[1]] = 10  # a black card laid on the page
    ink, (dx, dy) = ink_of(drawn, pixels)
    assert ink.hidden[round(ink.raster.row(52.0 + dy)), round(ink.raster.col(72.0 + dx))]
    assert not ink.hidden[round(ink.raster.row(52.0 + dy)), round(ink.raster.col(40.0 + dx))]

"""Which way up a page is, and turning it."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.ink import Ink
from digitize.pages import Page
from digitize.tracing import PageSource
from digitize.upright import find_turn, turn_page
from digitize.words import read_printing
from tests.digitize.drawn_ink import CHART, perfect_sheet, read_words


def lying(turn_deg: int) -> Ink:
    """The chart's ink after the paper was turned clockwise on the glass."""
    ink, times = perfect_sheet(CHART).ink, -turn_deg // 90
    rows, cols = ink.density.shape
    left, top = ink.raster.left_mm, ink.raster.top_mm
    size = (cols, rows) if turn_deg % 180 == 0 else (rows, cols)
    ruled = (left, top, left + size[0] / 8, top + size[1] / 8)
    return replace(
        ink,
        density=np.ascontiguousarray(np.rot90(ink.density, times)),
        hidden=np.ascontiguousarray(np.rot90(ink.hidden, times)),
        ruled_mm=ruled,
    )


def test_an_upright_page_stays():
    assert find_turn(perfect_sheet(CHART).ink, read_words(CHART)) == 0


@pytest.mark.parametrize("lies_deg", [90, 180, 270])
def test_a_turned_page_is_turned_back(lies_deg):
    ink = lying(lies_deg)
    assert find_turn(ink, read_printing(ink)) == 360 - lies_deg


def test_turning_is_clockwise_and_takes_the_resolution_along():
    pixels = np.arange(6, dtype=np.uint8).reshape(2, 3)
    page = Page(pixels, PageSource("a.tif", "00" * 32, 1, 3, 2, (204.0, 98.0)))
    quarter = turn_page(page, 90)
    # The top left corner comes to the top right.
    np.testing.assert_array_equal(quarter.pixels, [[3, 0], [4, 1], [5, 2]])
    assert quarter.source.dpi == (98.0, 204.0)
    half = turn_page(page, 180)
    np.testing.assert_array_equal(half.pixels, [[5, 4, 3], [2, 1, 0]])
    assert half.source.dpi == (204.0, 98.0)
    np.testing.assert_array_equal(turn_page(quarter, 270).pixels, pixels)

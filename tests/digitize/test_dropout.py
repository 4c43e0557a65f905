"""A thin line on coarse rows: where it left no ink is known by what an absence of ink means."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.dropout import between_rows, row_error_px
from digitize.ink import Ink
from digitize.sheet import Raster
from digitize.ways import Way

ROW = 2.0  # rows of the raster to one row of the page: 8 and 4 on a millimetre
BARE = np.zeros((4, 4), np.float32)
INK = Ink(BARE, BARE > 1, Raster(0.0, 0.0, 8.0), 0.02, (0, 0, 1, 1), (8.0, 8.0 / ROW), bilevel=True)


def _sampled(y: np.ndarray, half_rows: float) -> Way:
    """A stroke as a fax samples it: pixels whose middle lies so near to the line are black."""
    first, last = (np.round((y + sign * half_rows * ROW) / ROW) for sign in (-1, 1))
    first = np.where(np.abs(first * ROW - y) > half_rows * ROW, first + 1, first)
    last = np.where(np.abs(last * ROW - y) > half_rows * ROW, last - 1, last)
    edges = np.stack([first * ROW - ROW / 2, last * ROW + ROW / 2])
    edges[:, first > last] = np.nan
    return Way(0, edges, np.zeros(len(y), bool))


@pytest.mark.parametrize("rise", [0.01, -0.02, 0.05])
def test_a_line_that_faded_is_known_to_half_a_row(rise) -> None:
    y = 40 + rise * np.arange(400.0)
    way = _sampled(y, half_rows=0.3)
    height = between_rows(way, INK)
    bare = np.isnan(way.edges[0])
    inner = np.flatnonzero(~bare)[[0, -1]]
    faded = bare & (np.arange(400) > inner[0]) & (np.arange(400) < inner[1])
    assert faded.sum() > 100
    assert (np.isfinite(height) == faded).all()
    error = height[faded] - y[faded]
    assert np.abs(error).max() < ROW / 2
    # a place anywhere between two rows: the standard deviation of a uniform distribution
    assert np.std(error) < row_error_px(INK) == pytest.approx(ROW / 12**0.5)


def test_beside_a_flank_the_line_begins_at_its_near_end() -> None:
    x = np.arange(120.0)
    y = np.where(x < 60, 41.0, 41.0 - 20 * np.clip((x - 60) / 4, 0, 1))  # a level line, then up
    edges = np.full((2, 120), np.nan)
    edges[:, :30] = [[40.0], [42.0]]
    edges[:, 60:64] = [[22.0], [42.0]]
    height = between_rows(Way(0, edges, np.zeros(120, bool)), INK)
    assert height[30:60] == pytest.approx(y[30:60], abs=ROW)


@pytest.mark.parametrize(
    ("edges_after", "gap", "ink"),
    [
        ((48.0, 50.0), 20, INK),  # four rows further up: what it did in between is unknown
        ((40.0, 42.0), 200, INK),  # too long: the pen may have lifted
        ((40.0, 42.0), 20, replace(INK, bilevel=False)),  # shades fade for other reasons
    ],
)
def test_other_gaps_stay_gaps(edges_after, gap, ink) -> None:
    edges = np.full((2, 60 + gap), np.nan)
    edges[:, :30] = [[40.0], [42.0]]
    edges[:, 30 + gap :] = np.array(edges_after)[:, None]
    assert np.isnan(between_rows(Way(0, edges, np.zeros(60 + gap, bool)), ink)).all()


def test_thick_ink_does_not_fade_between_rows() -> None:
    way = _sampled(np.full(100, 40.3), half_rows=1.2)
    way.edges[:, 40:60] = np.nan
    assert np.isnan(between_rows(way, INK)).all()


def test_an_empty_way_has_no_heights() -> None:
    assert np.isnan(between_rows(Way(0, np.full((2, 9), np.nan), np.zeros(9, bool)), INK)).all()

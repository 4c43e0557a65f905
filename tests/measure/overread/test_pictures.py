"""Tiles of the paper: at every level they make up the page again."""

import io

import numpy as np
import pytest
from PIL import Image

from measure.overread.pictures import TILE_PX, Pictures

# smooth, so that JPEG keeps it nearly; not square; neither side a multiple of a tile
ROWS, COLS = 700, 1300
PAGE = (
    np.linspace(0, 200, COLS)[None, :] * np.linspace(0.5, 1, ROWS)[:, None] * np.ones((ROWS, COLS))
).astype(np.uint8)


def _put_together(pictures, level, shape):
    """The page at one level out of its tiles."""
    rows, cols = shape
    whole = np.zeros(shape)
    for row in range(-(-rows // TILE_PX)):
        for col in range(-(-cols // TILE_PX)):
            tile = np.asarray(Image.open(io.BytesIO(pictures.tile("scan", level, col, row))))
            at = np.s_[row * TILE_PX :, col * TILE_PX :]
            whole[at][: tile.shape[0], : tile.shape[1]] = tile
    return whole


def test_level_0_is_the_page_pixel_by_pixel():
    again = _put_together(Pictures(PAGE), 0, (ROWS, COLS))
    assert np.abs(again - PAGE).max() < 8  # of JPEG


@pytest.mark.parametrize("level", [1, 2])
def test_each_level_has_half_the_pixels(level):
    side = 2**level
    again = _put_together(Pictures(PAGE), level, (ROWS // side, COLS // side))
    mean = PAGE.reshape(ROWS // side, side, COLS // side, side).mean(axis=(1, 3))
    assert np.abs(again - mean).max() < 8


@pytest.mark.parametrize(
    "place", [("flat", 0, 0, 0), ("else", 0, 0, 0), ("scan", 0, 3, 0), ("scan", 0, 0, 2),
              ("scan", 99, 0, 0)]
)  # fmt: skip
def test_there_is_no_other_picture(place):
    with pytest.raises(KeyError):
        Pictures(PAGE).tile(*place)


def test_colour_stays_colour():
    tile = Pictures(np.full((40, 60, 3), (200, 30, 30), np.uint8)).tile("scan", 0, 0, 0)
    assert np.abs(np.asarray(Image.open(io.BytesIO(tile)))[20, 30] - (200, 30, 30)).max() < 8

"""Pictures of the stages: each can be opened, says what it shows, and shows what is wrong."""

import io
from dataclasses import replace

import numpy as np
import pytest
from PIL import Image

from digitize.explain import PICTURES, draw_stage, grid_residual
from digitize.options import Options
from digitize.read import Stages, read_page
from digitize.sheet import Raster
from tests.digitize.drawn_ink import drawn_strip, page_of


@pytest.fixture(scope="module")
def stages() -> Stages:
    return read_page(page_of(drawn_strip()), Options(speed_mm_s=25, gain_mm_mv=10))


@pytest.mark.parametrize("name", PICTURES)
def test_every_stage_has_a_picture_with_the_sheet_below_a_title(stages, name):
    picture = Image.open(io.BytesIO(draw_stage(stages, name)))
    rows, cols = stages.ink.density.shape
    assert picture.format == "PNG"
    assert picture.mode == "RGB"
    assert picture.width == cols  # small enough to be shown whole
    assert picture.height > rows


def test_ruling_of_a_flat_sheet_lies_on_whole_millimetres(stages):
    place_mm, off_mm = grid_residual(stages)
    assert len(place_mm) > 10
    # Ten lines to a tile at 8 px/mm: a hundredth of a millimetre is a twelfth of a pixel.
    assert np.abs(off_mm).max() < 0.02


def test_a_sheet_laid_wrongly_shows_by_how_much(stages):
    right = stages.ink.raster
    moved = Raster(right.left_mm + 0.1, right.top_mm - 0.05, right.px_per_mm)
    ink = replace(stages.ink, raster=moved)
    _, off_mm = grid_residual(replace(stages, ink=ink))
    assert np.median(off_mm, axis=0) == pytest.approx((0.1, -0.05), abs=0.01)


def test_ink_that_no_trace_draws_is_blue_and_a_trace_without_ink_orange(stages):
    def coloured(some: Stages) -> tuple[int, int]:
        picture = np.asarray(Image.open(io.BytesIO(draw_stage(some, "6-fit"))))
        sheet = picture[-len(stages.ink.density) :].astype(int)
        blue = (sheet[..., 2] - sheet[..., 0]) > 90
        return int(blue.sum()), int((sheet[..., 0] - sheet[..., 2] > 90).sum())

    (stroke,) = stages.strokes
    gone = replace(stages, strokes=(replace(stroke, y_mm=stroke.y_mm + 5.0),))
    blue, orange = coloured(stages)
    blue_moved, orange_moved = coloured(gone)
    assert orange < 0.2 * orange_moved
    assert blue < 0.6 * blue_moved  # the calibration mark stays blue

"""The ruling of a drawing: spacing, place, and what is no ruling."""

import numpy as np
import pytest

from digitize.drawing import Drawing, DrawnLine
from digitize.ruling import find_ruling

SHAPE = (1200, 1700)  # rows, cols
UNIT = 300 / 25.4  # pixels per millimetre of the document's own units


def line(x0: float, y0: float, x1: float, y1: float) -> DrawnLine:
    return DrawnLine(np.array([[x0, y0], [x1, y1]]), 1.0, 0.004)


def ruled(spacing_x: float, spacing_y: float, x0: float = 33.0, y0: float = 21.0):
    uprights = [line(x, 50, x, 1150) for x in np.arange(x0, 1650, spacing_x)]
    levels = [line(30, y, 1660, y) for y in np.arange(y0, 1150, spacing_y)]
    return uprights + levels


def drawing(lines) -> Drawing:
    return Drawing(tuple(lines), (), UNIT)


@pytest.mark.parametrize(
    ("spacing_px", "px_per_mm"),
    [
        (UNIT, UNIT),  # 1 mm at its own size
        (5 * UNIT, UNIT),  # 5 mm lines alone
        (0.75 * UNIT, 0.75 * UNIT),  # the page printed at 75 %
        (5 * 0.7 * UNIT, 0.7 * UNIT),
        (1.4 * UNIT, 1.4 * UNIT),
    ],
)
def test_spacing_gives_the_scale(spacing_px: float, px_per_mm: float) -> None:
    grid = find_ruling(drawing(ruled(spacing_px, spacing_px)), SHAPE)
    assert grid is not None
    assert grid.source == "found"
    assert grid.px_per_mm == pytest.approx((px_per_mm, px_per_mm), rel=1e-5)
    assert grid.scale_se < 1e-5


def test_lines_stand_at_whole_millimetres_and_the_map_is_invertible() -> None:
    grid = find_ruling(drawing(ruled(12.0, 11.5)), SHAPE)
    assert grid is not None
    x_mm, y_mm = grid.page_map.to_mm(np.array([33.0 + 12 * 7]), np.array([21.0 + 11.5 * 4]))
    assert x_mm - np.rint(x_mm) == pytest.approx(0, abs=1e-4)
    assert y_mm - np.rint(y_mm) == pytest.approx(0, abs=1e-4)
    x_px, y_px = grid.page_map.to_px(x_mm, y_mm)
    assert (float(x_px[0]), float(y_px[0])) == pytest.approx((117.0, 67.0), abs=1e-6)


def test_frames_separators_and_doubled_lines_do_not_disturb() -> None:
    others = [line(41.3, 50, 41.3, 1150), line(700.7, 50, 700.7, 1150), line(30, 99.9, 1660, 99.9)]
    lines = [*ruled(UNIT, UNIT), *ruled(5 * UNIT, 5 * UNIT), *others]
    grid = find_ruling(drawing(lines), SHAPE)
    assert grid is not None
    assert grid.px_per_mm == pytest.approx((UNIT, UNIT), rel=1e-4)


def test_uneven_or_few_lines_are_no_ruling() -> None:
    rng = np.random.default_rng(5)
    uneven = [line(x, 50, x, 1150) for x in rng.uniform(0, 1700, 40)]
    levels = [line(30, y, 1660, y) for y in rng.uniform(0, 1200, 40)]
    assert find_ruling(drawing(uneven + levels), SHAPE) is None
    assert find_ruling(drawing(ruled(400.0, 400.0)), SHAPE) is None
    assert find_ruling(drawing(ruled(110.0, 110.0)), SHAPE) is None  # 15 columns: a table
    assert find_ruling(drawing(ruled(40.0, 59.0)), SHAPE) is None  # what is 5 mm here?
    assert find_ruling(drawing([]), SHAPE) is None

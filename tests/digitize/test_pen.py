"""The ink of a line against drawing by brute force and against a general blur."""

import numpy as np
import pytest
import scipy as sp

from digitize.normal import normal_equations
from digitize.pen import Pen, draw_line, envelope

STEP = 0.6
WIDTH = 4.2
SHAPE = (90, 70)


def _line(seed: int) -> np.ndarray:
    """Level, a steep narrow peak, and a tremble."""
    x = np.arange(80) * STEP
    y = 60 - 40 * np.exp(-0.5 * ((x - 24) / 1.5) ** 2)
    return y + np.random.default_rng(seed).normal(0, 0.3, len(x))


def _discs(x: np.ndarray, y: np.ndarray, width: float, shape: tuple[int, int]) -> np.ndarray:
    """Share of each pixel's 16 x 16 sub-pixels within half a width of the polyline."""
    fine = 16
    rows = (np.arange(shape[0] * fine) + 0.5) / fine - 0.5
    cols = (np.arange(shape[1] * fine) + 0.5) / fine - 0.5
    inside = np.zeros((len(rows), len(cols)), bool)
    for k in range(len(x) - 1):
        near = slice(*np.searchsorted(cols, (x[k] - width, x[k + 1] + width)))
        px, py = cols[None, near] - x[k], rows[:, None] - y[k]
        dx, dy = x[k + 1] - x[k], y[k + 1] - y[k]
        along = np.clip((px * dx + py * dy) / (dx * dx + dy * dy), 0, 1)
        away = (px - along * dx) ** 2 + (py - along * dy) ** 2
        inside[:, near] |= away <= (width / 2) ** 2
    return inside.reshape(shape[0], fine, shape[1], fine).mean(axis=(1, 3))


@pytest.mark.parametrize(("blur_x", "blur_y"), [(0.8, 0.8), (0.6, 1.5)])
def test_ink_equals_discs_blurred_by_a_general_filter(blur_x, blur_y):
    y = _line(1)
    x = 10 + STEP * np.arange(len(y))
    image = np.zeros(SHAPE, np.float32)
    # a pixel's own box has a standard deviation of 1/sqrt(12), which the discs bring along
    pen = Pen(WIDTH, np.hypot(blur_x, 12**-0.5), np.hypot(blur_y, 12**-0.5))
    draw_line(image, y, x[0], STEP, pen)
    wanted = sp.ndimage.gaussian_filter(_discs(x, y, WIDTH, SHAPE), (blur_y, blur_x))
    # the envelope is taken as straight between nodes: off by a chord's sagitta, step^2 / 8 radius
    # = 0.02 px, on a smooth line, and by a few times that at a corner
    assert np.abs(image - wanted).max() < 0.08
    assert (image - wanted)[:, 14:54].std() < 0.01


def test_ink_over_ink_stays_ink():
    pen = Pen(WIDTH, 0.7, 0.7)
    once = np.zeros(SHAPE, np.float32)
    draw_line(once, _line(1), 10.0, STEP, pen)
    twice = once.copy()
    draw_line(twice, _line(1), 10.0, STEP, pen)
    assert twice == pytest.approx(1 - (1 - once) ** 2, abs=1e-5)
    assert twice.max() <= 1 + 1e-4


def test_the_envelope_of_a_straight_line_lies_half_a_width_away_at_right_angles():
    slope = 7.0
    edge, _, _ = envelope(slope * STEP * np.arange(60), STEP, WIDTH / 2, 0)
    middle = slope * STEP * np.arange(60)
    offset = WIDTH / 2 * np.sqrt(1 + slope**2)
    assert edge[0, 10:50] == pytest.approx(middle[10:50] - offset)
    assert edge[1, 10:50] == pytest.approx(middle[10:50] + offset)


def test_tremor_thickens_a_level_stroke_up_and_down_and_a_flank_hardly_across():
    level, steep = np.full(60, 20.0), np.linspace(2.0, 38.0, 12)
    pen, images = Pen(WIDTH, 0.7, 0.7), []
    for line, tremor in ((level, 0.0), (level, 1.0), (steep, 0.0), (steep, 1.0)):
        image = np.zeros(SHAPE, np.float32)
        draw_line(image, line, 15.0, STEP, pen, tremor)
        images.append(image)
    down = [image[:, 22].sum() for image in images[:2]]
    across = [image[20].sum() for image in images[2:]]
    assert down[1] - down[0] == pytest.approx(2.0, abs=0.02)
    assert 0 < across[1] - across[0] < 0.5


def test_the_gradient_is_the_derivative_of_the_cost():
    y, pen = _line(2), Pen(WIDTH, 0.8, 0.9)
    image = np.zeros(SHAPE, np.float32)
    draw_line(image, y + 0.3, 10.0, STEP, pen)
    other = np.zeros_like(image)
    tremor = np.full(len(y), 0.4)
    rows = np.stack([np.zeros(SHAPE[1], int), np.full(SHAPE[1], SHAPE[0])])
    everywhere = np.ones(SHAPE[1], bool)

    def system(line: np.ndarray) -> tuple:
        place, seen = (10.0, STEP, pen.nib), (image, other, rows, 0.05)
        return normal_equations(line, tremor, *place, *seen, 40, everywhere)

    _, gradient, _ = system(y)
    for node in (5, 20, 38, 41, 60):
        moved = np.zeros(len(y))
        moved[node] = 1e-3
        rise = system(y + moved)[2].sum() - system(y - moved)[2].sum()
        # the gradient is downhill, of half the cost
        assert gradient[node] == pytest.approx(-rise / 2e-3 / 2, rel=0.03, abs=0.5)

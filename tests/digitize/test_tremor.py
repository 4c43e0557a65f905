"""Tremor under the nib: told by the thickness of level ink, and kept out of the line."""

import numpy as np
import pytest

from digitize.fit import View, fit_line
from digitize.pen import Pen, draw_line
from digitize.tremor import tremor
from digitize.ways import Way

PX_PER_MM = 10.0
PEN = Pen(3.6, 0.7, 0.7)
STEP = 0.5
COLS, ROWS = 600, 60
X = np.arange(0, COLS - 0.5, STEP)
HEIGHT = 30 + 6 * np.sin(X / 60)


def shaken(sigma_px: float) -> np.ndarray:
    """A slow line with white noise, far finer than the nib is wide."""
    return HEIGHT + sigma_px * np.random.default_rng(4).standard_normal(len(X))


def drawn(line: np.ndarray) -> np.ndarray:
    image = np.zeros((ROWS, COLS), np.float32)
    draw_line(image, line, 0.0, STEP, PEN)
    return image


def way_of(image: np.ndarray) -> Way:
    """Edges of the ink where its density crosses a half."""
    inked = image > 0.5
    first, last = inked.argmax(axis=0), ROWS - 1 - inked[::-1].argmax(axis=0)
    cols = np.arange(COLS)
    rise = image[first, cols] - image[first - 1, cols]
    fall = image[last, cols] - image[last + 1, cols]
    top = first - (image[first, cols] - 0.5) / rise
    bottom = last + (image[last, cols] - 0.5) / fall
    return Way(0, np.stack([top, bottom]), np.zeros(COLS, bool))


def test_a_still_line_shows_no_tremor():
    assert tremor(way_of(drawn(HEIGHT)), X, PEN, PX_PER_MM).max() == 0


def test_the_range_of_the_shaking_is_seen():
    # the range of seven normal deviates is 2.7 standard deviations (Tippett 1925)
    inside = slice(100, -100)
    seen = tremor(way_of(drawn(shaken(1.0))), X, PEN, PX_PER_MM)[inside]
    assert np.median(seen) == pytest.approx(2.7 / 2, abs=0.5)
    assert tremor(way_of(drawn(shaken(2.0))), X, PEN, PX_PER_MM)[inside].mean() > seen.mean() + 0.5


def test_the_line_keeps_to_the_middle_of_what_trembles():
    true = shaken(1.0)
    image = drawn(true)
    seen = tremor(way_of(image), X, PEN, PX_PER_MM)
    rows = np.stack([np.zeros(COLS, np.int64), np.full(COLS, ROWS, np.int64)])
    view = View(image, np.zeros_like(image), rows, 0.03)
    still = fit_line(view, HEIGHT, 0.0, STEP, PEN, tremor_px=seen).y_px
    zigzag = fit_line(view, HEIGHT, 0.0, STEP, PEN).y_px
    inside = slice(60, -60)

    def error(line: np.ndarray) -> float:
        return float(np.std((line - HEIGHT)[inside]))

    assert error(still) < 0.7 * error(zigzag)
    assert error(still) < 0.7
    assert np.std((still - true)[inside]) < np.std((zigzag - true)[inside])

"""Strokes seen through dither."""

import numpy as np
import pytest

from digitize.ways import as_thick_as_a_pen, coherent


@pytest.mark.parametrize("lean", [0, 1, 3])
def test_a_stroke_broken_by_dither_goes_on_and_dots_do_not(lean):
    rng = np.random.default_rng(5)
    dots = rng.random((160, 240)) < 0.04  # one pixel each: about as many as dithered paper has
    stroke = np.zeros(dots.shape, bool)
    row = np.arange(20, 140)
    for beside in (0, 1):
        stroke[row, 100 + (row - 20) * lean // 4 + beside] = True
    kept = stroke & (rng.random(dots.shape) < 0.6)  # two of five pixels are lost
    seen = coherent((dots | kept).astype(np.float32), px_per_mm=8.0)
    inner = stroke.copy()
    inner[:26], inner[134:] = False, False
    assert np.median(seen[inner]) > 0.5
    assert np.mean(seen[inner] > 0.3) > 0.95
    assert np.mean(seen[:, 200:] > 0.4) < 0.01  # coarse field: ink from 0.42 on
    # nothing is blurred across: ink three pixels beside a clean stroke stays away
    clean = coherent(stroke.astype(np.float32), px_per_mm=8.0)
    assert clean[80, 100 + 60 * lean // 4] == pytest.approx(1, abs=0.35)
    assert clean[80, 100 + 60 * lean // 4 + 20] == 0


def test_a_stroke_thinner_than_any_pen_is_whole_again():
    density = np.zeros((60, 400), np.float32)
    density[30, ::3] = density[30, 1::3] = 1.0  # 0.125 mm, and every third pixel lost
    thick = as_thick_as_a_pen(density, 8.0)
    inked = thick[:, 5:395] > 0.5
    assert inked.any(axis=0).all()
    assert inked.sum(axis=0).max() * 0.125 <= 0.45


def test_a_pen_s_stroke_and_bare_paper_stay_as_they_are():
    density = np.zeros((60, 400), np.float32)
    assert as_thick_as_a_pen(density, 8.0) is density
    density[29:32] = 1.0  # 0.375 mm
    assert as_thick_as_a_pen(density, 8.0) is density

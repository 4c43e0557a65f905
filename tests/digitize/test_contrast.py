"""The contrast picture: the grid stands out, the trace and the shade do not."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.contrast import grid_contrasts
from tests.digitize.drawn_ink import STRIP, drawn_strip

SEEN_AS = {
    "colour": STRIP.capture,
    "grey": replace(STRIP.capture, mode="grey"),
    "bilevel": replace(STRIP.capture, mode="bilevel", threshold=235.0),
}


def sampled(image: np.ndarray, drawn, x_mm: np.ndarray, y_mm: np.ndarray) -> np.ndarray:
    """Values of a picture at places on the paper."""
    x_px, y_px = drawn.truth.page_map.to_px(x_mm, y_mm)
    return image[np.round(y_px).astype(int), np.round(x_px).astype(int)]


@pytest.mark.parametrize("mode", SEEN_AS)
def test_lines_stand_out_of_the_paper_between_them(mode):
    drawn = drawn_strip(SEEN_AS[mode])
    contrast = next(grid_contrasts(drawn.pixels))
    assert contrast.shape == drawn.pixels.shape[:2]
    assert contrast.dtype == np.float32
    x_mm = np.arange(5.0, 95.0, 5.0)
    y_mm = np.full_like(x_mm, 12.5)  # away from the trace, between two levels
    on_line, beside = (sampled(contrast, drawn, x_mm + off, y_mm) for off in (0.0, 0.5))
    # The picture is in units of its own local strength.
    assert np.median(on_line) > 1
    assert np.median(on_line) - np.median(beside) > 1


@pytest.mark.parametrize("mode", SEEN_AS)
def test_a_black_trace_counts_no_more_than_a_grid_line(mode):
    drawn = drawn_strip(SEEN_AS[mode])
    contrast = next(grid_contrasts(drawn.pixels))
    panel = drawn.truth.panels[0]
    trace = sampled(contrast, drawn, panel.x_mm, panel.y_mm)
    lines = sampled(contrast, drawn, np.arange(5.0, 95.0, 5.0), np.full(18, 12.5))
    assert np.quantile(trace, 0.9) < 1.5 * np.quantile(lines, 0.9)


def test_shade_leaves_it_as_it_was():
    drawn = drawn_strip()
    cols = np.linspace(1.0, 0.6, drawn.pixels.shape[1])
    shaded = np.clip(drawn.pixels * cols[:, None], 0, 255).astype(np.uint8)
    one, other = next(grid_contrasts(drawn.pixels)), next(grid_contrasts(shaded))
    # Away from the picture's border, where the paper's own edge is seen.
    inner = (slice(40, -40), slice(40, -40))
    assert np.corrcoef(one[inner].ravel(), other[inner].ravel())[0, 1] > 0.95


def test_its_input_stays_as_it_was():
    pixels = drawn_strip().pixels.copy()
    before = pixels.copy()
    list(grid_contrasts(pixels))
    np.testing.assert_array_equal(pixels, before)

"""Lead names that touch a trace: the letters are hidden, the trace is not."""

import numpy as np
import pytest

from digitize.ink import Ink
from digitize.overprint import hide_names
from digitize.sheet import Box, Raster
from tests.drawn.lettering import FONTS, draw_word, width_mm
from tests.drawn.pen import draw_stroke

RASTER = Raster(0.05, 0.05, 10.0)
X_MM = np.linspace(5.0, 55.0, 500)
Y_MM = 15.0 + 0.04 * (X_MM - 5.0)  # a baseline that wanders
HIGH_MM = 3.0


def page(name: str, font: str, left_mm: float, foot_mm: float) -> tuple[np.ndarray, np.ndarray]:
    """Density of a trace with a name on it, and that of the trace alone."""
    trace = np.zeros((300, 600), np.float32)
    draw_stroke(trace, RASTER, X_MM, Y_MM, pen_mm=0.35)
    both = trace.copy()
    draw_word(both, RASTER, name, left_mm, foot_mm, font=font, height_mm=HIGH_MM)
    return np.minimum(both, 1), trace


def ink_of(density: np.ndarray) -> Ink:
    hidden = np.zeros(density.shape, bool)
    return Ink(density, hidden, RASTER, 0.01, (0, 0, 60, 30), (10.0, 10.0))


@pytest.mark.parametrize("font", sorted(FONTS)[:3])
@pytest.mark.parametrize("name", ["III", "aVF", "V6"])
def test_letters_that_stand_on_the_trace_are_hidden_and_the_trace_stays(name, font):
    both, trace = page(name, font, 6.5, 15.1)
    wide_mm = width_mm(name, font, HIGH_MM)
    box = Box(6.5, 15.1 - HIGH_MM, 6.5 + 0.8 * wide_mm, 15.1)  # guessed too narrow
    hidden = hide_names(ink_of(both), [box]).hidden
    letters = (both > 0.5) & (trace < 0.05)
    # what is nearer to the trace than half a millimetre cannot be told from it
    off = np.abs(np.arange(300)[:, None] / 10 - np.interp(np.arange(600) / 10, X_MM, Y_MM)) > 0.6
    assert hidden[letters & off].mean() > 0.97
    assert not hidden[trace > 0.5].any()


def test_a_name_apart_from_every_trace_changes_nothing():
    both, _ = page("V6", sorted(FONTS)[0], 6.5, 8.0)
    box = Box(6.5, 8.0 - HIGH_MM, 12.0, 8.0)
    assert not hide_names(ink_of(both), [box]).hidden.any()

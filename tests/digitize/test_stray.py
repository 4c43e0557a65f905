"""Ink that belongs to no trace, on a raster where every stroke is drawn here."""

import cv2
import numpy as np
import pytest

from digitize.ink import Ink
from digitize.sheet import Box, Raster
from digitize.stray import stray_ink

PX = 8.0  # per mm; the sheet is 80 x 40 mm
RASTER = Raster(0.0, 0.0, PX)
PANEL = Box(5.0, 5.0, 75.0, 35.0)


def wave(x_mm):
    return 20.0 + 4 * np.sin(x_mm / 3)


def line(left_mm, right_mm, lift_mm=0.0):
    x_mm = np.arange(left_mm, right_mm, 0.05)
    return np.stack([x_mm, wave(x_mm) + lift_mm], axis=1)


def covered(draw, lines):
    """Where the outlines lie, of a sheet with the trace of `PANEL` and something more on it."""
    density = np.zeros((320, 640), np.float32)
    stroke(density, line(5, 75))
    before = density.copy()
    draw(density)
    hidden = np.zeros(density.shape, bool)
    ink = Ink(density, hidden, RASTER, 0.01, (0, 0, 80, 40), (PX, PX))
    mask = np.zeros(density.shape, np.uint8)
    outlines = stray_ink(ink, [PANEL], lines, 1.2)
    if outlines:
        cv2.fillPoly(mask, [np.rint(outline * PX).astype(np.int32) for outline in outlines], 1)
    more = (density > 0.5) & (before < 0.5)
    return mask > 0, more


def stroke(density, points_mm):
    points = np.rint(points_mm * PX).astype(np.int32)
    cv2.polylines(density, [points], False, 1.0, 3)


def word(density, x_mm=30.0, y_mm=10.0, text="Doe"):
    place = (round(x_mm * PX), round(y_mm * PX))
    drawn = np.zeros(density.shape, np.uint8)
    cv2.putText(drawn, text, place, cv2.FONT_HERSHEY_SIMPLEX, 0.9, 1, 3)
    density[drawn > 0] = 1.0


def scrawl(density):
    """A flourish of loops, all in one stroke."""
    at = np.arange(0, 40, 0.05)
    stroke(density, np.stack([20 + at + 2 * np.sin(3 * at), 30 + 2 * np.cos(3 * at)], axis=1))


@pytest.mark.parametrize("draw", [word, scrawl])
def test_writing_off_the_trace_is_found_whole(draw):
    mask, more = covered(draw, [line(5, 75)])
    off = more & (np.abs(np.arange(320)[:, None] / PX - wave(np.arange(640) / PX)) > 1.5)
    assert off.sum() > 200
    assert mask[off].all()


def test_a_sheet_with_traces_alone_has_none():
    mask, _ = covered(lambda density: None, [line(5, 75)])
    assert not mask.any()


def test_a_stretch_of_trace_that_was_not_followed_stays():
    """It is as thin as the pen and crosses every column once; writing does not."""
    mask, more = covered(word, [line(5, 20), line(50, 75)])
    rows = np.rint(wave(np.arange(200, 380) / PX) * PX).astype(int)
    assert not mask[rows, np.arange(200, 380)].any()
    assert mask[more].all()


@pytest.mark.parametrize("wide_mm", [1.0, 6.0])
def test_a_wave_that_was_cut_short_stays(wide_mm):
    """An R of 9 mm above a line that runs on below it as if there were none."""

    def wave_of(density):
        top = np.array(
            [(40.0, wave(40.0)), (40.0 + wide_mm / 2, 10.0), (40.0 + wide_mm, wave(40.0))]
        )
        stroke(density, top)

    mask, more = covered(wave_of, [line(5, 75)])
    assert more.sum() > 200
    assert not mask[more].any()


def test_what_lies_outside_the_panels_is_no_matter_of_this():
    mask, more = covered(lambda density: word(density, 30.0, 3.5), [line(5, 75)])
    assert more.any()
    assert not mask[: round(4 * PX)].any()


def test_an_outline_has_the_hole_of_its_letter():
    """A ring is covered, the paper within it is not."""

    def ring(density):
        cv2.circle(density, (400, 80), 36, 1.0, 3)

    mask, more = covered(ring, [line(5, 75)])
    assert mask[more].all()
    assert not mask[80, 400]

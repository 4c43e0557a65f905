"""The overlay shows trace, doubt and gaps where they are, and the words that must stand there."""

import io
from dataclasses import replace

import numpy as np
import pytest
from PIL import Image

from digitize import CAUTION
from digitize.checks import find_checks
from digitize.geometry import to_geometry
from digitize.overlay import (
    BLUE,
    LONG_SIDE_PX,
    ORANGE,
    draw_overlay,
    footer_lines,
)
from digitize.pages import Page
from digitize.tracing import Known
from tests.digitize.made_tracing import SOURCE, grid, layout_of, tracing

PX_PER_MM = 8.0


def complete(made):
    """The tracing with the geometry and the checks of a page of 8 px/mm."""
    layout, strokes = layout_of(made)
    made = replace(made, geometry=to_geometry(grid(PX_PER_MM), layout, strokes))
    return replace(made, checks=find_checks(made))


def drawn(made, shape=(1600, 2320)):
    """The overlay over blank paper, as an array, and pixels of it per millimetre."""
    page = Page(np.full(shape, 255, np.uint8), SOURCE)
    picture = np.asarray(Image.open(io.BytesIO(draw_overlay(page, made))).convert("RGB"))
    return picture, PX_PER_MM * picture.shape[1] / shape[1]


def coloured(picture, colour, box_mm, scale):
    """How many pixels of about that colour stand in a box on the paper."""
    left, top, right, bottom = (round(value * scale) for value in box_mm)
    part = picture[top:bottom, left:right].astype(int)
    return int((np.abs(part - colour).max(axis=2) < 30).sum())


def changed(made, index, **fields):
    panels = list(made.panels)
    panels[index] = replace(panels[index], **fields)
    return replace(made, panels=tuple(panels))


def test_the_trace_is_drawn_through_gain_speed_and_baseline():
    # Lead I rests at 57.5 mm, the middle of its box, and its first R of 1 mV stands 10 mm above,
    # 0.3 s or 7.5 mm from the left edge at 15 mm.
    picture, scale = drawn(complete(tracing()))
    assert coloured(picture, BLUE, (22.2, 47.2, 22.8, 48.5), scale) > 0
    assert coloured(picture, BLUE, (22.2, 44.0, 22.8, 47.0), scale) == 0
    assert coloured(picture, BLUE, (15.5, 57.0, 20.0, 58.0), scale) > 50


def test_doubtful_stretches_are_dashed_in_the_other_colour():
    made = tracing()
    sigma = made.panels[0].sigma_mv.copy()
    sigma[500:1000] = 0.5  # 40 to 65 mm on the paper
    picture, scale = drawn(complete(changed(made, 0, sigma_mv=sigma)))
    row = picture[round(57.5 * scale), round(41 * scale) : round(64 * scale)].astype(int)
    orange = np.abs(row - ORANGE).max(axis=1) < 60
    assert 0.4 < orange.mean() < 0.9
    assert (np.diff(orange.astype(int)) == 1).sum() >= 4


def test_what_was_not_read_is_hatched_and_bears_no_trace():
    made = tracing()
    mv = made.panels[0].mv.copy()
    mv[500:1000] = np.nan
    picture, scale = drawn(complete(changed(made, 0, mv=mv)))
    assert coloured(picture, ORANGE, (41, 55, 64, 60), scale) > 200
    assert coloured(picture, BLUE, (41, 45, 64, 62), scale) == 0


def test_an_upside_down_lead_is_drawn_as_it_was_printed():
    made = tracing()
    layout, strokes = layout_of(made)
    # aVR as a page in Cabrera's order prints it: named -aVR, its samples turned round already.
    places = (
        *layout.panels[:3],
        replace(layout.panels[3], lead="-aVR"),
        *layout.panels[4:],
    )
    turned = replace(
        made, geometry=to_geometry(grid(PX_PER_MM), replace(layout, panels=places), strokes)
    )
    plain, scale = drawn(complete(made))
    picture, _ = drawn(turned)
    above, below = (78, 46, 139, 55), (78, 60, 139, 70)
    assert coloured(plain, BLUE, above, scale) < coloured(plain, BLUE, below, scale)
    assert coloured(picture, BLUE, above, scale) > coloured(picture, BLUE, below, scale)


@pytest.mark.parametrize("shape", [(600, 900), (1600, 2320), (7016, 4960), (3508, 2480)])
def test_size_is_limited_and_small_pages_are_enlarged(shape):
    picture, _ = drawn(complete(tracing()), shape)
    assert max(picture.shape[:2]) <= LONG_SIDE_PX
    assert picture.shape[1] >= 1400


def test_same_page_same_bytes():
    page = Page(np.full((800, 1160), 255, np.uint8), SOURCE)
    made = complete(tracing())
    assert draw_overlay(page, made) == draw_overlay(page, made)


def test_the_page_is_not_altered():
    pixels = np.full((800, 1160, 3), 255, np.uint8)
    draw_overlay(Page(pixels, SOURCE), complete(tracing()))
    assert pixels.min() == 255


def test_footer_says_how_everything_is_known_and_the_caution_last():
    made = complete(tracing(gain_mm_mv=Known(5.0, "assumed")))
    lines = [text for text, _ in footer_lines(made)]
    assert "Speed 25 mm/s (printed on the page)" in lines[0]
    assert "Gain 5 mm/mV (ASSUMED)" in lines[0]
    assert any(line.startswith("LOOK: The gain could not be found") for line in lines)
    assert lines[-1] == CAUTION


def test_footer_of_a_clean_page_says_so():
    assert any("No self-check failed" in text for text, _ in footer_lines(complete(tracing())))


def test_an_empty_tracing_is_drawn_too():
    picture, _ = drawn(complete(tracing(())))
    assert picture.shape[1] == 2320

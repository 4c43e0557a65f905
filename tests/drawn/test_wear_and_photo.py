"""Photographs and worn pages: the map against the page's own grid, damage where it was put."""

from dataclasses import replace

import numpy as np
import pytest

from tests.drawn.capture import photo_map
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.page import draw_page
from tests.drawn.spec import (
    CaptureSpec,
    LayoutSpec,
    LetterSpec,
    PageSpec,
    PaperSpec,
    PhotoSpec,
    WearSpec,
)

SMALL = PaperSpec(size_mm=(150.0, 90.0), offset_mm=(6.3, 4.7))
BARE = PageSpec(
    paper=SMALL,
    layout=LayoutSpec(rows=1, columns=1, strips=("II",), panel_s=4.0, top_mm=40.0),
    letters=LetterSpec(label_place="none"),
    capture=CaptureSpec(dpi=(200.0, 200.0), noise=0.0),
)
BENT = PhotoSpec(yaw_deg=9, pitch_deg=-11, curl_mm=6, barrel=-0.04, shade=0.0, distance_pages=1.3)


def test_photo_map_and_its_inverse_agree() -> None:
    page_map = photo_map(replace(BARE.capture, tilt_deg=3.0, turn_deg=90), BENT, SMALL)
    x_mm, y_mm = (v.ravel() for v in np.meshgrid(np.arange(0, 140, 20.0), np.arange(0, 80, 20.0)))
    back = page_map.to_mm(*page_map.to_px(x_mm, y_mm))
    np.testing.assert_allclose(back, (x_mm, y_mm), atol=1e-4)


def test_photographed_grid_lies_where_the_map_says() -> None:
    drawn = draw_page(
        record_model(HeartSpec()), replace(BARE, capture=replace(BARE.capture, photo=BENT))
    )
    blue = drawn.pixels[..., 2].astype(float)

    def along(offset_mm: float) -> float:
        x_mm = np.arange(5.0, 135.0, 5.0) + offset_mm
        x_px, y_px = drawn.truth.page_map.to_px(x_mm, np.full_like(x_mm, 72.5))
        return float(blue[np.round(y_px).astype(int), np.round(x_px).astype(int)].mean())

    assert along(0.0) < along(-0.5) - 10
    assert along(0.0) < along(0.5) - 10
    assert abs(along(-0.15) - along(0.15)) < 0.3 * (along(0.5) - along(0.0)) + 6


def test_flat_photo_from_straight_above_is_a_scan() -> None:
    still = PhotoSpec(yaw_deg=0, pitch_deg=0, curl_mm=0, barrel=0, margin=0)
    page_map = photo_map(BARE.capture, still, SMALL)
    x_px, y_px = page_map.to_px(np.array([0.0, 100.0]), np.array([0.0, 60.0]))
    # 200 dpi: 100 mm are 787.4 px.
    assert x_px[1] - x_px[0] == pytest.approx(100 * 200 / 25.4)
    assert y_px[1] - y_px[0] == pytest.approx(60 * 200 / 25.4)


def test_shadow_darkens_one_side_only() -> None:
    photo = replace(BENT, shadow=0.5, cast=(1.0, 1.0, 1.0))
    capture = replace(BARE.capture, photo=photo)
    lit = draw_page(record_model(HeartSpec()), replace(BARE, capture=replace(capture, photo=BENT)))
    shaded = draw_page(record_model(HeartSpec()), replace(BARE, capture=capture))
    ratio = shaded.pixels[..., 1] / np.maximum(lit.pixels[..., 1], 1)
    middle = ratio[lit.pixels[..., 1] > 120]
    # Half the light is 0.5 ** (1 / 2.2) = 0.73 of the code value.
    assert np.percentile(middle, 5) == pytest.approx(0.73, abs=0.08)
    assert np.percentile(middle, 95) > 0.95


@pytest.mark.parametrize(
    "wear",
    [
        WearSpec(yellow=0.8),
        WearSpec(stains=3),
        WearSpec(folds=2),
        WearSpec(stamp=True),
        WearSpec(writing=4),
        WearSpec(bars=2),
        WearSpec(speckle=1.0),
    ],
)
def test_each_sort_of_wear_darkens_the_page(wear: WearSpec) -> None:
    clean = draw_page(record_model(HeartSpec()), BARE)
    worn = draw_page(record_model(HeartSpec()), replace(BARE, wear=wear))
    assert worn.pixels.mean() < clean.pixels.mean() - 0.02
    np.testing.assert_array_equal(
        worn.pixels, draw_page(record_model(HeartSpec()), replace(BARE, wear=wear)).pixels
    )


def test_fading_takes_ink_from_the_trace_alone() -> None:
    clean = draw_page(record_model(HeartSpec()), BARE)
    faded = draw_page(record_model(HeartSpec()), replace(BARE, wear=WearSpec(fade=0.7)))
    panel = clean.truth.panels[0]
    x_px, y_px = clean.truth.page_map.to_px(panel.x_mm, panel.y_mm)
    at = np.round(y_px).astype(int), np.round(x_px).astype(int)
    assert np.median(faded.pixels[at]) > np.median(clean.pixels[at]) + 15
    np.testing.assert_array_equal(faded.pixels[:40], clean.pixels[:40])


def test_photocopy_spreads_the_tones() -> None:
    grey = replace(BARE, capture=replace(BARE.capture, mode="grey"))
    copied = draw_page(record_model(HeartSpec()), replace(grey, wear=WearSpec(copies=1)))
    first = draw_page(record_model(HeartSpec()), grey)
    panel = first.truth.panels[0]
    x_px, y_px = first.truth.page_map.to_px(panel.x_mm, panel.y_mm)
    at = np.round(y_px).astype(int), np.round(x_px).astype(int)
    assert np.median(copied.pixels[at]) < np.median(first.pixels[at]) + 25
    assert copied.pixels.shape == first.pixels.shape


def test_fax_with_lost_lines_repeats_the_line_before() -> None:
    fax = CaptureSpec(dpi=(204.0, 98.0), mode="bilevel", noise=0.0, dropped_lines=5)
    drawn = draw_page(record_model(HeartSpec()), replace(BARE, capture=fax))
    assert set(np.unique(drawn.pixels)) == {0, 255}
    # 90 mm at 98 lines per inch.
    assert len(drawn.pixels) == round(90 * 98 / 25.4)

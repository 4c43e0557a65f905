"""The page maker: geometry against its own ink, scale of marks, determinism."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from digitize.sheet import Raster
from tests.drawn.capture import scan_map
from tests.drawn.files import write_page
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.page import draw_page
from tests.drawn.pen import draw_stroke
from tests.drawn.spec import CaptureSpec, LayoutSpec, LetterSpec, PageSpec, PaperSpec

SMALL = PaperSpec(size_mm=(150.0, 90.0), offset_mm=(6.3, 4.7))
STRIP = LayoutSpec(rows=1, columns=1, strips=("II",), panel_s=4.0, top_mm=40.0)
QUIET = CaptureSpec(dpi=(200.0, 200.0), noise=0.0)


def _page(**capture: object) -> PageSpec:
    return PageSpec(
        paper=SMALL,
        layout=STRIP,
        letters=LetterSpec(label_place="none"),
        capture=replace(QUIET, **capture),  # type: ignore[arg-type]
    )


@pytest.mark.parametrize(
    "capture",
    [
        {},
        {"tilt_deg": 3.0},
        {"turn_deg": 90, "tilt_deg": -1.5},
        {"turn_deg": 180},
        {"dpi": (204.0, 98.0)},
    ],
)
def test_dark_lines_lie_where_the_map_says(capture: dict[str, object]) -> None:
    drawn = draw_page(record_model(HeartSpec()), _page(**capture))
    grid = drawn.pixels[..., 2].astype(float)  # the red grid is darkest in blue light

    def along(offset_mm: float) -> float:
        x_mm = np.arange(5.0, 135.0, 5.0) + offset_mm
        x_px, y_px = drawn.truth.page_map.to_px(x_mm, np.full_like(x_mm, 72.5))
        return float(grid[np.round(y_px).astype(int), np.round(x_px).astype(int)].mean())

    # The lines of 0.25 mm are darker than the paper 0.5 mm beside them, on both sides alike.
    assert along(0.0) < along(-0.5) - 15
    assert along(0.0) < along(0.5) - 15
    # Nearest pixels scatter: the two sides agree to a quarter of the line's depth.
    assert abs(along(-0.15) - along(0.15)) < 0.3 * (along(0.5) - along(0.0)) + 6


@pytest.mark.parametrize(("turn_deg", "tilt_deg"), [(0, 0.0), (0, 4.2), (90, 1.0), (270, -2.0)])
def test_map_and_its_inverse_agree(turn_deg: int, tilt_deg: float) -> None:
    page_map = scan_map(replace(QUIET, turn_deg=turn_deg, tilt_deg=tilt_deg), SMALL)
    x_mm, y_mm = np.array([0.0, 70.0, 120.3]), np.array([0.0, 33.3, 80.0])
    back = page_map.to_mm(*page_map.to_px(x_mm, y_mm))
    np.testing.assert_allclose(back, (x_mm, y_mm), atol=1e-6)


def test_calibration_mark_is_one_millivolt_high_and_200_ms_wide() -> None:
    # 1 mV at 10 mm/mV is 10 mm; 200 ms at 25 mm/s are 5 mm (common practice).
    drawn = draw_page(record_model(HeartSpec()), _page(mode="grey"))
    left, top, right, bottom = drawn.truth.marks[0]
    assert bottom - top == pytest.approx(10.0)
    x_px, y_px = drawn.truth.page_map.to_px(
        np.array([left, right]), np.array([top - 2, bottom + 2])
    )
    crop = drawn.pixels[int(y_px[0]) : int(y_px[1]), int(x_px[0]) : int(x_px[1])] < 100
    rows, cols = np.flatnonzero(crop.any(axis=1)), np.flatnonzero(crop.sum(axis=0) > 20)
    px_per_mm = 200 / 25.4
    pen_px = 0.3 * px_per_mm
    assert rows[-1] - rows[0] + 1 == pytest.approx(10 * px_per_mm + pen_px, abs=1.5)
    assert cols[-1] - cols[0] + 1 == pytest.approx(5 * px_per_mm + pen_px, abs=1.5)


def test_trace_ink_lies_on_the_true_samples() -> None:
    drawn = draw_page(record_model(HeartSpec()), _page(mode="grey", tilt_deg=1.0))
    panel = drawn.truth.panels[0]
    x_px, y_px = drawn.truth.page_map.to_px(panel.x_mm, panel.y_mm)
    on_trace = drawn.pixels[np.round(y_px).astype(int), np.round(x_px).astype(int)]
    assert np.percentile(on_trace, 95) < 130
    assert np.median(drawn.pixels) > 200


def test_stroke_has_the_area_of_its_pen() -> None:
    # A straight stroke of a round pen: length x width, and half a disc at either end.
    raster = Raster(0.0, 0.0, 20.0)
    layer = np.zeros((200, 400), np.float32)
    draw_stroke(layer, raster, np.array([3.0, 15.0]), np.array([2.1, 7.3]), pen_mm=0.4)
    area_mm2 = layer.sum() / 20.0**2
    expected_mm2 = np.hypot(12.0, 5.2) * 0.4 + np.pi * 0.2**2
    assert area_mm2 == pytest.approx(expected_mm2, rel=0.005)


def test_same_specification_same_pixels_and_other_seed_other_noise() -> None:
    recording = record_model(HeartSpec())
    spec = _page(noise=2.0)
    first, again = draw_page(recording, spec), draw_page(recording, spec)
    np.testing.assert_array_equal(first.pixels, again.pixels)
    assert np.any(draw_page(recording, replace(spec, seed=1)).pixels != first.pixels)


def test_speed_gain_and_columns_are_those_of_the_layout() -> None:
    layout = LayoutSpec(speed_mm_s=50.0, gain_mm_mv=5.0, panel_s=1.2, gap_mm=5.0, left_mm=12.0)
    spec = PageSpec(layout=layout, capture=CaptureSpec(dpi=(75.0, 75.0)))
    recording = record_model(HeartSpec())
    panels = draw_page(recording, spec).truth.panels
    assert [p.lead for p in panels[:4]] == ["I", "aVR", "V1", "V4"]
    second = panels[1]
    # The column stands 60 mm + 5 mm to the right; time runs on through the gap.
    assert second.left_mm == pytest.approx(77.0)
    assert second.start_s == pytest.approx(65 / 50)
    assert np.ptp(second.x_mm) == pytest.approx(1.2 * 50, abs=50 / 500)
    np.testing.assert_allclose(second.baseline_mm - second.y_mm, 5.0 * second.mv, atol=1e-9)
    assert panels[-1].strip
    assert len(panels[-1].mv) == pytest.approx((4 * 60 + 15) / 50 * 500, abs=1)


@pytest.mark.parametrize(
    ("name", "capture", "mode", "dpi"),
    [
        ("a.png", {}, "RGB", (200, 200)),
        ("b.jpg", {"mode": "grey", "jpeg_quality": 80}, "L", (200, 200)),
        ("c.tif", {"mode": "bilevel", "dpi": (204.0, 98.0)}, "1", (204, 98)),
        ("d.tif", {"mode": "bilevel", "dpi": (204.0, 196.0), "dpi_tag": "absent"}, "1", None),
    ],
)
def test_files_carry_mode_and_resolution(
    tmp_path: Path,
    name: str,
    capture: dict[str, object],
    mode: str,
    dpi: tuple[int, int] | None,
) -> None:
    drawn = draw_page(record_model(HeartSpec()), _page(**capture))
    with Image.open(write_page(drawn, tmp_path / name)) as image:
        assert image.mode == mode
        assert image.size == (drawn.pixels.shape[1], drawn.pixels.shape[0])
        found = image.info.get("dpi")
    if dpi is None:
        assert found is None or tuple(found) == (1, 1)
    else:
        assert found == pytest.approx(dpi, abs=0.5)

"""The map between paper and pixels: its own inverse, and the fit through places seen in both."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from digitize.pagemap import PageMap, fit_page_map, uniform_page_map

PAGE_SHAPE = (900, 1500)  # rows, columns: not square, so that swapped axes cannot pass


def homography(scale: float, tilt_deg: float, yaw: float, pitch: float) -> np.ndarray:
    """A page of `scale` pixels per mm, tilted, and foreshortened along x and y."""
    c, s = np.cos(np.deg2rad(tilt_deg)), np.sin(np.deg2rad(tilt_deg))
    return np.array([[scale * c, -scale * s, 40.0], [scale * s, scale * c, 25.0], [yaw, pitch, 1]])


def project(h: np.ndarray, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The homography in its textbook form."""
    u, v, w = h @ np.stack([x, y, np.ones_like(x)])
    return u / w, v / w


def places(n: int, seed: int = 0) -> tuple[np.ndarray, np.ndarray]:
    """Scattered places on a paper of 180 x 100 mm."""
    rng = np.random.default_rng(seed)
    return rng.uniform(0, 180, n), rng.uniform(0, 100, n)


views = {
    "scale": st.floats(3.0, 24.0),
    "tilt_deg": st.floats(-20.0, 20.0),
    "yaw": st.floats(-8e-4, 8e-4),
    "pitch": st.floats(-8e-4, 8e-4),
}


@given(**views, bend_px=st.floats(0.0, 4.0), seed=st.integers(0, 99))
def test_to_mm_undoes_to_px(scale, tilt_deg, yaw, pitch, bend_px, seed):
    bend = np.random.default_rng(seed).uniform(-bend_px, bend_px, (2, 9, 13))
    page_map = PageMap(homography(scale, tilt_deg, yaw, pitch), bend, (0.0, 0.0, 180.0, 100.0))
    x_mm, y_mm = places(50, seed)
    x_px, y_px = page_map.to_px(x_mm, y_mm)
    back = page_map.to_px(*page_map.to_mm(x_px, y_px))
    np.testing.assert_allclose(back, (x_px, y_px), atol=1e-3)  # a thousandth of a pixel


@given(**views)
def test_fit_finds_any_flat_view(scale, tilt_deg, yaw, pitch):
    x_mm, y_mm = places(200)
    x_px, y_px = project(homography(scale, tilt_deg, yaw, pitch), x_mm, y_mm)
    found, residual_mm = fit_page_map(x_px, y_px, x_mm, y_mm, np.ones(200), PAGE_SHAPE)
    assert residual_mm < 1e-3
    back_x, back_y = found.to_mm(x_px, y_px)
    shift = back_x[0] - x_mm[0], back_y[0] - y_mm[0]
    # Exact places: what is left is the spline's ridge and the steps of the inverse.
    np.testing.assert_allclose(back_x - x_mm, np.round(shift[0]), atol=0.002)
    np.testing.assert_allclose(back_y - y_mm, np.round(shift[1]), atol=0.002)


def test_origin_moves_by_whole_millimetres_to_the_first_place():
    x_mm, y_mm = places(60)
    x_px, y_px = project(homography(8.0, 0.0, 0, 0), x_mm, y_mm)
    found, _ = fit_page_map(x_px, y_px, x_mm + 1234.0, y_mm - 77.0, np.ones(60), PAGE_SHAPE)
    back_x, back_y = found.to_mm(x_px, y_px)
    assert 0 <= back_x.min() < 1
    assert 0 <= back_y.min() < 1
    shift = back_x - x_mm
    np.testing.assert_allclose(shift, np.round(shift[0]), atol=0.002)


def test_curled_paper_is_followed():
    x_mm, y_mm = places(4000)
    x_px, y_px = project(homography(8.0, 1.0, 1e-4, 0), x_mm, y_mm)
    y_px += 3 * np.sin(2 * np.pi * x_mm / 150)  # a wave of 3 px
    found, residual_mm = fit_page_map(x_px, y_px, x_mm, y_mm, np.ones(4000), PAGE_SHAPE)
    back_x, back_y = found.to_mm(x_px, y_px)
    off = np.hypot(back_x - x_mm, back_y - y_mm)  # the first place lies within the first mm
    inner = (x_mm > 10) & (x_mm < 170) & (y_mm > 10) & (y_mm < 90)
    # A wave of 0.4 mm: a twentieth of it may be left, twice that where no place lies beyond.
    assert off[inner].max() < 0.02
    assert off.max() < 0.04
    assert residual_mm < 0.02


def test_places_that_are_wrong_do_not_pull_the_map():
    rng = np.random.default_rng(5)
    x_mm, y_mm = places(600)
    x_px, y_px = project(homography(8.0, 2.0, 0, 2e-4), x_mm, y_mm)
    wrong = rng.random(600) < 0.15
    seen_px = np.where(wrong, x_px + 8.0, x_px)  # read one millimetre off
    found, _ = fit_page_map(seen_px, y_px, x_mm, y_mm, np.ones(600), PAGE_SHAPE)
    back_x, _ = found.to_mm(x_px[~wrong], y_px[~wrong])
    off = back_x - x_mm[~wrong]
    assert np.abs(off - np.round(np.median(off))).max() < 0.1


@pytest.mark.parametrize("sigma_px", [0.2, 0.8])
def test_residual_is_the_scatter_of_the_places(sigma_px):
    rng = np.random.default_rng(3)
    x_mm, y_mm = places(3000)
    x_px, y_px = project(homography(8.0, 0.0, 0, 0), x_mm, y_mm)
    x_px, y_px = (v + rng.normal(0, sigma_px, 3000) for v in (x_px, y_px))
    _, residual_mm = fit_page_map(x_px, y_px, x_mm, y_mm, np.ones(3000), PAGE_SHAPE)
    # The median of 3000 distances is known to 2 %; the spline's 100 coefficients take another 2 %.
    assert residual_mm * 8.0 == pytest.approx(sigma_px, rel=0.06)


def test_weightless_places_do_not_count():
    x_mm, y_mm = places(300)
    x_px, y_px = project(homography(8.0, 0.0, 0, 0), x_mm, y_mm)
    weight = np.ones(300)
    weight[:60] = 0
    moved = np.where(weight > 0, y_px, y_px + 500)
    found, _ = fit_page_map(x_px, moved, x_mm, y_mm, weight, PAGE_SHAPE)
    _, back_y = found.to_mm(x_px, y_px)
    np.testing.assert_allclose((back_y - y_mm) - np.round(back_y[-1] - y_mm[-1]), 0, atol=0.005)


def test_uniform_map_has_its_scale_everywhere():
    page_map = uniform_page_map(8.04, 3.85)
    assert page_map.scale_px_per_mm() == pytest.approx((8.04, 3.85))
    x_px, y_px = page_map.to_px(np.array([0.0, 10.0]), np.array([0.0, 20.0]))
    np.testing.assert_allclose(x_px, [0, 80.4], atol=1e-9)
    np.testing.assert_allclose(y_px, [0, 77.0], atol=1e-9)

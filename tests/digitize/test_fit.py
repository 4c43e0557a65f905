"""Fitted lines: what was drawn comes back, wherever it stands, with an honest error."""

import numpy as np
import pytest
import scipy as sp
from hypothesis import given, settings
from hypothesis import strategies as st

from digitize.fit import View, fit_line, start_from_edges
from digitize.normal import band_of_inverse
from digitize.pen import Pen, draw_line, envelope

STEP, X0 = 0.6, 6.0
PEN = Pen(4.2, 0.8, 0.8)
NOISE = 0.05


def _signal() -> np.ndarray:
    """A beat at 12 pixels per millimetre: a narrow R of 10 mm with its q and S, and a T."""
    x = np.arange(300) * STEP
    bump = lambda at, high, wide: high * np.exp(-0.5 * ((x - at) / wide) ** 2)  # noqa: E731
    return 150 - bump(60, 120, 4) + bump(52, 12, 2.5) + bump(69, 30, 3) - bump(130, 30, 14)


def _view(y: np.ndarray, seed: int, noise: float = NOISE) -> View:
    image = np.zeros((200, 196), np.float32)
    draw_line(image, y, X0, STEP, PEN)
    image += np.random.default_rng(seed).normal(0, noise, image.shape).astype(np.float32)
    line = np.interp(np.arange(196), X0 + STEP * np.arange(len(y)), y)
    rows = np.stack(
        [sp.ndimage.minimum_filter1d(line, 9) - 7, sp.ndimage.maximum_filter1d(line, 9) + 8]
    )
    rows = np.clip(rows, 0, 200).astype(np.int64)
    return View(image, np.zeros_like(image), rows, noise)


def test_the_line_comes_back_within_its_own_error():
    y = _signal()
    line = fit_line(_view(y, 1), y + 0.7, X0, STEP, PEN)
    error = line.y_px - y
    assert np.sqrt(np.mean(error**2)) < 0.25  # of a pixel: 2 uV at 12 pixels per mm
    assert 0.55 < np.mean(np.abs(error) < line.sigma_px) < 0.95
    assert np.mean(np.abs(error) < 2 * line.sigma_px) > 0.88


@settings(max_examples=8, deadline=None)
@given(st.floats(-20, 20))
def test_ink_moved_down_moves_the_line_down(shift_px):
    y = _signal()
    base = fit_line(_view(y, 1, 0.001), y, X0, STEP, PEN).y_px
    moved = fit_line(_view(y + shift_px, 1, 0.001), y + shift_px, X0, STEP, PEN).y_px
    assert moved - base == pytest.approx(np.full(len(y), shift_px), abs=0.15)


def test_another_strokes_ink_does_not_pull():
    y = _signal()
    crossing = 60 + 0.8 * np.arange(300) * STEP
    view = _view(y, 2)
    other = np.zeros_like(view.image)
    draw_line(other, crossing, X0, STEP, PEN)
    image = 1 - (1 - view.image) * (1 - other)
    line = fit_line(View(image, other, view.rows, NOISE), y + 0.5, X0, STEP, PEN)
    assert np.sqrt(np.mean((line.y_px - y) ** 2)) < 0.5


def test_dirt_beside_the_line_does_not_pull():
    y = _signal()
    view = _view(y, 3)
    view.image[154:158, 150:156] = 1.0
    line = fit_line(view, y, X0, STEP, PEN)
    assert np.abs(line.y_px - y)[235:255].max() < 1.0


def test_where_ink_is_unknown_the_error_grows():
    y = _signal()
    view = _view(y, 4)
    view.image[:, 150:170] = np.nan
    sigma = fit_line(view, y, X0, STEP, PEN).sigma_px
    assert sigma[255] > 5 * np.median(sigma)


def test_the_start_keeps_peaks_narrower_than_the_pen():
    y = np.full(200, 50.0)
    y[100] -= 20
    y[150] += 15
    radius = 2.1
    edge, _, _ = envelope(y, STEP, radius, 0)
    start = start_from_edges(edge[0], edge[1], STEP, radius)
    assert start[100] == pytest.approx(30, abs=0.2)
    assert start[150] == pytest.approx(65, abs=0.2)
    assert start[20:80] == pytest.approx(50, abs=0.1)


def test_the_band_of_the_inverse_equals_a_dense_inverse():
    rng = np.random.default_rng(5)
    n, band = 30, 4
    dense = np.zeros((n, n))
    for k in range(band + 1):
        dense += np.diag(rng.normal(size=n - k), -k)
    dense = dense @ dense.T + 5 * np.eye(n)
    dense[np.abs(np.subtract.outer(np.arange(n), np.arange(n))) > band] = 0
    lower = np.stack([np.pad(np.diag(dense, -k), (0, k)) for k in range(band + 1)])
    inverse = band_of_inverse(sp.linalg.cholesky_banded(lower, lower=True))
    wanted = np.linalg.inv(dense)
    for k in range(band + 1):
        assert inverse[k, : n - k] == pytest.approx(np.diag(wanted, -k))

"""Traces of drawn ink: the line that was drawn comes back."""

import numpy as np
import scipy as sp

from digitize.ink import Ink
from digitize.layout import Box, Layout, PanelPlace
from digitize.pen import Pen, draw_line
from digitize.sheet import Raster
from digitize.trace import redraw, trace_panels
from digitize.tracing import Known

PX_PER_MM = 8.0
FOUND = Known("x", "found")


def _place(left_mm: float, right_mm: float, baseline_mm: float) -> PanelPlace:
    box = Box(left_mm, baseline_mm - 12, right_mm, baseline_mm + 12)
    return PanelPlace("II", "found", 1.0, False, 0, 0, box, baseline_mm, 0.0, 25.0, 10.0)


def _layout(*panels: PanelPlace) -> Layout:
    return Layout(FOUND, FOUND, FOUND, FOUND, panels, (), ())


def _ink(coverage: np.ndarray, blur_px: float, noise: float) -> Ink:
    blurred = sp.ndimage.gaussian_filter(coverage, blur_px)
    blurred += np.random.default_rng(5).normal(0, noise, blurred.shape)
    rows, cols = blurred.shape
    extent_mm = (0.0, 0.0, cols / PX_PER_MM, rows / PX_PER_MM)
    return Ink(
        blurred.astype(np.float32),
        np.zeros(blurred.shape, bool),
        Raster(0.0, 0.0, PX_PER_MM),
        noise,
        extent_mm,
        (PX_PER_MM, PX_PER_MM),
    )


def _by_discs(x_px: np.ndarray, y_px: np.ndarray, width_px: float, shape: tuple) -> np.ndarray:
    """The obvious drawing: every sub-pixel within half a width of a densely sampled line."""
    fine = 8
    rows = (np.arange(shape[0] * fine) + 0.5) / fine - 0.5
    cols = (np.arange(shape[1] * fine) + 0.5) / fine - 0.5
    length = np.concatenate([[0], np.cumsum(np.hypot(np.diff(x_px), np.diff(y_px)))])
    along = np.arange(0, length[-1], 0.1)
    line = np.stack([np.interp(along, length, y_px), np.interp(along, length, x_px)], axis=1)
    tree = sp.spatial.cKDTree(line)
    grid = np.stack(np.meshgrid(rows, cols, indexing="ij"), axis=-1)
    away, _ = tree.query(grid, distance_upper_bound=width_px)
    inside = away <= width_px / 2
    return inside.reshape(shape[0], fine, shape[1], fine).mean(axis=(1, 3))


def _beat(x_mm: np.ndarray) -> np.ndarray:
    """A P, QRS and T of 1 mV at the standard run, in millimetres upward; tip 2 mm wide."""
    bump = lambda at, high, wide: high * np.exp(-0.5 * ((x_mm - at) / wide) ** 2)  # noqa: E731
    return bump(6, 1.5, 0.6) + bump(10, 10, 0.3) - bump(10.8, 3, 0.25) + bump(17, 3, 1.2)


def test_a_beat_drawn_by_another_way_comes_back_within_a_twentieth_of_a_millimetre():
    x_mm = np.arange(3, 27, 0.05)
    y_mm = 20 - _beat(x_mm - 3)
    coverage = _by_discs(x_mm * PX_PER_MM, y_mm * PX_PER_MM, 0.35 * PX_PER_MM, (240, 250))
    (stroke,) = trace_panels(_ink(coverage, 0.5, 0.02), _layout(_place(3.0, 26.95, 20.0)))
    error = stroke.y_mm - np.interp(stroke.x_mm, x_mm, y_mm)
    assert np.sqrt(np.mean(error**2)) < 0.05
    assert abs(error).max() < 0.4
    assert stroke.unexplained < 0.08
    assert abs(stroke.pen_mm - 0.35) < 0.04


def test_redrawing_reproduces_the_ink():
    pen = Pen(0.35 * PX_PER_MM, 0.6, 0.6)
    x_mm = np.arange(3, 27, 0.05)
    clean = np.zeros((240, 250), np.float32)
    draw_line(clean, (20 - _beat(x_mm - 3)) * PX_PER_MM, 3 * PX_PER_MM, 0.05 * PX_PER_MM, pen)
    strokes = trace_panels(_ink(clean, 0.1, 0.01), _layout(_place(3.0, 26.95, 20.0)))
    drawn = redraw(strokes, Raster(0.0, 0.0, PX_PER_MM), clean.shape)
    assert np.abs(drawn - clean)[:, 24:216].mean() < 0.003


def test_an_empty_panel_has_no_samples_and_says_why():
    (stroke,) = trace_panels(
        _ink(np.zeros((240, 250)), 0.5, 0.02), _layout(_place(3.0, 26.95, 20.0))
    )
    assert np.isnan(stroke.y_mm).all()
    assert stroke.notes == ("no ink in this panel",)

"""Traces of drawn ink: the line that was drawn comes back."""

from dataclasses import replace

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


def _rows(baselines_mm: tuple[float, ...], right_mm: float) -> tuple[PanelPlace, ...]:
    """Panels below one another, each as high as the rows are apart."""
    half = 0.5 * (baselines_mm[1] - baselines_mm[0])
    places = []
    for row, (lead, base) in enumerate(zip(("V1", "V2", "V3"), baselines_mm, strict=False)):
        box = Box(3.0, base - half, right_mm, base + half)
        places.append(PanelPlace(lead, "found", 1.0, False, row, 0, box, base, 0.0, 25.0, 10.0))
    return tuple(places)


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


def test_tall_complexes_that_cross_the_next_row_stay_with_their_own():
    x_mm = np.arange(3, 43, 0.05)
    bump = lambda at, high, wide: high * np.exp(-0.5 * ((x_mm - at) / wide) ** 2)  # noqa: E731
    upper = 20 - bump(12, 4, 0.4) + bump(13.2, 17, 0.4) - bump(20, 3, 1.2) - bump(31, 3, 0.4)
    lower = 32 - bump(12.4, 5, 0.4) - bump(19.5, 2, 1.2) - bump(34, 16, 0.4) - bump(38, 2, 1)
    shape = (440, 370)
    px = PX_PER_MM
    coverage = 1 - (1 - _by_discs(x_mm * px, upper * px, 0.35 * px, shape)) * (
        1 - _by_discs(x_mm * px, lower * px, 0.35 * px, shape)
    )
    panels = _rows((20.0, 32.0), 42.95)
    strokes = trace_panels(_ink(coverage, 0.5, 0.02), _layout(*panels))
    for stroke, truth in zip(strokes, (upper, lower), strict=True):
        error = stroke.y_mm - np.interp(stroke.x_mm, x_mm, truth)
        assert np.sqrt(np.mean(error**2)) < 0.1  # 10 uV
        assert stroke.unexplained < 0.1


def test_a_label_that_touches_nothing_is_left_alone():
    x_mm = np.arange(3, 27, 0.05)
    y_mm = 20 - _beat(x_mm - 3)
    coverage = _by_discs(x_mm * PX_PER_MM, y_mm * PX_PER_MM, 0.35 * PX_PER_MM, (240, 250))
    coverage[140:152, 30:34] = 1.0
    layout = _layout(_place(3.0, 26.95, 20.0))
    layout = replace(layout, words=(Box(3.4, 17.2, 4.6, 19.3),))
    (stroke,) = trace_panels(_ink(coverage, 0.5, 0.02), layout)
    error = stroke.y_mm - np.interp(stroke.x_mm, x_mm, y_mm)
    assert abs(error).max() < 0.4


def test_a_long_gap_stays_a_gap_and_a_short_one_is_bridged():
    x_mm = np.arange(3, 27, 0.05)
    y_mm = 20 - _beat(x_mm - 3)
    coverage = _by_discs(x_mm * PX_PER_MM, y_mm * PX_PER_MM, 0.35 * PX_PER_MM, (240, 250))
    coverage[:, 128:144] = 0  # 2 mm
    coverage[:, 180:182] = 0  # 0.25 mm
    (stroke,) = trace_panels(_ink(coverage, 0.5, 0.02), _layout(_place(3.0, 26.95, 20.0)))
    missing_mm = stroke.x_mm[np.isnan(stroke.y_mm)]
    assert missing_mm.min() > 15.7
    assert missing_mm.max() < 18.2
    assert np.ptp(missing_mm) > 1.5
    assert stroke.notes == ("no ink on the path for more than 0.4 mm",)


def test_errors_are_as_large_as_they_are_said_to_be():
    rng = np.random.default_rng(9)
    x_mm = np.arange(3, 27, 0.05)
    y_mm = 20 - _beat(x_mm - 3) + sp.ndimage.gaussian_filter1d(rng.normal(0, 0.12, len(x_mm)), 1)
    coverage = _by_discs(x_mm * PX_PER_MM, y_mm * PX_PER_MM, 0.35 * PX_PER_MM, (240, 250))
    (stroke,) = trace_panels(_ink(coverage, 0.5, 0.03), _layout(_place(3.0, 26.95, 20.0)))
    ratio = np.abs(stroke.y_mm - np.interp(stroke.x_mm, x_mm, y_mm)) / stroke.sigma_mm
    # one page alone: wider bounds than the 68 and 95 % that a whole set of pages is held to
    assert 0.5 < np.mean(ratio < 1) < 0.85
    assert np.mean(ratio < 2) > 0.88

"""Millimetres to millivolts and seconds, by hand-made strokes with known answers.

Scale: at 25 mm/s and 10 mm/mV, 1 mm is 40 ms and 0.1 mV (common practice).
"""

from dataclasses import replace

import numpy as np
import pytest

from digitize.calibrate import to_panels
from tests.digitize.made_tracing import layout_of, place, stroke, tracing


def calibrated(where, line):
    layout, _ = layout_of(tracing(()))
    (panel,) = to_panels(replace(layout, panels=(where,)), (line,))
    return panel


def ramp(step_mm=0.05, left_mm=20.0, right_mm=82.5):
    """A stroke that rises by 0.1 mm for every 1 mm to the right, from the baseline on."""
    x_mm = left_mm + step_mm * np.arange(round((right_mm - left_mm) / step_mm) + 1)
    return stroke(x_mm, 60.0 - 0.1 * (x_mm - 20.0))


@pytest.mark.parametrize(
    ("speed", "gain", "samples", "slope_mv_s"),
    # slope: 0.1 mm up per mm is 0.1 x speed mm up per second
    [(25.0, 10.0, 1250, 0.25), (50.0, 10.0, 625, 0.5), (25.0, 5.0, 1250, 0.5),
     (12.5, 20.0, 2500, 0.0625)],
)  # fmt: skip
def test_speed_and_gain_scale_time_and_voltage(speed, gain, samples, slope_mv_s):
    panel = calibrated(place(speed_mm_s=speed, gain_mm_mv=gain), ramp())
    assert len(panel.mv) == samples
    np.testing.assert_allclose(panel.mv, slope_mv_s * panel.time_s, atol=1e-9)
    assert panel.sigma_mv == pytest.approx(np.full(samples, 0.02 / gain))


def test_upward_on_paper_is_positive():
    x_mm = np.arange(20.0, 82.6, 0.05)
    assert calibrated(place(), stroke(x_mm, np.full(x_mm.shape, 50.0))).mv == pytest.approx(1.0)


def test_start_stands_on_the_raster_and_samples_at_their_own_times():
    # 2.5013 s falls between samples 1250 (2.500 s) and 1251: the raster begins at 2.502 s.
    panel = calibrated(place(start_s=2.5013), ramp())
    assert panel.start_s == 2.502
    np.testing.assert_allclose(panel.mv[:-1], 0.25 * (panel.time_s[:-1] - 2.5013), atol=1e-9)


def test_gaps_stay_gaps_and_only_gaps():
    line = ramp()
    y_mm = line.y_mm.copy()
    y_mm[100:110] = np.nan
    panel = calibrated(place(), stroke(line.x_mm, y_mm))
    assert np.flatnonzero(np.isnan(panel.mv)).tolist() == list(range(100, 110))
    assert np.isnan(panel.sigma_mv).tolist() == np.isnan(panel.mv).tolist()


def test_a_gap_between_coarse_nodes_is_not_bridged():
    line = ramp(step_mm=0.25)  # five samples from node to node
    y_mm = line.y_mm.copy()
    y_mm[20] = np.nan
    missing = np.flatnonzero(np.isnan(calibrated(place(), stroke(line.x_mm, y_mm)).mv))
    assert missing.tolist() == list(range(96, 105))


def test_nothing_is_made_up_beyond_the_ends_of_a_stroke():
    panel = calibrated(place(), ramp(left_mm=25.0, right_mm=75.0))
    read = np.flatnonzero(~np.isnan(panel.mv))
    assert (read[0], read[-1]) == (100, 1100)


def test_between_nodes_the_error_holds_what_curvature_hides():
    x_mm = 20 + 0.25 * np.arange(251)
    y_mm = 60 - 0.01 * (x_mm - 40) ** 2
    panel = calibrated(place(), stroke(x_mm, y_mm, sigma_mm=0.0))
    truth = 0.001 * (20 + 0.05 * np.arange(1250) - 40) ** 2
    error = np.abs(panel.mv - truth)
    assert error.max() > 1e-5
    # For a parabola the bound is met exactly; the outermost nodes have no bend of their own.
    np.testing.assert_allclose(panel.sigma_mv[5:-5], error[5:-5], atol=1e-9)


def test_cabrera_lead_is_turned_round_and_says_so():
    plain, turned = calibrated(place("aVR"), ramp()), calibrated(place("-aVR"), ramp())
    assert turned.lead == "aVR"
    np.testing.assert_array_equal(turned.mv, -plain.mv)
    assert "upside down" in turned.notes[0]
    assert plain.notes == ()


@pytest.mark.parametrize(("middle_mm", "kept"), [(41.0, True), (39.0, False), (71.0, False)])
def test_a_trace_that_lies_in_another_row_is_not_kept(middle_mm, kept):
    # The row reaches from 40 to 70 mm; the peak of 15 mm may leave it, the usual height may not.
    x_mm = np.arange(20.0, 82.6, 0.05)
    y_mm = np.full(x_mm.shape, middle_mm)
    y_mm[300:320] -= 15
    panel = calibrated(place(), stroke(x_mm, y_mm))
    assert np.isfinite(panel.mv).all() == kept
    assert np.isnan(panel.sigma_mv).any() != kept
    assert any("another row" in note for note in panel.notes) != kept


def test_empty_stroke_gives_an_empty_reading():
    panel = calibrated(place(), stroke(np.empty(0), np.empty(0), notes=("hidden by a stamp",)))
    assert len(panel.mv) == 1250
    assert np.isnan(panel.mv).all()
    assert panel.notes == ("hidden by a stamp",)


def test_whole_page_comes_back():
    made = tracing()
    layout, strokes = layout_of(made)
    for panel, truth in zip(to_panels(layout, strokes), made.panels, strict=True):
        assert (panel.lead, panel.start_s, panel.strip) == (truth.lead, truth.start_s, truth.strip)
        np.testing.assert_allclose(panel.mv, truth.mv, atol=1e-9)

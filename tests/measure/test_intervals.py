"""Corrected QT by worked examples, axes by geometry, errors carried through."""

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pydicom.data
import pytest

from digitize.tracing import LEADS
from measure.intervals import (
    qtc_bazett_ms,
    qtc_framingham_ms,
    qtc_fridericia_ms,
    qtc_hodges_ms,
)
from measure.quantity import Quantity
from measure.reading import Reading, read
from measure.sources import read_digital, tracing_from_samples
from tests.drawn.heart import HeartSpec
from tests.measure.model import as_page, digital, recording


@pytest.mark.parametrize(
    ("formula", "expected_ms"),
    # worked example (from memory): QT 360 ms at 100/min
    [
        (qtc_bazett_ms, 465),
        (qtc_fridericia_ms, 427),
        (qtc_framingham_ms, 422),
        (qtc_hodges_ms, 430),
    ],
)
def test_qtc_worked_example(formula, expected_ms: float) -> None:
    assert formula(360.0, 600.0) == pytest.approx(expected_ms, abs=0.5)


@pytest.mark.parametrize(
    "formula", [qtc_bazett_ms, qtc_fridericia_ms, qtc_framingham_ms, qtc_hodges_ms]
)
def test_qtc_at_sixty_is_qt(formula) -> None:
    assert formula(401.0, 1000.0) == pytest.approx(401.0)


def frontal_reading(angle_deg: float, leads: tuple[str, ...] = LEADS) -> Reading:
    """A single dipole that keeps its direction, seen by the hexaxial leads."""
    directions = {"I": 0, "II": 60, "aVF": 90, "III": 120, "aVL": -30, "aVR": -150}
    time_s = np.arange(5000) / 500
    wave = np.zeros(5000)
    for at_s in np.arange(0.6, 9.6, 0.9):
        wave += 1.2 * np.exp(-0.5 * ((time_s - at_s) / 0.016) ** 2)
        wave += 0.25 * np.exp(-0.5 * ((time_s - at_s - 0.30) / 0.045) ** 2)
    columns = []
    for lead in leads:
        turn = math.radians(angle_deg - directions.get(lead, 20))
        # Goldberger's leads are shorter than the bipolar ones by sqrt(3) / 2
        scale = math.sqrt(3) / 2 if lead.startswith("aV") else 1.0
        columns.append(wave * math.cos(turn) * scale)
    return read(tracing_from_samples(np.column_stack(columns), leads, 500.0))


@pytest.mark.parametrize("angle_deg", [-150, -75, -20, 10, 45, 75, 105, 160])
def test_axis_of_a_known_dipole(angle_deg: float) -> None:
    intervals = frontal_reading(angle_deg).intervals
    assert intervals["qrs_axis_deg"].value == pytest.approx(angle_deg, abs=1.5)
    assert intervals["t_axis_deg"].value == pytest.approx(angle_deg, abs=3)


@pytest.mark.parametrize("leads", [("I", "II", "V2"), ("I", "III", "V5")])
def test_axis_without_avf(leads: tuple[str, ...]) -> None:
    axis = frontal_reading(45, leads).intervals["qrs_axis_deg"]
    assert axis.value == pytest.approx(45, abs=2)
    assert set(axis.leads) == set(leads[:2])


def test_no_axis_without_limb_leads() -> None:
    axis = frontal_reading(45, ("V1", "V2", "V5")).intervals["qrs_axis_deg"]
    assert not axis.known
    assert "needed" in (axis.reason or "")


def test_axis_of_the_model_heart() -> None:
    for turn in (-60.0, 0.0, 50.0):
        spec = HeartSpec(seed=61, turn_deg=turn)
        axis = read(digital(spec)).intervals["qrs_axis_deg"]
        assert axis.value == pytest.approx(recording(spec).truth.qrs_axis_deg, abs=5)


def test_intervals_carry_error_leads_and_beats() -> None:
    intervals = read(as_page(digital(HeartSpec(seed=62)))).intervals
    for key, quantity in intervals.items():
        assert isinstance(quantity, Quantity)
        assert quantity.known, key
        assert quantity.se > 0, key
        assert quantity.beats > 0, key
    assert len(intervals["qrs_ms"].leads) == 12


def test_missing_p_gives_missing_pr_with_a_reason() -> None:
    intervals = read(digital(HeartSpec(rhythm="fibrillation", seed=63))).intervals
    for key in ("p_ms", "pr_ms", "p_axis_deg"):
        assert not intervals[key].known
        assert intervals[key].reason
    assert intervals["qrs_ms"].known


def test_rate_and_rr_of_the_model() -> None:
    spec = HeartSpec(seed=64, rate_bpm=83)
    intervals = read(digital(spec)).intervals
    assert intervals["rate_bpm"].value == pytest.approx(recording(spec).truth.rate_bpm, rel=0.02)
    assert intervals["rr_ms"].value == pytest.approx(60000 / intervals["rate_bpm"].value)


def test_qtc_error_follows_qt_and_rr() -> None:
    intervals = read(digital(HeartSpec(seed=65))).intervals
    qt, rr, qtc = intervals["qt_ms"], intervals["rr_ms"], intervals["qtc_framingham_ms"]
    assert qtc.se == pytest.approx(math.hypot(qt.se, 0.154 * rr.se), rel=0.01)


def test_pydicom_recording_against_its_recorder() -> None:
    """The recorder's annotations: RR 982 ms; axes of P 74, QRS 52, T 57 degrees."""
    tracing = read_digital(Path(pydicom.data.get_testdata_file("waveform_ecg.dcm")))
    for form in (tracing, as_page(tracing)):
        intervals = read(form).intervals
        assert intervals["rr_ms"].value == pytest.approx(982, abs=5)
        assert intervals["qrs_axis_deg"].value == pytest.approx(52, abs=8)
        assert intervals["t_axis_deg"].value == pytest.approx(57, abs=8)
        assert intervals["p_axis_deg"].value == pytest.approx(74, abs=10)


def test_times_scale_with_the_sampling_rate() -> None:
    """The same numbers claimed at half the rate make everything twice as long."""
    tracing = digital(replace(HeartSpec(seed=66), rate_bpm=100))
    mv = np.column_stack([tracing.lead(lead).mv for lead in LEADS])
    slow = read(tracing_from_samples(mv, LEADS, 250.0)).intervals
    fast = read(tracing).intervals
    assert slow["rr_ms"].value == pytest.approx(2 * fast["rr_ms"].value, rel=0.005)
    assert slow["qrs_axis_deg"].value == pytest.approx(fast["qrs_axis_deg"].value, abs=2)

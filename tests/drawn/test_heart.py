"""The model heart: lead relations, and shapes that its conduction patterns promise."""

import numpy as np
import pytest

from digitize.tracing import LEADS
from tests.drawn import conduction
from tests.drawn.heart import LEVEL_MV, HeartSpec, Recording, record_model


def _beat(recording: Recording, lead: str) -> np.ndarray:
    """QRS of the first whole beat, from its true onset to its true end."""
    assert recording.truth is not None
    beat = next(b for b in recording.truth.beats if b.qrs_on_s > 0.3 and b.kind == "usual")
    first, last = round(beat.qrs_on_s * 500), round(beat.qrs_off_s * 500)
    return recording.lead(lead)[first : last + 1]


@pytest.mark.parametrize("name", conduction.PATTERNS)
def test_einthoven_and_goldberger_hold_exactly(name: str) -> None:
    # Einthoven: II = I + III; Goldberger: aVR = -(I+II)/2, aVL = (I-III)/2, aVF = (II+III)/2.
    mv = dict(
        zip(LEADS, record_model(HeartSpec(name, wander_mv=0.1, muscle_mv=0.02)).mv, strict=True)
    )
    np.testing.assert_allclose(mv["II"], mv["I"] + mv["III"], atol=1e-12)
    np.testing.assert_allclose(mv["aVR"], -(mv["I"] + mv["II"]) / 2, atol=1e-12)
    np.testing.assert_allclose(mv["aVL"], (mv["I"] - mv["III"]) / 2, atol=1e-12)
    np.testing.assert_allclose(mv["aVF"], (mv["II"] + mv["III"]) / 2, atol=1e-12)


@pytest.mark.parametrize("qrs_ms", [80.0, 111.0, 150.0, 178.0])
def test_qrs_is_as_wide_as_asked(qrs_ms: float) -> None:
    truth = record_model(HeartSpec("lbbb", qrs_ms=qrs_ms)).truth
    assert truth is not None
    assert truth.qrs_ms == pytest.approx(qrs_ms, abs=0.5)  # the net of times is 0.25 ms


def test_boundary_is_where_the_leads_rise_above_the_level() -> None:
    recording = record_model(HeartSpec("normal", variation=0.0))
    assert recording.truth is not None
    beat = recording.truth.beats[2]
    before = recording.mv[:, round(beat.qrs_on_s * 500) - 5]
    inside = recording.mv[:, round(beat.qrs_on_s * 500) + 6]
    # No lead of Dower's matrix sees the vector enlarged more than 1.7 times; T may still fade.
    assert np.abs(before).max() < 2.5 * LEVEL_MV["qrs"]
    assert np.abs(inside).max() > 2.5 * LEVEL_MV["qrs"]


def test_pr_is_as_asked_and_early_beats_come_early() -> None:
    truth = record_model(HeartSpec(rate_bpm=70, pr_ms=180, early_atrial=(4, 8))).truth
    assert truth is not None
    usual = [b for b in truth.beats if b.kind == "usual"]
    assert all(b.p_on_s is not None for b in usual)
    pr_ms = [1e3 * (b.qrs_on_s - b.p_on_s) for b in usual if b.p_on_s is not None]
    np.testing.assert_allclose(pr_ms, 180, atol=0.5)
    starts = [b.qrs_start_s for b in truth.beats]
    early = [k for k, b in enumerate(truth.beats) if b.kind == "atrial"]
    assert len(early) == 2
    for k in early:
        assert starts[k] - starts[k - 1] < 0.75 * 60 / 70
        assert starts[k + 1] - starts[k] > 1.05 * 60 / 70


def test_lbbb_shows_what_its_criteria_ask() -> None:
    # AHA/ACCF/HRS 2009 part III (from memory): wide, no q in I, V5, V6, peak late, V1 negative.
    recording = record_model(HeartSpec("lbbb", variation=0.0))
    for lead in ("I", "V5", "V6"):
        qrs = _beat(recording, lead)
        assert qrs.min() > -0.06
        assert 2 * np.argmax(qrs) > 60
    qrs = _beat(recording, "V1")
    assert -qrs.min() > 5 * max(qrs.max(), 0.0)


def test_rbbb_shows_what_its_criteria_ask() -> None:
    # AHA/ACCF/HRS 2009 part III (from memory): R' in V1 after an r, S > 40 ms in I and V6.
    recording = record_model(HeartSpec("rbbb", variation=0.0))
    v1 = _beat(recording, "V1")
    assert 2 * np.argmax(v1) > 50
    assert v1[: len(v1) // 3].max() > 0.1
    for lead in ("I", "V6"):
        assert 2 * np.count_nonzero(_beat(recording, lead) < -0.05) > 40


@pytest.mark.parametrize(
    ("name", "low_deg", "high_deg"), [("normal", -30, 90), ("lafb", -90, -45), ("lpfb", 90, 180)]
)
def test_axis_lies_where_the_pattern_asks(name: str, low_deg: float, high_deg: float) -> None:
    truth = record_model(HeartSpec(name)).truth
    assert truth is not None
    assert low_deg < truth.qrs_axis_deg < high_deg


def test_fibrillation_has_no_p_and_irregular_beats() -> None:
    truth = record_model(HeartSpec(rhythm="fibrillation")).truth
    assert truth is not None
    assert truth.p_ms is None
    assert truth.pr_ms is None
    intervals_s = np.diff([b.qrs_start_s for b in truth.beats])
    assert intervals_s.std() / intervals_s.mean() > 0.1


def test_same_seed_same_recording() -> None:
    spec = HeartSpec("rbbb", muscle_mv=0.01, seed=3)
    np.testing.assert_array_equal(record_model(spec).mv, record_model(spec).mv)
    assert np.any(record_model(spec).mv != record_model(HeartSpec("rbbb", muscle_mv=0.01)).mv)

"""Wave shapes on model ECGs whose patterns are known."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.tracing import LEADS, Tracing
from measure.average import average_beats
from measure.beats import find_beats
from measure.boundaries import find_boundaries
from measure.waves import LeadWaves, measure_waves
from tests.drawn.heart import HeartSpec
from tests.measure.model import as_page, digital, recording, true_at_s


def waves_of(tracing: Tracing) -> dict[str, LeadWaves]:
    beats = find_beats(tracing)
    beat = average_beats(tracing, beats)
    return measure_waves(beat, find_boundaries(beat, beats))


def largest_mv(spec: HeartSpec, lead: str) -> float:
    """Signed largest deflection of the second QRS of the noise-free model."""
    at = round(true_at_s(spec)[1] * 500)
    mv = recording(spec).lead(lead)
    part = mv[at : at + 60] - mv[at - 3]
    return float(part[np.argmax(np.abs(part))])


@pytest.mark.parametrize("pattern", ["normal", "lbbb", "rbbb", "lafb"])
@pytest.mark.parametrize("form", ["digital", "page"])
def test_amplitudes_within_the_standard(pattern: str, form: str) -> None:
    """IEC 60601-2-25: within 25 uV up to 0.5 mV and 5 % above (from memory)."""
    spec = HeartSpec(conduction=pattern, seed=51, variation=0.0)
    tracing = digital(spec)
    waves = waves_of(tracing if form == "digital" else as_page(tracing))
    for lead in LEADS:
        true_mv = largest_mv(spec, lead)
        got = max(waves[lead].deflections, key=lambda d: abs(d.amplitude_mv))
        limit = max(0.025, 0.05 * abs(true_mv))
        assert got.amplitude_mv == pytest.approx(true_mv, abs=limit), lead


def test_right_bundle_branch_block_has_its_shape() -> None:
    waves = waves_of(digital(HeartSpec(conduction="rbbb", seed=52)))
    assert waves["V1"].find("R'") is not None
    assert waves["V1"].r_peak_time_ms.value > 50
    assert waves["I"].find("S").duration_ms > 40
    assert waves["V6"].r_peak_time_ms.value < 50


def test_left_bundle_branch_block_has_its_shape() -> None:
    waves = waves_of(digital(HeartSpec(conduction="lbbb", seed=53)))
    for lead in ("I", "V5", "V6"):
        assert waves[lead].find("Q") is None
        assert waves[lead].find("R") is not None
        assert waves[lead].t_mv.value < 0 < waves[lead].net_area_mv_ms.value
    assert waves["V1"].shape.split(",")[0] in ("QS", "rS")
    assert any(40 < n.onset_ms < 110 for n in waves["V6"].notches + waves["I"].notches)


def test_left_anterior_fascicular_block_has_its_shape() -> None:
    waves = waves_of(digital(HeartSpec(conduction="lafb", seed=54)))
    assert waves["aVL"].shape.lower().startswith("qr")
    assert waves["III"].shape.lower().startswith("rs")


def test_st_and_p_and_smallest() -> None:
    waves = waves_of(digital(HeartSpec(seed=55, variation=0.0)))
    assert set(waves["V2"].st_mv) == {0, 40, 60, 80}
    assert all(abs(q.value) < 0.05 for q in waves["II"].st_mv.values())
    assert waves["II"].p_mv.value > 0.05
    assert waves["aVR"].p_mv.value < -0.05
    assert all(w.smallest_mv >= 0.02 for w in waves.values())
    assert waves["II"].t_mv.value > 0.1


def test_a_lifted_st_segment_is_measured() -> None:
    tracing = digital(HeartSpec(seed=55, variation=0.0))
    beats = find_beats(tracing)
    beat = average_beats(tracing, beats)
    boundaries = find_boundaries(beat, beats)
    start = boundaries.overall.qrs_off_ms.value
    lift = 0.3 * np.clip((beat.time_ms - start + 40) / 40, 0, 1) * (beat.time_ms < start + 200)
    lifted = measure_waves(
        replace(beat, mv=beat.mv + lift, single_mv=beat.single_mv + lift), boundaries
    )
    plain = measure_waves(beat, boundaries)
    for lead in LEADS:
        gain = lifted[lead].st_mv[60].value - plain[lead].st_mv[60].value
        assert gain == pytest.approx(0.3, abs=0.001)


def test_a_lead_without_a_whole_beat_says_so() -> None:
    tracing = as_page(digital(HeartSpec(seed=56)))
    panels = [
        replace(p, mv=np.full_like(p.mv, np.nan)) if p.lead == "V4" else p for p in tracing.panels
    ]
    waves = waves_of(replace(tracing, panels=tuple(panels)))["V4"]
    assert not waves.qrs_complete
    assert waves.beats == 0
    assert waves.deflections == ()
    assert waves.t_mv.reason == "no whole beat of this lead is visible"
    assert waves.r_peak_time_ms.reason


def test_no_r_wave_no_r_peak_time() -> None:
    waves = waves_of(digital(HeartSpec(conduction="lbbb", seed=57)))
    without = [w for w in waves.values() if not any(d.amplitude_mv > 0 for d in w.deflections)]
    assert without
    for w in without:
        assert w.r_peak_time_ms.reason == f"there is no R wave in {w.lead}"


def test_noise_asks_for_larger_deflections() -> None:
    quiet = waves_of(digital(HeartSpec(seed=58)))
    noisy = waves_of(as_page(digital(HeartSpec(seed=58, muscle_mv=0.05))))
    assert noisy["V5"].smallest_mv > 2 * quiet["V5"].smallest_mv

"""The dominant beat: alignment, averaging, what is left out."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.tracing import LEADS
from measure.average import DominantBeat, average_beats
from measure.beats import find_beats
from measure.sources import tracing_from_samples
from tests.drawn.heart import HeartSpec
from tests.measure.model import as_page, digital

STEADY = HeartSpec(seed=11, variation=0.0, rate_bpm=66)


def averaged(tracing) -> DominantBeat:
    return average_beats(tracing, find_beats(tracing))


def test_the_average_of_equal_beats_is_the_beat() -> None:
    """Of equal beats the average is each of them: only the sampling shifts them."""
    beat = averaged(digital(STEADY))
    inside = (beat.time_ms > -150) & (beat.time_ms < 350)
    tracing = digital(STEADY)
    for lead in ("II", "V2", "V6"):
        panel = tracing.lead(lead)
        at_s = beat.at_s[3] + beat.time_ms[inside] / 1000
        one = np.interp(at_s, panel.time_s, panel.mv)
        got = beat.lead(lead)[inside]
        # linear reading between samples of 2 ms costs some microvolts at the top of the R
        np.testing.assert_allclose(got - got[0], one - one[0], atol=0.02)


def test_noise_falls_with_the_root_of_the_beats_and_se_says_so() -> None:
    quiet = digital(STEADY)
    rng = np.random.default_rng(5)
    mv = np.column_stack([quiet.lead(lead).mv for lead in LEADS])
    noisy = tracing_from_samples(mv + 0.03 * rng.standard_normal(mv.shape), LEADS, 500.0)
    beat, clean = averaged(noisy), averaged(quiet)
    late = (beat.time_ms > 480) & (beat.time_ms < 640)
    left = (beat.mv - clean.mv)[:, late]
    left -= left.mean(axis=1, keepdims=True)
    count = np.mean(beat.beats)
    assert left.std() == pytest.approx(0.03 / np.sqrt(count), rel=0.25)
    assert np.mean(beat.se_mv[:, late]) == pytest.approx(0.03 / np.sqrt(count), rel=0.25)


def test_a_page_gives_the_same_beat_as_the_recording() -> None:
    """Columns meet at the same fiducial point though each shows other beats."""
    tracing = digital(STEADY)
    whole, page = averaged(tracing), averaged(as_page(tracing))
    qrs = (whole.time_ms > -60) & (whole.time_ms < 60)
    for lead in LEADS:
        a, b = whole.lead(lead)[qrs], page.lead(lead)[qrs]
        # one shift for all leads: the fiducial point itself is free
        assert np.corrcoef(np.gradient(a), np.gradient(b))[0, 1] > 0.98
    assert page.column_se_ms == 0
    assert page.beats[LEADS.index("II")] > 8
    assert all(1 <= page.beats[LEADS.index(lead)] <= 3 for lead in LEADS if lead != "II")


def test_columns_without_a_strip_meet_with_an_error() -> None:
    beat = averaged(as_page(digital(STEADY), strip=None))
    assert beat.column_se_ms > 0
    whole = averaged(digital(STEADY))
    for lead in ("I", "aVF", "V2", "V5"):
        lag = np.argmax(np.abs(beat.lead(lead)[300:500])) - np.argmax(
            np.abs(whole.lead(lead)[300:500])
        )
        assert abs(lag) <= 10


def test_a_qrs_cut_by_the_edge_is_left_out_of_that_lead() -> None:
    tracing = as_page(digital(STEADY))
    beats = find_beats(tracing)
    first = beats.time_s[1]
    panels = []
    for panel in tracing.panels:
        if panel.lead == "I":
            start = round((first - 0.03) * 500)  # within its QRS
            panel = replace(
                panel, start_s=start / 500, mv=panel.mv[start:], sigma_mv=panel.sigma_mv[start:]
            )
        panels.append(panel)
    beat = average_beats(replace(tracing, panels=tuple(panels)), beats)
    usual = average_beats(tracing, beats)
    before = int((beats.time_s[0] > 0.1) + 1)  # the cut beat and a whole one before it
    assert beat.beats[0] == usual.beats[0] - before
    assert beat.beats[2] == usual.beats[2]


def test_a_hidden_stretch_stays_out_of_the_average() -> None:
    tracing = digital(STEADY)
    at_s = find_beats(tracing).time_s[2]
    panels = []
    for panel in tracing.panels:
        if panel.lead == "V3":
            mv = panel.mv.copy()
            mv[round((at_s - 0.02) * 500) : round((at_s + 0.02) * 500)] = np.nan
            panel = replace(panel, mv=mv)
        panels.append(panel)
    beat = averaged(replace(tracing, panels=tuple(panels)))
    assert beat.beats[LEADS.index("V3")] == beat.beats[LEADS.index("V2")] - 1


def test_early_and_odd_beats_do_not_change_the_average() -> None:
    plain = averaged(digital(replace(STEADY, early_ventricular=(5,))))
    usual = averaged(digital(STEADY))
    inside = (usual.time_ms > -100) & (usual.time_ms < 300)
    a, b = usual.lead("V2")[inside], plain.lead("V2")[inside]
    assert np.corrcoef(a, b)[0, 1] > 0.995


def test_the_average_does_not_jump_where_a_beat_ends() -> None:
    beat = averaged(as_page(digital(replace(STEADY, wander_mv=0.3))))
    late = (beat.time_ms > 120) & (beat.time_ms < 650)
    steps = np.abs(np.diff(beat.mv[:, late], axis=1))
    assert np.nanmax(steps) < 0.012  # the T wave itself falls by some 0.01 mV per ms


def test_an_unknown_lead_is_an_error() -> None:
    with pytest.raises(KeyError):
        averaged(digital(STEADY)).lead("V9")

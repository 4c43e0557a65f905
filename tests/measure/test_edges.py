"""Ends of a QRS in a single lead that rests in its midst."""

import numpy as np
import pytest
import scipy as sp

from measure.activity import Leads, leads_of
from measure.edges import Edge, qrs_edges

WITHIN_MS = (-60.0, 80.0)  # of the QRS over all leads


def two_waves(first_mv: float = 0.08, last_mv: float = 0.0) -> Leads:
    """An early small r, 40 ms at rest, a tall R, and where asked a late small wave."""
    time_ms = np.arange(-400.0, 401.0)
    at = [-56, -48, -40, 0, 20, 45, 66, 72, 78]
    mv = [0, first_mv, 0, 0, 1.0, 0, 0, last_mv, 0]
    return leads_of(time_ms, np.interp(time_ms, at, mv)[None])


def test_an_early_wave_is_where_the_lead_begins() -> None:
    onset, _ = qrs_edges(two_waves(), within_ms=WITHIN_MS)
    assert onset.at_ms == pytest.approx(-56, abs=4)


def test_without_an_early_wave_the_lead_begins_with_its_r() -> None:
    onset, _ = qrs_edges(two_waves(first_mv=0.0), within_ms=WITHIN_MS)
    assert onset.at_ms == pytest.approx(0, abs=4)


def test_a_late_wave_is_where_the_lead_ends() -> None:
    _, early = qrs_edges(two_waves(), within_ms=WITHIN_MS)
    _, late = qrs_edges(two_waves(last_mv=-0.08), within_ms=WITHIN_MS)
    assert early.at_ms == pytest.approx(45, abs=5)
    assert late.at_ms == pytest.approx(78, abs=5)


def one_wave(back_ms: float) -> Leads:
    """A tall R of 40 ms, then a small s that decays with a time constant."""
    time_ms = np.arange(-400.0, 401.0)
    mv = np.interp(time_ms, [-20, 0, 20, 30], [0, 1.0, 0, -0.3])
    mv[time_ms > 30] = -0.3 * np.exp(-(time_ms[time_ms > 30] - 30) / back_ms)
    return leads_of(time_ms, mv[None])


def test_a_slow_end_is_less_sure_than_a_steep_one() -> None:
    steep, slow = (qrs_edges(one_wave(back_ms))[1] for back_ms in (4, 25))
    assert steep.se_ms < 3
    # The s falls to 2, 1 and 0.5 mV/s at 75, 92 and 109 ms: a keen eye and a dull one disagree.
    assert 5 < slow.se_ms < 12
    assert slow.at_ms - slow.se_ms > steep.at_ms


def noisy_end(*, single: bool) -> Edge:
    """Twelve leads of two beats: a triangle of 80 ms, then noise that the beats do not share."""
    rng = np.random.default_rng(5)
    time_ms = np.arange(-400.0, 401.0)
    wave = np.interp(time_ms, [-40, 0, 40], [0, 1.0, 0])
    rough = sp.ndimage.gaussian_filter1d(rng.standard_normal((12, 2, len(time_ms))), 4, axis=2)
    burst = (time_ms > 40) & (time_ms < 120)
    beats = wave + 0.06 * rough * burst
    mean = beats.mean(axis=1)
    return qrs_edges(leads_of(time_ms, mean, single_mv=beats if single else None))[1]


def test_noise_that_two_beats_do_not_share_does_not_prolong_the_qrs() -> None:
    assert noisy_end(single=False).at_ms > 60
    end = noisy_end(single=True)
    assert abs(end.at_ms - 40) < 2 * end.se_ms < 15

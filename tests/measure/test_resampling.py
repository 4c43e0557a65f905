"""Samples of any rate at 500/s: what is known stays, what rang is at rest."""

import numpy as np
import pytest
import scipy as sp

from digitize.tracing import FS_HZ, LEADS
from measure.reading import read
from measure.resampling import resampled
from measure.sources import tracing_from_samples
from tests.measure.open_data import ludb_tracing

_SLOW_HZ = 100.0


def slowed(mv: np.ndarray) -> np.ndarray:
    """(n, leads) at 500/s taken down to 100/s behind a steep filter at 45 Hz, and its noise."""
    filter_taps = sp.signal.firwin(801, 45.0, fs=FS_HZ, window=("kaiser", 9.0))
    slow = sp.ndimage.convolve1d(mv, filter_taps, axis=0, mode="nearest")[::5]
    return slow + 0.003 * np.random.default_rng(7).normal(size=slow.shape)


def pointed_beat() -> tuple[np.ndarray, np.ndarray]:
    """Time in ms and a QRS of straight lines from 0 to 80 ms that rests before and after."""
    time_ms = np.arange(-1000, 1000, 2.0)
    return time_ms, np.interp(time_ms, [0, 10, 25, 50, 80], [0, -0.1, 1.5, -0.5, 0])


def test_a_trace_at_rest_does_not_ring() -> None:
    time_ms, mv = pointed_beat()
    slow = slowed(mv[:, None])[:, 0]
    apart = ((time_ms > -120) & (time_ms < -8)) | ((time_ms > 88) & (time_ms < 200))
    ringing = sp.signal.resample_poly(slow, 5, 1)[apart]
    quiet = resampled(slow, _SLOW_HZ)[apart]
    assert np.abs(ringing).max() > 0.02  # what counts as a deflection (CSE, from memory)
    assert np.abs(quiet).max() < 0.015


def test_the_shape_is_nearer_to_what_it_was() -> None:
    _, mv = pointed_beat()
    slow = slowed(mv[:, None])[:, 0]
    rms = [
        np.sqrt(np.mean((fine - mv) ** 2))
        for fine in (resampled(slow, _SLOW_HZ), sp.signal.resample_poly(slow, 5, 1))
    ]
    assert rms[0] < 0.75 * rms[1]


def test_frequencies_that_were_recorded_stay_as_they_are() -> None:
    slow_s, fine_s = np.arange(500) / _SLOW_HZ, np.arange(2500) / FS_HZ
    wave = [
        0.4 * np.sin(2 * np.pi * 8 * s) + 0.1 * np.cos(2 * np.pi * 31 * s) for s in (slow_s, fine_s)
    ]
    found = resampled(wave[0], _SLOW_HZ)
    np.testing.assert_allclose(found[200:2300], wave[1][200:2300], atol=0.004)


def test_gaps_are_missing_again_and_nothing_else_is() -> None:
    _, mv = pointed_beat()
    slow = slowed(mv[:, None])[:, 0]
    slow[20:24] = np.nan
    missing = np.flatnonzero(np.isnan(resampled(slow, _SLOW_HZ)))
    assert missing.tolist() == list(range(19 * 5 + 1, 24 * 5))


@pytest.mark.parametrize("mv", [np.zeros(300), np.full(300, 0.7), np.linspace(-1, 1, 300)])
def test_a_trace_without_bends_stays_straight(mv: np.ndarray) -> None:
    fine = resampled(mv, _SLOW_HZ)
    # The polyphase filter itself leaves a ripple of a thousandth of the range.
    np.testing.assert_allclose(fine[::5], mv, atol=1e-3)


def test_the_same_rate_is_left_alone() -> None:
    mv = np.array([0.0, np.nan, 0.3])
    np.testing.assert_array_equal(resampled(mv, FS_HZ), mv)


@pytest.mark.parametrize("record", [11, 51, 91, 131, 171])
def test_qrs_is_as_wide_at_a_low_rate_as_at_a_high_one(record: int) -> None:
    """LUDB (doi 10.13026/eegm-h675), recorded at 500/s: each record against itself at 100/s.

    10 ms, one of the slow samples, is what the rate itself leaves open.
    """
    fast = ludb_tracing(record)
    samples = np.stack([fast.lead(lead).mv for lead in LEADS], axis=1)
    slow = tracing_from_samples(slowed(samples), LEADS, _SLOW_HZ, file_name="slow")
    assert read(slow).intervals["qrs_ms"].value == pytest.approx(
        read(fast).intervals["qrs_ms"].value, abs=10
    )

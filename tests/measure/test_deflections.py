"""Waves of a QRS on drawn curves whose shape is known."""

from itertools import pairwise

import numpy as np
import pytest

from measure.deflections import find_deflections, find_notches, letters, smallest

TIME_MS = np.arange(0.0, 121.0)
QUIET = np.full(len(TIME_MS), 0.002)


def bumps(*parts: tuple[float, float, float]) -> np.ndarray:
    """Sum of half sine waves: amplitude in mV, beginning and end in ms."""
    mv = np.zeros(len(TIME_MS))
    for amplitude, start, stop in parts:
        inside = np.abs(TIME_MS - (start + stop) / 2) <= (stop - start) / 2
        mv[inside] += amplitude * np.sin(np.pi * (TIME_MS[inside] - start) / (stop - start))
    return mv


SHAPES = [
    ("R", bumps((1.2, 10, 90))),
    ("qRs", bumps((-0.1, 5, 25), (1.2, 25, 65), (-0.3, 65, 95))),
    ("rS", bumps((0.2, 5, 30), (-1.4, 30, 90))),
    ("QS", bumps((-1.1, 5, 90))),
    ("Qr", bumps((-0.8, 5, 50), (0.3, 50, 90))),
    ("rsR'", bumps((0.2, 0, 25), (-0.4, 25, 55), (0.9, 55, 110))),
    ("rSR's'", bumps((0.2, 0, 20), (-0.9, 20, 50), (0.7, 50, 85), (-0.2, 85, 110))),
]


@pytest.mark.parametrize(("shape", "mv"), SHAPES)
def test_conventional_letters(shape: str, mv: np.ndarray) -> None:
    """Q, R, S by sign and order, small below 0.5 mV (common practice)."""
    assert letters(find_deflections(TIME_MS, mv, QUIET), ()) == shape


@pytest.mark.parametrize(("shape", "mv"), SHAPES)
def test_areas_add_up_and_ends_meet(shape: str, mv: np.ndarray) -> None:
    waves = find_deflections(TIME_MS, mv, QUIET)
    assert sum(w.area_mv_ms for w in waves) == pytest.approx(mv.sum(), abs=0.2)
    for before, after in pairwise(waves):
        assert before.offset_ms == pytest.approx(after.onset_ms, abs=1)


def test_values_of_one_wave() -> None:
    (wave,) = find_deflections(TIME_MS, bumps((1.2, 10, 90)), QUIET)
    assert wave.amplitude_mv == pytest.approx(1.2, abs=0.001)
    assert wave.peak_ms == pytest.approx(50, abs=1)
    assert wave.duration_ms == pytest.approx(80, abs=2)
    # area of a half sine: 2 / pi of amplitude times duration
    assert wave.area_mv_ms == pytest.approx(2 / np.pi * 1.2 * 80, rel=0.005)


@pytest.mark.parametrize(
    ("amplitude_mv", "length_ms", "counts"),
    # CSE working party: a deflection counts from 20 uV and 6 ms (from memory)
    [(0.0215, 12, True), (0.0185, 12, False), (0.05, 8, True), (0.05, 4, False)],
)
def test_the_smallest_q_that_counts(amplitude_mv: float, length_ms: float, counts: bool) -> None:
    mv = bumps((-amplitude_mv, 5, 5 + length_ms), (1.0, 5 + length_ms, 80))
    names = [w.name for w in find_deflections(TIME_MS, mv, QUIET)]
    assert ("Q" in names) is counts


def test_noise_raises_the_smallest_deflection() -> None:
    assert smallest(np.array(0.001)) == 0.02
    assert smallest(np.array(0.02)) == pytest.approx(0.06)
    mv = bumps((-0.04, 5, 25), (1.0, 25, 80))
    noisy = np.full(len(TIME_MS), 0.02)
    assert [w.name for w in find_deflections(TIME_MS, mv, noisy)] == ["R"]


def test_an_st_segment_above_the_baseline_is_no_second_r() -> None:
    """IEC 60601-2-51 annex GG: two opposite slopes and a turning point between (from memory)."""
    mv = bumps((-1.2, 5, 70))
    rising = np.clip((TIME_MS - 70) / 50, 0, 1) * 0.25
    assert letters(find_deflections(TIME_MS, mv + rising, QUIET), ()) == "QS"


def test_a_notched_r_is_one_r_with_a_notch() -> None:
    mv = bumps((1.0, 0, 120)) - bumps((0.5, 45, 75))
    waves = find_deflections(TIME_MS, mv, QUIET)
    notches = find_notches(TIME_MS, mv, QUIET, waves)
    assert [w.name for w in waves] == ["R"]
    assert [n.kind for n in notches] == ["notch"]
    valley = 45 + int(np.argmin(mv[45:76]))
    assert notches[0].peak_ms == pytest.approx(valley, abs=1)
    assert notches[0].onset_ms == pytest.approx(float(np.argmax(mv[:60])), abs=1)
    assert notches[0].depth_mv == pytest.approx(mv[:60].max() - mv[valley], abs=0.01)
    assert notches[0].prominence_se == pytest.approx(notches[0].depth_mv / 0.002, rel=0.01)
    assert letters(waves, notches) == "R, R notched"


def test_a_slurred_r_slows_down_without_turning() -> None:
    """An upstroke in two steps: a shelf between two rises."""
    shelf = np.interp(TIME_MS, [0, 25, 45, 65, 110, 120], [0, 0.6, 0.65, 1.2, 0.0, 0.0])
    shelf = np.convolve(np.pad(shelf, 3, mode="edge"), np.ones(7) / 7, "valid")
    waves = find_deflections(TIME_MS, shelf, QUIET)
    notches = find_notches(TIME_MS, shelf, QUIET, waves)
    assert [n.kind for n in notches] == ["slur"]
    assert 25 <= notches[0].peak_ms <= 45
    assert letters(waves, notches) == "R, R slurred"


def test_a_smooth_wave_has_neither() -> None:
    mv = 1.2 * np.exp(-0.5 * ((TIME_MS - 55) / 14) ** 2)
    waves = find_deflections(TIME_MS, mv, QUIET)
    assert find_notches(TIME_MS, mv, QUIET, waves) == ()


def test_a_dip_within_the_noise_is_no_notch() -> None:
    mv = bumps((1.0, 0, 120)) - bumps((0.5, 45, 75))
    waves = find_deflections(TIME_MS, mv, QUIET)
    noisy = np.full(len(TIME_MS), 0.3)
    assert find_notches(TIME_MS, mv, noisy, waves) == ()

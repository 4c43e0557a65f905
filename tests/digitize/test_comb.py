"""The comb: the spacing behind a set of harmonics, from profiles with peaks put in by hand."""

import numpy as np
import pytest

from digitize.comb import find_comb, trackable

RAY = np.arange(0.006, 0.49, 1 / 2048)  # cycles per pixel


def profile(spacing_px: float, heights: dict[int, float], *, floor: float = 0.5) -> np.ndarray:
    """Peaks of given heights at harmonics of a spacing, as wide as a tile's window makes them."""
    made = np.full(len(RAY), floor)
    for order, height in heights.items():
        made += height * np.exp(-0.5 * ((RAY - order / spacing_px) / 0.003) ** 2)
    return made


@pytest.mark.parametrize("spacing_px", [26.0, 39.4, 59.1])
@pytest.mark.parametrize(
    "heights",
    [
        {1: 20, 2: 18, 3: 16, 4: 14, 5: 40, 6: 10},  # 5 mm lines, and 1 mm lines in the fifth
        {2: 20, 3: 15, 4: 8, 5: 30},  # the first is lost in the shade of the page
        {1: 12, 2: 6, 5: 60},
    ],
    ids=["all", "first missing", "fifth strongest"],
)
def test_spacing_is_that_of_the_first_harmonic(spacing_px, heights):
    comb = find_comb(RAY, profile(spacing_px, heights))
    assert comb is not None
    # A step of the ray at the highest harmonic.
    assert comb.spacing_px == pytest.approx(spacing_px, rel=0.01)


def test_teeth_are_the_heights_of_the_harmonics():
    comb = find_comb(RAY, profile(39.4, {1: 20, 2: 18, 3: 16, 5: 40}))
    assert comb is not None
    np.testing.assert_allclose(comb.teeth[[0, 1, 2, 4]], [20.5, 18.5, 16.5, 40.5], atol=1.0)
    assert comb.teeth[3] < 5


def test_one_peak_is_its_own_spacing():
    comb = find_comb(RAY, profile(8.0, {1: 25}))
    assert comb is not None
    assert comb.spacing_px == pytest.approx(8.0, rel=0.01)


def test_a_peak_that_fits_no_comb_does_not_carry_the_rest_away():
    made = profile(39.4, {1: 20, 2: 18, 3: 16, 5: 40})
    made += 15 * np.exp(-0.5 * ((RAY - 0.0617) / 0.003) ** 2)  # 2.43 times the first
    comb = find_comb(RAY, made)
    assert comb is not None
    assert comb.spacing_px == pytest.approx(39.4, rel=0.01)


def test_what_hardly_stands_out_is_no_peak():
    assert find_comb(RAY, profile(39.4, {1: 3, 5: 4})) is None


@pytest.mark.parametrize(
    ("teeth", "followed"),
    [
        ([20, 18, 16, 14, 40, 10], 5),  # the fifth is there: 1 mm
        ([20, 18, 16, 14, 6, 10], 5),  # faint, but clear
        ([20, 18, 16, 14, 2, 10], 1),  # 5 mm lines alone
        ([8, 18, 16, 0, 0, 0], 2),  # the strongest of the first three
    ],
)
def test_the_finest_lines_that_show_are_followed(teeth, followed):
    assert trackable(np.array([*teeth, 0, 0, 0, 0], float)) == followed

"""The lattice: spacing and direction of ruled lines, drawn as sums of pulses of known phase."""

import numpy as np
import pytest

from digitize.lattice import Lattice, find_lattice

SHAPE = (480, 720)


def ruled(
    px_per_mm: float,
    *,
    tilt_deg: float = 0.0,
    fine: float = 1.0,
    coarse: float = 1.0,
    every_mm: float = 5.0,
    noise: float = 0.0,
    shape: tuple[int, int] = SHAPE,
) -> np.ndarray:
    """Both line families of a tilted paper, about of local strength 1."""
    x_mm, y_mm = paper(px_per_mm, tilt_deg, shape)
    width_mm = 1.5 / px_per_mm

    def lines(mm: np.ndarray, step_mm: float) -> np.ndarray:
        off_mm = (mm / step_mm - np.round(mm / step_mm)) * step_mm
        return np.exp(-0.5 * (off_mm / (width_mm / 2)) ** 2)

    image = sum(fine * lines(v, 1.0) + coarse * lines(v, every_mm) for v in (x_mm, y_mm))
    image = image + np.random.default_rng(1).normal(0, noise, shape)
    image = image - image.mean()
    return (image / image.std()).astype(np.float32)


def paper(
    px_per_mm: float, tilt_deg: float, shape: tuple[int, int] = SHAPE
) -> tuple[np.ndarray, np.ndarray]:
    """x and y in mm of every pixel."""
    y, x = np.mgrid[: shape[0], : shape[1]].astype(float)
    c, s = np.cos(np.deg2rad(tilt_deg)), np.sin(np.deg2rad(tilt_deg))
    return (c * x + s * y) / px_per_mm, (c * y - s * x) / px_per_mm


def found(image: np.ndarray, **known) -> Lattice:
    """The lattice of a picture that has one."""
    lattice = find_lattice(image, **{"factor": 1, "dpi": None, **known})
    assert lattice is not None
    return lattice


@pytest.mark.parametrize("tilt_deg", [0.0, 4.0, -7.0])
@pytest.mark.parametrize("px_per_mm", [6.0, 7.87, 11.3])
def test_carrier_runs_at_the_drawn_frequency(px_per_mm, tilt_deg):
    lattice = found(ruled(px_per_mm, tilt_deg=tilt_deg, noise=0.3))
    x_mm, y_mm = paper(px_per_mm, tilt_deg)
    for phase, mm_per_cycle, truth in (
        (lattice.phase_x, lattice.mm_per_cycle_x, x_mm),
        (lattice.phase_y, lattice.mm_per_cycle_y, y_mm),
    ):
        off_mm = phase * mm_per_cycle - truth
        # The carrier need only stay within half a line of the truth: phase is read against it.
        assert np.ptp(off_mm) < 0.5 * mm_per_cycle


def test_fine_lines_are_followed_where_they_show_and_coarse_ones_where_not():
    both = found(ruled(8.0, fine=0.7))
    assert (both.lines, both.mm_per_cycle_x) == ("1 mm lines", 1.0)
    # The carrier may follow any harmonic of the 5 mm lines: the millimetres are the same.
    coarse = found(ruled(8.0, fine=0.0), dpi=(203.2, 203.2))
    x_mm, _ = paper(8.0, 0.0)
    for row in (0, -1):
        span_mm = np.ptp(coarse.phase_x[row]) * coarse.mm_per_cycle_x
        assert span_mm == pytest.approx(np.ptp(x_mm[row]), abs=1.0)


@pytest.mark.parametrize(("dpi", "mm"), [(508.0, 144.0), (101.6, 720.0)])
def test_the_file_settles_what_a_single_spacing_cannot(dpi, mm):
    # Lines 20 px of the page apart, all alike: 1 mm at 508 dpi, or 5 mm at 101.6 dpi.
    lattice = found(ruled(5.0, coarse=0.0), factor=4, dpi=(dpi, dpi))
    span_mm = float(np.ptp(lattice.phase_x[0])) * lattice.mm_per_cycle_x
    assert span_mm == pytest.approx(mm, rel=0.02)


def test_each_family_has_its_own_spacing_as_on_a_fax():
    # ITU-T T.4: 8.04 pels per mm across, 3.85 lines per mm down.
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]].astype(float)
    image = sum(
        np.exp(-0.5 * (((v / s / 5) - np.round(v / s / 5)) * 5 * s / 0.8) ** 2)
        for v, s in ((x, 8.04), (y, 3.85))
    )
    image = ((image - image.mean()) / image.std()).astype(np.float32)
    lattice = found(image, dpi=(204.0, 98.0))
    across = float(np.ptp(lattice.phase_x[0])) * lattice.mm_per_cycle_x
    down = float(np.ptp(lattice.phase_y[:, 0])) * lattice.mm_per_cycle_y
    assert across == pytest.approx((SHAPE[1] - 1) / 8.04, rel=0.02)
    assert down == pytest.approx((SHAPE[0] - 1) / 3.85, rel=0.02)


def blank() -> np.ndarray:
    return np.zeros(SHAPE, np.float32)


def noise() -> np.ndarray:
    return np.random.default_rng(2).normal(0, 1, SHAPE).astype(np.float32)


def one_family() -> np.ndarray:
    """Lines of writing paper: nothing crosses them."""
    y, _ = np.mgrid[: SHAPE[0], : SHAPE[1]]
    return np.where(y % 56 == 0, 8.0, -0.1).astype(np.float32) + 0.3 * noise()


@pytest.mark.parametrize("picture", [blank, noise, one_family])
def test_what_is_not_ruled_both_ways_has_no_lattice(picture):
    assert find_lattice(picture(), factor=1, dpi=(200.0, 200.0)) is None

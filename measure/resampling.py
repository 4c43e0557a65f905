"""Samples of any rate on the one raster of 500/s, without the ringing of a low rate.

A recording of 100 samples per second holds nothing above 50 Hz, and the filter that took the rest
away left waves of nearly that frequency on either side of every steep part: a few of them, of
20 ms each, look like the beginning and the end of a QRS that is much narrower. What the filter let
pass is kept as it is. What it took away is not known; of all traces that agree with what is known,
the one is taken that bends least: hardly anywhere, and there as sharply as it must, as a trace
does that rests before and after its QRS. Ringing bends everywhere.
"""

from fractions import Fraction

import numpy as np
import scipy as sp

from digitize.tracing import FS_HZ

_PASSED = 0.8  # of half the rate: this much at least a decimation filter passes (common practice)
_ROUNDS = 20  # of the minimisation; more of them change no boundary by a millisecond
_STEP = 4.0  # of the minimisation, in units of what counts as no bend
_LEAST_BEND_MV = 1e-4  # at 500/s, of a resting trace that is stored in steps of 1 uV
_AT_REST = 2.0  # standard deviations of the bends of a resting trace: these cost their square only


def resampled(mv: np.ndarray, fs_hz: float) -> np.ndarray:
    """Return one lead at 500/s; gaps are bridged for the filter and missing again after it.

    Parameters
    ----------
    mv : ndarray, (n,)
        Samples in mV, NaN where one is missing.
    fs_hz : float
        Their number per second.

    References
    ----------
    Least bending: the l1 norm of second differences (Kim et al., SIAM Rev 2009;51:339), squared
    near zero (Huber, Ann Math Stat 1964;35:73), under the constraint of a known lower band (Candes
    and Fernandez-Granda, Commun Pure Appl Math 2014;67:906), by alternating directions.
    """
    ratio = Fraction(FS_HZ / fs_hz).limit_denominator(1000)
    finite = np.isfinite(mv)
    if ratio == 1 or not finite.any():
        return mv.copy()
    index = np.arange(len(mv))
    bridged = np.interp(index, index[finite], mv[finite])
    fine = sp.signal.resample_poly(bridged, ratio.numerator, ratio.denominator, padtype="line")
    at = np.arange(len(fine)) * ratio.denominator / ratio.numerator
    seen = np.interp(at, index, finite) > 1 - 1e-9
    if ratio > 1 and len(fine) > 2:
        fine = _least_bent(fine, _PASSED * fs_hz / 2, seen)
    return np.where(seen, fine, np.nan)


def _least_bent(mv: np.ndarray, passed_hz: float, seen: np.ndarray) -> np.ndarray:
    """The trace with the lower band of `mv`, (n,), that bends least.

    Sines that are 0 at both ends serve as the spectrum, of what is left when the line from the
    first to the last sample is taken off.
    """
    line = np.linspace(mv[0], mv[-1], len(mv))
    size = sp.fft.next_fast_len(len(mv) - 1, real=True) - 1
    about = np.zeros(size)
    about[: len(mv) - 2] = (mv - line)[1:-1]
    spectrum = _sines(about)
    hz = np.arange(1, size + 1) * FS_HZ / (2 * (size + 1))
    known = hz <= passed_hz
    bend = -((2 * np.sin(np.pi * hz / FS_HZ)) ** 2)  # of the sine of each frequency
    bends = _sparsest(spectrum * bend, known, _usual_bend(mv[seen]))
    spectrum[~known] = (bends / bend)[~known]
    return line + np.pad(_sines(spectrum)[: len(mv) - 2], 1)


def _sparsest(spectrum: np.ndarray, known: np.ndarray, at_rest_mv: float) -> np.ndarray:
    """Spectrum of second differences of which few are large, its known part unchanged."""
    step_mv = _STEP * at_rest_mv
    shrink = at_rest_mv / (at_rest_mv + step_mv)
    kept = spectrum[known]
    spectrum = np.where(known, spectrum, 0)
    rest = np.zeros_like(spectrum)
    for _ in range(_ROUNDS):
        wanted = _sines(spectrum) + rest
        small = np.abs(wanted) <= at_rest_mv + step_mv
        bends = np.where(small, shrink * wanted, wanted - np.copysign(step_mv, wanted))
        rest = wanted - bends
        spectrum = _sines(bends - rest)
        spectrum[known] = kept
    return spectrum


def _sines(values: np.ndarray) -> np.ndarray:
    """Values to their spectrum and back: the transform is its own inverse."""
    return sp.fft.dst(values, type=1, norm="ortho")


def _usual_bend(mv: np.ndarray) -> float:
    """Second difference in mV that a trace at rest seldom exceeds."""
    usual = float(np.median(np.abs(np.diff(mv, 2)))) if len(mv) > 2 else 0.0
    return max(_AT_REST * usual / 0.6745, _LEAST_BEND_MV)

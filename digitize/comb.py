"""The comb of harmonics in one spectrum: the longest spacing that explains its peaks.

A ruled line family makes peaks at whole multiples of one frequency. 1, 2, 2.5, 5 and 10 mm all
explain some of the same peaks, so spacings are judged on all peaks at once: what they explain, and
which of the harmonics that they promise are there.
"""

from dataclasses import dataclass

import numpy as np
import skimage as ski

CLEAR = 5.0  # a peak counts from this many times the usual spectrum
TOOTH = 0.12  # a harmonic is there from this share of the strongest peak


@dataclass(frozen=True, eq=False)
class Comb:
    """A spacing in pixels, how well it explains the peaks, and the heights of ten harmonics."""

    spacing_px: float
    score: float
    teeth: np.ndarray


def find_comb(ray: np.ndarray, profile: np.ndarray) -> Comb | None:
    """Return the longest spacing whose harmonics explain the peaks of one profile.

    Parameters
    ----------
    ray : (n,) float array
        Frequencies in cycles per pixel, evenly spaced.
    profile : (n,) float array
        Height of the spectrum there, in units of its usual level.
    """
    # not `scipy.signal`: with the statistics that it imports it costs a page half a second
    at = ski.feature.peak_local_max(profile, threshold_abs=CLEAR, exclude_border=False)[:, 0]
    at.sort()
    if len(at) == 0:
        return None
    at = at[profile[at] > 0.04 * profile[at].max()]
    peak_hz, peak = ray[at], profile[at]
    spacing = np.geomspace(2.6, 75, 700)[:, None]
    order = peak_hz * spacing
    nearest = np.round(order)
    fits = (np.abs(order - nearest) / spacing < 0.0022 + 0.004 * peak_hz) & (nearest > 0)
    explained = (fits * peak).sum(axis=1) / peak.sum()
    claimed = np.arange(1, 11)
    strong = fits & (peak > TOOTH * peak.max())
    hit = (nearest[:, None, :] == claimed[:, None]) & strong[:, None, :]
    possible = claimed <= np.maximum(0.45 * spacing, 1)
    importance = possible / np.sqrt(claimed)
    share = (hit.any(axis=2) * importance).sum(axis=1) / importance.sum(axis=1)
    best = int(np.argmax(explained + 0.8 * share))
    score = float(explained[best] + 0.8 * share[best]) * float(np.log(peak / CLEAR * np.e).sum())
    refined = _refine_spacing(float(spacing[best, 0]), peak_hz, peak)
    teeth_hz = np.arange(1, 11) / refined
    teeth = np.array(
        [profile[np.abs(ray - hz) < 0.003].max() if hz < 0.485 else 0.0 for hz in teeth_hz]
    )
    return Comb(refined, score, teeth)


def trackable(teeth: np.ndarray) -> int:
    """Return which harmonic of 5 mm lines to follow: that of the 1 mm lines where it shows."""
    if teeth[4] >= max(0.25 * teeth[:6].max(), CLEAR):
        return 5
    return 1 + int(np.argmax(teeth[:3]))


def _refine_spacing(spacing: float, peak_hz: np.ndarray, weight: np.ndarray) -> float:
    """Weighted least squares of the peaks against their order."""
    order = np.round(peak_hz * spacing)
    fits = (np.abs(peak_hz * spacing - order) / spacing < 0.004) & (order > 0)
    if not fits.any():
        return spacing
    w, k, f = weight[fits], order[fits], peak_hz[fits]
    return float(np.sum(w * k * k) / np.sum(w * k * f))

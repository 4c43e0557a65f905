"""The pen of a page: width of the nib, blur of its ink, density of a full stroke.

Across a level stretch the ink's profile is a box as wide as the nib, blurred. The profiles of all
level stretches of a page, laid upon one another by the middle of the ink, show it far more finely
than one column of pixels does.
"""

import numpy as np
import scipy as sp

from digitize.ink import Ink
from digitize.pen import Pen
from digitize.ways import Way

_USUAL_MM = 0.35  # common practice; where no stretch is level
_LEVEL = 0.15  # slope, rows per column, below which the stroke is as thick as the nib to 1 %
_REACH_MM = 0.9
_PER_PX = 4
_ENOUGH = 20  # pixels in one bin of the profile


def find_pen(ink: Ink, ways: tuple[Way, ...]) -> Pen:
    """Estimate the pen from the profile of the ink across level stretches.

    Parameters
    ----------
    ink : Ink
    ways : tuple of Way
        Where the traces run.

    Returns
    -------
    Pen
        In pixels of the ink's raster; blur across is taken equal to blur down.
    """
    px = ink.raster.px_per_mm
    half = max(round(_REACH_MM * px), 4)
    bins = (2 * half + 1) * _PER_PX
    total, count = np.zeros(bins), np.zeros(bins)
    for way in ways:
        cols, middle = _level_columns(way)
        rows = np.rint(middle).astype(int)
        inside = (rows > half) & (rows < len(ink.density) - half - 1)
        cols, rows, middle = cols[inside], rows[inside], middle[inside]
        at = rows[:, None] + np.arange(-half, half + 1)
        away = at - middle[:, None]
        place = np.clip(((away + half + 0.5) * _PER_PX).astype(int), 0, bins - 1)
        density = ink.density[at, way.col0 + cols[:, None]]
        total += np.bincount(place.ravel(), density.ravel(), bins)
        count += np.bincount(place.ravel(), minlength=bins)
    away = (np.arange(bins) + 0.5) / _PER_PX - half - 0.5
    used = count > _ENOUGH
    if used.sum() < 4 * _PER_PX:
        return Pen(_USUAL_MM * px, 0.07 * px, 0.07 * px)
    return _match(away[used], total[used] / count[used], px)


def _level_columns(way: Way) -> tuple[np.ndarray, np.ndarray]:
    """Columns where the trace is level and alone, and the middle of its ink there."""
    middle = way.edges.mean(axis=0)
    thick = way.edges[1] - way.edges[0]
    usable = np.isfinite(middle) & ~way.shared
    if usable.sum() < 10:
        return np.zeros(0, int), np.zeros(0)
    slope = np.where(usable, np.abs(np.gradient(np.where(usable, middle, 0))), 9)
    level = sp.ndimage.maximum_filter1d(slope, 7) < _LEVEL
    level &= np.where(usable, thick, 99) < 1.3 * np.median(thick[usable])
    cols = np.flatnonzero(level)
    return cols, middle[cols]


def _match(away: np.ndarray, profile: np.ndarray, px_per_mm: float) -> Pen:
    def misfit(values: np.ndarray) -> np.ndarray:
        width, blur, gain = values
        return (
            gain
            * (
                sp.special.ndtr((away + width / 2) / blur)
                - sp.special.ndtr((away - width / 2) / blur)
            )
            - profile
        )

    low, high = (0.1 * px_per_mm, 0.3, 0.5), (1.0 * px_per_mm, 0.5 * px_per_mm, 1.5)
    start = np.clip((_USUAL_MM * px_per_mm, 0.8, 1.0), low, high)
    width, blur, gain = sp.optimize.least_squares(misfit, start, bounds=(low, high)).x
    return Pen(float(width), float(blur), float(blur), float(gain))

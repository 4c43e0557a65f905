"""How the traces of a page lie: along it or down it, and how far off level, from the ink alone.

Pens leave short runs of ink across their way. Sheared by the right slope the middles of level runs
gather on few heights, where the traces spend their time, and those of upright strokes on few
places: rows show the same instant, so QRS complexes stand above one another, as do calibration
marks and separators (both are Radon transforms). Baselines wander, upright strokes do not: they
are heard first.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import scipy as sp

STEEPEST = 0.09  # 5 degrees
THICKEST = 1 / 100  # of the page: longer runs are no pen's line seen across
MOST_RUNS = 60_000
FEWEST_RUNS = 100
FIRST_STEP, LAST_STEP = 2e-3, 1e-4
UPRIGHT_MM = 2.5  # of ink straight up: letters are smaller
STANDS_OUT = 1.25  # best slope over the usual one


@dataclass(frozen=True)
class Lie:
    """Clockwise tilt of the paper in radians, and whether the traces run down the page."""

    tilt: float
    sideways: bool


def find_lie(inked: np.ndarray, px_per_mm: float) -> Lie:
    """Return how the traces of a page lie.

    Parameters
    ----------
    inked : (rows, cols) uint8 array
        1 where there is ink, pixels square.
    px_per_mm : float
    """
    level = _short_runs(inked)
    sideways = _clearness(_short_runs(inked.T)) > _clearness(level)
    if sideways:
        inked = np.ascontiguousarray(inked.T)
        level = _short_runs(inked)
    tall = np.ones((round(UPRIGHT_MM * px_per_mm), 1), np.uint8)
    upright = _short_runs(cv2.morphologyEx(inked, cv2.MORPH_OPEN, tall).T)
    across, over = _best_slope(upright)
    # An upright stroke leans against the tilt: x falls where a level line's y rises.
    slope = -across if over > STANDS_OUT else _best_slope(level)[0]
    return Lie(float(np.arctan(-slope if sideways else slope)), sideways)


def _short_runs(inked: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Middles of the short runs of ink on columns: column, row; evenly thinned out."""
    padded = np.pad(inked.astype(np.int8), ((1, 1), (0, 0)))
    change = np.diff(padded, axis=0).T
    col, first = np.nonzero(change == 1)
    last = np.nonzero(change == -1)[1]
    short = last - first <= max(3, THICKEST * inked.shape[0])
    col, row = col[short], (first + last)[short] / 2 - 0.5
    every = max(1, len(col) // MOST_RUNS)
    return col[::every].astype(float), row[::every]


def _clearness(runs: tuple[np.ndarray, np.ndarray]) -> float:
    """How clearly runs gather at their best slope."""
    return _gathered(runs, _best_slope(runs)[0])


def _best_slope(runs: tuple[np.ndarray, np.ndarray]) -> tuple[float, float]:
    """The slope at which runs gather most, and how much more than at the usual slope."""
    if len(runs[0]) < FEWEST_RUNS:
        return 0.0, 0.0
    slopes = np.arange(-STEEPEST, STEEPEST + FIRST_STEP / 2, FIRST_STEP)
    gathered = np.array([_gathered(runs, slope, bin_px=3.0) for slope in slopes])
    best, step = float(slopes[np.argmax(gathered)]), FIRST_STEP
    if abs(best) > STEEPEST - FIRST_STEP:  # it rises beyond the end: the slope of something else
        return 0.0, 0.0
    while step > LAST_STEP:
        near = best + np.arange(-5, 6) * step / 4
        step /= 4
        best = float(near[np.argmax([_gathered(runs, slope) for slope in near])])
    usual = np.median([_gathered(runs, slope) for slope in slopes[::5]])
    return best, _gathered(runs, best) / float(usual)


def _gathered(runs: tuple[np.ndarray, np.ndarray], slope: float, bin_px: float = 1.5) -> float:
    """How unevenly the sheared runs are spread: 1 for an even spread."""
    if len(runs[0]) < FEWEST_RUNS:
        return 0.0
    place = runs[1] - slope * runs[0]
    count, _ = np.histogram(place, np.arange(place.min(), place.max() + 2 * bin_px, bin_px))
    smooth = sp.ndimage.gaussian_filter1d(count.astype(float), 1.0)
    return float(np.mean(smooth**2) / max(np.mean(smooth) ** 2, 1e-9))

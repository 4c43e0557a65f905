"""How far the traces of a page are off level, from its ink alone.

Pens leave short runs of ink on every column. Sheared by the right slope, the middles of these runs
gather on few heights, where the traces spend their time (a Radon transform of the baselines).
"""

from dataclasses import dataclass

import numpy as np
import scipy as sp

STEEPEST = 0.09  # 5 degrees
THICKEST = 1 / 100  # of the page's height: longer runs are flanks, letters, bars
MOST_RUNS = 60_000
FIRST_STEP, LAST_STEP = 2e-3, 1e-4
BIN_PX = 1.0


@dataclass(frozen=True)
class Slope:
    """Rows down per column along the traces, and how clearly they gather on few heights."""

    rows_per_col: float
    clearness: float


def find_slope(inked: np.ndarray) -> Slope:
    """Return the slope of the traces of a page, which run from left to right.

    Parameters
    ----------
    inked : (rows, cols) array of bool or 0 and 1
    """
    x, y = _short_runs(inked)
    if len(x) < 100:
        return Slope(0.0, 0.0)
    best, reach, step = 0.0, STEEPEST, FIRST_STEP
    while step >= LAST_STEP:
        slopes = best + np.arange(-reach, reach + step / 2, step)
        # A coarse step blurs what a fine one sees: bins as wide as the page moves in one step.
        bin_px = max(BIN_PX, step * inked.shape[1] / 4)
        gathered = np.array([_gathered(x, y, slope, bin_px) for slope in slopes])
        best, reach, step = float(slopes[np.argmax(gathered)]), 2 * step, step / 4
    return Slope(best, _gathered(x, y, best, BIN_PX))


def _short_runs(inked: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Middles (x, y) of the short runs of ink on columns, evenly thinned out."""
    padded = np.pad(inked.astype(np.int8), ((1, 1), (0, 0)))
    change = np.diff(padded, axis=0)
    first_x, first = np.nonzero(change.T == 1)
    _, last = np.nonzero(change.T == -1)
    short = last - first <= max(3, THICKEST * inked.shape[0])
    x, y = first_x[short], (first + last)[short] / 2 - 0.5
    every = max(1, len(x) // MOST_RUNS)
    return x[::every].astype(float), y[::every]


def _gathered(x: np.ndarray, y: np.ndarray, slope: float, bin_px: float) -> float:
    """How unevenly the runs are spread over heights: 1 for an even spread."""
    height = y - slope * x
    count, _ = np.histogram(height, np.arange(height.min(), height.max() + 2 * bin_px, bin_px))
    smooth = sp.ndimage.gaussian_filter1d(count.astype(float), 1.0)
    return float(np.mean(smooth**2) / max(np.mean(smooth) ** 2, 1e-9))

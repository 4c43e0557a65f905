"""Where a thin line leaves no ink on a black and white page: between two rows of pixels.

A pixel of such a page is black where the stroke covers enough of it. A stroke thinner than a row of
pixels does so only while it runs near the middle of one; on its way from one row to the next it
fades away. But it cannot pass the middle of a row without a trace: where the ink ends and goes on
in the same row, or in the next, the line in between stayed between the two.
"""

from itertools import pairwise

import numpy as np

from digitize.ink import Ink
from digitize.ways import Way

_THIN_ROWS = 1.6  # thicker ink covers one row or another wherever it runs
_SAME_ROWS = 0.5  # distance of two ends in the same row or in neighbouring ones, and some blur
_LONGEST_MM = 12.5  # rule of thumb: half a second at 25 mm/s; a longer one may be a pen that lifted
SE_ROWS = 12**-0.5  # of a place anywhere between two rows, the standard deviation


def between_rows(way: Way, ink: Ink) -> np.ndarray:
    """Return the height of a line where it faded between two rows of the page's own pixels.

    Parameters
    ----------
    way : Way
    ink : Ink

    Returns
    -------
    (cols,) float array
        Rows of the ink's raster in each column of the way; NaN where there is ink, and where its
        absence says nothing.
    """
    height = np.full(way.edges.shape[1], np.nan)
    row_px = ink.raster.px_per_mm / ink.source_px_per_mm[1]
    cols = np.flatnonzero(np.isfinite(way.edges).all(axis=0))
    if not ink.bilevel or not len(cols):
        return height
    thick = way.edges[1, cols] - way.edges[0, cols]
    if np.quantile(thick, 0.25) > _THIN_ROWS * row_px:  # of level stretches; flanks are tall
        return height
    longest = _LONGEST_MM * ink.raster.px_per_mm
    for before, after in pairwise(cols):
        if not 1 < after - before < longest:
            continue
        (top, bottom), ends = _between(way.edges[:, before], way.edges[:, after])
        if top - bottom > _SAME_ROWS * row_px:
            continue
        slack = 0.5 * row_px
        ends = np.clip(ends, min(top, bottom) - slack, max(top, bottom) + slack)
        height[before + 1 : after] = np.interp(np.arange(before + 1, after), (before, after), ends)
    return height


def row_error_px(ink: Ink) -> float:
    """Return the standard error of a height between two rows, in rows of the ink's raster."""
    return SE_ROWS * ink.raster.px_per_mm / ink.source_px_per_mm[1]


def _between(one: np.ndarray, other: np.ndarray) -> tuple[tuple[float, float], np.ndarray]:
    """Lower of two tops and upper of two bottoms, and the middles of the two runs."""
    common = max(one[0], other[0]), min(one[1], other[1])
    return common, np.array([one.mean(), other.mean()])

"""The scale of a page without grid, from two places whose distance a person knows."""

import math
from collections.abc import Sequence

from digitize.errors import NoGrid

_LEAST_PX = 20.0  # a click is sure to about two pixels: a tenth of this


def scale_from(
    points: Sequence[Sequence[float]], mm: float, dpi: tuple[float, float] | None
) -> tuple[float, float]:
    """Return pixels per mm across and down.

    Parameters
    ----------
    points : two pairs (x, y)
        In pixels of the page.
    mm : float
        Their distance on the paper.
    dpi : (float, float), optional
        Across and down, of which the ratio alone is used: pixels of a fax are not square.

    Raises
    ------
    NoGrid
        The points are too close, or the distance is none.
    """
    (x0, y0), (x1, y1) = points
    ratio = dpi[0] / dpi[1] if dpi else 1.0
    distance_px = math.hypot(x1 - x0, (y1 - y0) * ratio)  # in pixels as they lie across
    if not (math.isfinite(distance_px) and distance_px >= _LEAST_PX):
        raise NoGrid("the two places are too close to give a scale: take them farther apart")
    if not (math.isfinite(mm) and 1 <= mm <= 1000):
        raise NoGrid("give the distance in millimetres, 1 to 1000")
    across = distance_px / mm
    return across, across / ratio

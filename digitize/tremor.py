"""What trembles under the nib: shaking of the trace that is faster than the pen is wide.

Of such shaking only the range is printed: the stroke is thicker, up and down, than the pen that
drew it. A line that had to fill this stroke with its own nib would zigzag inside it at a pace of
its own; so the stroke is drawn thicker where the ink is, the line keeps to its middle, and the
range tells how far from there the samples may be.
"""

import numpy as np
import scipy as sp

from digitize.pen import Pen, envelope
from digitize.ways import EDGE, Way

_STRETCH_MM = 6.0  # longer than two QRS complexes: the median over it is not moved by one
_SMOOTH_MM = 0.15  # standard deviation of what a slope is taken over: about half a nib
_LEVEL = 1.0  # slope up to which thickness down tells of tremor
_SURE_MM = 0.02  # edges of ink are no surer than this
_FEWEST = 20  # level columns
_TOUCHES = 0.3  # of an edge's weight, below which a node does not hold it
_HIDDEN_POWER = 2.5  # two independent shakings, and some for nodes that are hidden in part


def tremor(way: Way, x: np.ndarray, pen: Pen, px_per_mm: float) -> np.ndarray:
    """How far each edge of a stroke stands out for tremor, in rows, at some columns.

    Parameters
    ----------
    way : Way
        The edges of the stroke.
    x : (n,) float array
        Columns of the raster.
    pen : Pen
        Its own width is taken off, along the slope.
    """
    alone = np.isfinite(way.edges[0]) & ~way.shared
    if not alone.any():
        return np.zeros(len(x))
    cols = np.arange(len(alone))
    top, bottom = (np.interp(cols, cols[alone], side[alone]) for side in way.edges)
    middle = sp.ndimage.gaussian_filter1d(0.5 * (top + bottom), _SMOOTH_MM * px_per_mm)
    slope = np.gradient(middle)
    use = np.flatnonzero(alone & (np.abs(slope) < _LEVEL))
    if len(use) < _FEWEST:
        return np.zeros(len(x))
    own = _seen_width(pen) * np.sqrt(1 + slope[use] ** 2)
    stretch = 2 * round(_STRETCH_MM * px_per_mm / 2) + 1
    excess = sp.ndimage.median_filter((bottom - top)[use] - own, stretch, mode="nearest")
    half = np.interp(x, way.col0 + use, excess) / 2
    return np.maximum(half - _SURE_MM * px_per_mm, 0)


def _seen_width(pen: Pen) -> float:
    """Thickness of a level stroke between the places where its density crosses `EDGE`."""
    half = np.linspace(0, pen.width_px + 4 * pen.blur_y_px, 400)
    high = sp.special.ndtr((half + pen.width_px / 2) / pen.blur_y_px)
    density = pen.gain * (high - sp.special.ndtr((half - pen.width_px / 2) / pen.blur_y_px))
    return 2 * float(np.interp(-EDGE, -density, half))


def unsure_of_tremor(
    way: Way, x: np.ndarray, y: np.ndarray, pen: Pen, px_per_mm: float
) -> np.ndarray:
    """Standard deviation, in rows, of what trembles under the nib at each node.

    Where a trace shakes faster than the nib is wide, only the envelope of the shaking is printed.
    Ink thicker than the line draws it tells its range: about ten nodes lie under a nib, and the
    range of ten normal deviates is three standard deviations. Where the line itself shakes to
    fill the ink, it does so with the right strength, but nodes that touch neither edge of the ink
    could as well stand elsewhere: they are wrong by the power of two independent shakings.
    """
    step = x[1] - x[0]
    under = 2 * max(round(pen.width_px / step / 2), 1) + 1
    shaking = np.abs(y - sp.ndimage.uniform_filter1d(y, under, mode="nearest"))
    stretch = 2 * round(_STRETCH_MM * px_per_mm / step / 2) + 1
    usual = 1.4826 * sp.ndimage.median_filter(shaking, stretch, mode="nearest")
    edge, node, share = envelope(y, step, pen.width_px / 2, 0)
    touching = np.zeros(len(y))
    for side in range(2):
        np.add.at(touching, node[side], 1 - share[side])
        np.add.at(touching, node[side] + 1, share[side])
    hidden = sp.ndimage.uniform_filter1d((touching < _TOUCHES).astype(float), 2 * under - 1)
    misplaced = _HIDDEN_POWER**0.5 * np.sqrt(hidden) * usual
    cols = way.col0 + np.arange(way.edges.shape[1])
    seen = np.isfinite(way.edges[0]) & ~way.shared
    if not seen.any():
        return misplaced
    thick = np.interp(x, cols[seen], (way.edges[1] - way.edges[0])[seen])
    excess = sp.ndimage.median_filter(thick - (edge[1] - edge[0]), 2 * under + 1, mode="nearest")
    return np.hypot(misplaced, np.maximum(excess, 0) / 3)

"""What was printed over the grid: optical density of trace, text and marks."""

from dataclasses import dataclass

import numpy as np

from digitize.sheet import Raster


@dataclass(frozen=True, eq=False)
class Ink:
    """Ink on the sheet, the grid taken away.

    `density` is float32, (rows, cols): 0 on bare or ruled paper, about 1 in the middle of a full
    stroke of the pen (scaled so), noise may be negative. `hidden` is True where the paper cannot be
    seen (outside the page, punch hole, finger). `noise` is the standard deviation of `density` on
    bare paper.
    """

    density: np.ndarray
    hidden: np.ndarray
    raster: Raster
    noise: float

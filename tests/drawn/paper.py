"""The ruled sheet: how much grid ink lies on each pixel of a millimetre raster."""

import numpy as np

from digitize.sheet import Raster
from tests.drawn.spec import PaperSpec


def draw_grid(paper: PaperSpec, raster: Raster, shape: tuple[int, int]) -> np.ndarray:
    """Return the amount of grid ink, float32 of `shape`, 1 for the full grid colour."""
    if paper.grid == "none":
        return np.zeros(shape, np.float32)
    x_mm, y_mm = raster.x_mm(np.arange(shape[1])), raster.y_mm(np.arange(shape[0]))
    half_mm = 0.5 / raster.px_per_mm
    fine_x, fine_y = (_lines(at, 1.0, paper.fine_mm, half_mm) for at in (x_mm, y_mm))
    coarse_x, coarse_y = (_lines(at, 5.0, paper.coarse_mm, half_mm) for at in (x_mm, y_mm))
    ink = paper.coarse_amount * np.maximum(coarse_x[None, :], coarse_y[:, None])
    if paper.grid == "lines":
        ink = np.maximum(ink, paper.fine_amount * np.maximum(fine_x[None, :], fine_y[:, None]))
    elif paper.grid == "dots":  # a dot at every crossing of 1 mm lines
        ink = np.maximum(ink, paper.fine_amount * np.minimum(fine_x[None, :], fine_y[:, None]))
    elif paper.grid == "dotted":  # 5 mm lines made of dots 1 mm apart
        on_row = np.minimum(fine_x[None, :], coarse_y[:, None])
        on_col = np.minimum(coarse_x[None, :], fine_y[:, None])
        ink = paper.coarse_amount * np.maximum(on_row, on_col)
    if paper.frame_mm is not None:
        left, top, right, bottom = paper.frame_mm
        edge = paper.coarse_mm / 2
        inside_x = (x_mm >= left - edge) & (x_mm <= right + edge)
        inside_y = (y_mm >= top - edge) & (y_mm <= bottom + edge)
        ink *= inside_y[:, None] & inside_x[None, :]
    return ink.astype(np.float32)


def _lines(at_mm: np.ndarray, period_mm: float, width_mm: float, half_mm: float) -> np.ndarray:
    """Share of each pixel (centre `at_mm`, half-width `half_mm`) under lines of a period."""
    off_mm = np.abs((at_mm + period_mm / 2) % period_mm - period_mm / 2)
    inner = np.minimum(off_mm + half_mm, width_mm / 2) - np.maximum(off_mm - half_mm, -width_mm / 2)
    return np.clip(inner / (2 * half_mm), 0, 1).astype(np.float32)

"""The page flattened onto a square millimetre raster."""

from dataclasses import dataclass
from typing import TypeVar

import cv2
import numpy as np

from digitize.errors import PoorResolution
from digitize.grid import Grid
from digitize.pages import Page

MARGIN_MM = 32.0  # printing around the ruled area that belongs to the ECG: run, names of leads
NODE_PX = 8  # the map is computed on every so many pixels and interpolated between
MIN_PX_PER_MM = 2.8


Places = TypeVar("Places", float, np.ndarray)


@dataclass(frozen=True)
class Raster:
    """A square raster of the paper: `x_mm(col)`, `y_mm(row)` are the centres of its pixels.

    x runs to the right, y downward, both in millimetres of paper; the grid's 1 mm lines stand at
    whole numbers.
    """

    left_mm: float  # x of the centre of column 0
    top_mm: float  # y of the centre of row 0
    px_per_mm: float

    def col(self, x_mm: Places) -> Places:
        """Column (float) of a place x_mm; a number or an array."""
        return (x_mm - self.left_mm) * self.px_per_mm

    def row(self, y_mm: Places) -> Places:
        """Row (float) of a place y_mm; a number or an array."""
        return (y_mm - self.top_mm) * self.px_per_mm

    def x_mm(self, col: Places) -> Places:
        """Place x in millimetres of a column; a number or an array."""
        return self.left_mm + col / self.px_per_mm

    def y_mm(self, row: Places) -> Places:
        """Place y in millimetres of a row; a number or an array."""
        return self.top_mm + row / self.px_per_mm


@dataclass(frozen=True)
class Box:
    """A rectangle on the paper, in millimetres, y downward."""

    left_mm: float
    top_mm: float
    right_mm: float
    bottom_mm: float


@dataclass(frozen=True, eq=False)
class Sheet:
    """The page on a millimetre raster.

    `pixels` is uint8, (rows, cols) or (rows, cols, 3); `inside` is a bool mask, False where the
    raster lies outside the photographed or scanned page. `ruled_mm` is where grid lines were seen
    (left, top, right, bottom); `source_px_per_mm` says how fine the page itself was, across and
    down, and `bilevel` whether it had black and white alone.
    """

    pixels: np.ndarray
    inside: np.ndarray
    raster: Raster
    ruled_mm: tuple[float, float, float, float]
    source_px_per_mm: tuple[float, float]
    bilevel: bool = False


def flatten(page: Page, grid: Grid) -> Sheet:
    """Return the page resampled onto square millimetre paper.

    The raster has 10 pixels per millimetre for a page of 10 or more, else 8: about as fine as the
    page where that is coarse, so that nothing is lost, and no finer than a pen needs.

    Raises
    ------
    PoorResolution
        The page has too few pixels per millimetre to be measured.
    """
    native = grid.px_per_mm
    if max(native) < MIN_PX_PER_MM or min(native) < MIN_PX_PER_MM / 2:
        raise PoorResolution(
            f"only {min(native):.1f} pixels per millimetre of paper, "
            f"at least {MIN_PX_PER_MM:.1f} are needed; rescan at 150 dpi or more"
        )
    px_per_mm = 10.0 if max(native) >= 10 else 8.0
    pixels, factor = page.pixels, max(1, int(min(native) / px_per_mm + 0.25))
    if factor > 1:
        rows, cols = (n // factor for n in pixels.shape[:2])
        cut = pixels[: rows * factor, : cols * factor]
        pixels = cv2.resize(cut, (cols, rows), interpolation=cv2.INTER_AREA)
    left, top, right, bottom = _frame(grid)
    shape = (round((bottom - top) * px_per_mm), round((right - left) * px_per_mm))
    raster = Raster(left + 0.5 / px_per_mm, top + 0.5 / px_per_mm, px_per_mm)
    map_x, map_y = _pixel_maps(grid, raster, shape)
    rows, cols = page.pixels.shape[:2]
    inside = (map_x > -0.5) & (map_x < cols - 0.5) & (map_y > -0.5) & (map_y < rows - 0.5)
    map_x = (map_x + 0.5) / factor - 0.5
    map_y = (map_y + 0.5) / factor - 0.5
    flat = cv2.remap(pixels, map_x, map_y, cv2.INTER_CUBIC, borderMode=cv2.BORDER_REPLICATE)
    return Sheet(flat, inside, raster, grid.ruled_mm, native, page.bilevel)


def _frame(grid: Grid) -> tuple[float, float, float, float]:
    """The part of the paper to flatten: ruled area and margin, no more than the page, whole mm."""
    left, top, right, bottom = grid.ruled_mm
    x0, y0, x1, y1 = grid.page_map.extent_mm
    return (
        float(np.floor(max(left - MARGIN_MM, x0))),
        float(np.floor(max(top - MARGIN_MM, y0))),
        float(np.ceil(min(right + MARGIN_MM, x1))),
        float(np.ceil(min(bottom + MARGIN_MM, y1))),
    )


def _pixel_maps(
    grid: Grid, raster: Raster, shape: tuple[int, int]
) -> tuple[np.ndarray, np.ndarray]:
    """Page coordinates (x, y) of each raster pixel, float32, interpolated between nodes."""
    rows, cols = (n // NODE_PX + 2 for n in shape)
    x = raster.x_mm(np.arange(cols) * NODE_PX + NODE_PX / 2 - 0.5)
    y = raster.y_mm(np.arange(rows) * NODE_PX + NODE_PX / 2 - 0.5)
    nodes = grid.page_map.to_px(*np.meshgrid(x, y))
    full = (cols * NODE_PX, rows * NODE_PX)
    maps = []
    for node in nodes:
        # Linear interpolation to the borders too: half a cell beyond the outer nodes is not used
        # on the far side, and extrapolated on the near side by mirroring the slope.
        padded = np.pad(node, 1, mode="reflect", reflect_type="odd").astype(np.float32)
        big = cv2.resize(
            padded, (full[0] + 2 * NODE_PX, full[1] + 2 * NODE_PX), interpolation=cv2.INTER_LINEAR
        )
        maps.append(big[NODE_PX : NODE_PX + shape[0], NODE_PX : NODE_PX + shape[1]].copy())
    return maps[0], maps[1]

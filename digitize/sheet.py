"""The page flattened onto a square millimetre raster."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, eq=False)
class Raster:
    """A square raster of the paper: pixel (row, col) has its centre at `mm(row, col)`.

    x runs to the right, y downward, both in millimetres of paper; the grid's 1 mm lines stand at
    whole numbers.
    """

    left_mm: float  # x of the centre of column 0
    top_mm: float  # y of the centre of row 0
    px_per_mm: float

    def col(self, x_mm):
        """Column (float) of a place x_mm."""
        return (x_mm - self.left_mm) * self.px_per_mm

    def row(self, y_mm):
        """Row (float) of a place y_mm."""
        return (y_mm - self.top_mm) * self.px_per_mm

    def x_mm(self, col):
        """Place x in millimetres of a column."""
        return self.left_mm + col / self.px_per_mm

    def y_mm(self, row):
        """Place y in millimetres of a row."""
        return self.top_mm + row / self.px_per_mm


@dataclass(frozen=True, eq=False)
class Sheet:
    """The page on a millimetre raster.

    `pixels` is uint8, (rows, cols) or (rows, cols, 3); `inside` is a bool mask, False where the
    raster lies outside the photographed or scanned page.
    """

    pixels: np.ndarray
    inside: np.ndarray
    raster: Raster

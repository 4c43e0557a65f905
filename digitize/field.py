"""The page as a trace finds it: where going is cheap, and the cheapest way between two places."""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.path import cheapest_path
from digitize.sheet import Raster

INKED = 0.4  # bareness below which a pixel counts as ink
_PX_PER_MM = 6.0  # two pixels across the thinnest common pen are enough for a path
_FAINT, _FULL = 0.15, 0.6  # densities of bare paper and of certain ink
_WALL = 5.0  # bareness of an anchored column away from the anchor
_TAKEN = 0.7  # bareness of ink that another trace needs: it may be crossed, not followed
_NEVER = 1e4
_PEN_MM = 0.4  # usual thickness of a level trace; common practice


@dataclass(frozen=True, eq=False)
class Field:
    """Bareness of the paper, 0 in full ink and 1 where there is none, at coarse resolution.

    `bare` is (rows, cols) float32; `y_mm` (rows,) and `x_mm` (cols,) are the places of its pixels;
    `pen_mm` is the thickness of a level trace.
    """

    bare: np.ndarray
    y_mm: np.ndarray
    x_mm: np.ndarray
    px_per_mm: float
    pen_mm: float = _PEN_MM


@dataclass(frozen=True, eq=False)
class Path:
    """First and last row, (2, cols), that a path visits in each column from `left` on."""

    left: int
    span: np.ndarray

    @property
    def right(self) -> int:
        """Column after the last."""
        return self.left + self.span.shape[1]

    def cut(self, start: int, stop: int) -> np.ndarray:
        """Rows visited in columns from `start` to before `stop`."""
        return self.span[:, start - self.left : stop - self.left]


def to_field(density: np.ndarray, raster: Raster) -> Field:
    """Return the field of a page's ink."""
    px_per_mm = min(_PX_PER_MM, raster.px_per_mm)
    scale = px_per_mm / raster.px_per_mm
    rows, cols = (int(n * scale) for n in density.shape)
    coarse = cv2.resize(density, (cols, rows), interpolation=cv2.INTER_AREA)
    bare = 1 - np.clip((coarse - _FAINT) / (_FULL - _FAINT), 0, 1)
    row_scale, col_scale = density.shape[0] / rows, density.shape[1] / cols
    y_mm = raster.y_mm((np.arange(rows) + 0.5) * row_scale - 0.5)
    x_mm = raster.x_mm((np.arange(cols) + 0.5) * col_scale - 0.5)
    return Field(bare, y_mm, x_mm, px_per_mm)


def walk(
    field: Field,
    rows: tuple[int, int],
    cols: tuple[int, int],
    anchor: np.ndarray,
    ends: tuple[np.ndarray, np.ndarray],
    *,
    others: tuple[Path, ...] = (),
    via: tuple[tuple[int, int], ...] = (),
    extra: np.ndarray | None = None,
) -> tuple[Path, float]:
    """Cheapest path across a part of a field, and its price.

    Parameters
    ----------
    rows, cols : (int, int)
        First row and column of the part, and those after the last.
    anchor : (2, all cols) int array
        Rows where the trace stands beyond doubt, -1 where unknown.
    ends : two (rows,) float arrays
        Price of beginning and of ending at each row of the part.
    others : tuple of Path
        Ways of other traces, whose ink may be crossed but not followed.
    via : tuple of (int, int)
        Rows and columns of points that the path must pass.
    extra : (rows,) float array, optional
        Bareness added to each row of the part.
    """
    bare = np.ascontiguousarray(field.bare[slice(*rows), slice(*cols)])
    onward = bare.copy()
    row = np.arange(*rows)[:, None]
    for other in others:
        start, stop = max(cols[0], other.left), min(cols[1], other.right)
        if start < stop:
            span = other.cut(start, stop)
            part = onward[:, start - cols[0] : stop - cols[0]]
            on = (row >= span[0] - 1) & (row <= span[1] + 1)
            part[on] = np.maximum(part[on], np.float32(_TAKEN))
    known = np.flatnonzero(anchor[0, slice(*cols)] >= 0)
    low, high = anchor[:, cols[0] + known]
    onward[:, known] += np.float32(_WALL) * ((row < low - 1) | (row > high + 1))
    if extra is not None:
        onward += extra.astype(np.float32)[:, None]
    for at_row, at_col in via:
        away = np.abs(np.arange(*rows) - at_row) > 1
        onward[away, at_col - cols[0]] += np.float32(_NEVER)
    span, price = cheapest_path(bare, onward, *ends, field.px_per_mm)
    return Path(cols[0], span + rows[0]), float(price)

"""The ruled ground under the ink: what repeats every 5 mm, region by region.

On the flattened sheet the grid is periodic, so its robust mean cell is the background to subtract;
that works on dotted and faint grids too, whatever their colour.
"""

import numpy as np

from digitize.sheet import Raster

CELL_MM = 5  # grids repeat after 5 mm
REGION_CELLS = 7  # the mean cell is taken over so many cells each way
ENOUGH_CELLS = 24  # more cells than this add little to the mean
FEWEST_CELLS = 8  # fewer ruled cells give no mean of their own


def ruled_ground(absorbed: np.ndarray, raster: Raster) -> np.ndarray:
    """Return the absorption of paper and grid alone, float32 (rows, cols).

    The median 5 mm cell of each region, blended between regions; 0 where nothing is ruled.

    Parameters
    ----------
    absorbed : float32 array, (rows, cols)
        Of paper, grid and ink.
    raster : Raster
        Its 5 mm are a whole number of pixels.
    """
    cell = round(CELL_MM * raster.px_per_mm)
    rows, cols = (int(np.ceil(n / cell)) for n in absorbed.shape)
    padded = np.pad(
        absorbed,
        ((0, rows * cell - absorbed.shape[0]), (0, cols * cell - absorbed.shape[1])),
        mode="reflect",
    )
    cells = np.ascontiguousarray(padded.reshape(rows, cell, cols, cell).swapaxes(1, 2))
    ruled = _ruled(cells)
    usual = _mean_cell(cells[ruled][::7]) if ruled.any() else np.zeros((cell, cell), np.float32)
    tops, lefts = _region_starts(rows), _region_starts(cols)
    size_y, size_x = min(REGION_CELLS, rows), min(REGION_CELLS, cols)

    def region_cell(top: int, left: int) -> np.ndarray:
        region = slice(top, top + size_y), slice(left, left + size_x)
        own = cells[region][ruled[region]]
        return _mean_cell(own) if len(own) >= FEWEST_CELLS else usual

    grounds = np.stack([np.stack([region_cell(top, left) for left in lefts]) for top in tops])
    blend_y = _blend(np.array(tops) + (size_y - 1) / 2, rows)
    blend_x = _blend(np.array(lefts) + (size_x - 1) / 2, cols)
    flat = grounds.reshape(len(tops), -1)
    down = (blend_y @ flat).reshape(rows, len(lefts), cell * cell)
    full = np.einsum("xl,rlc->rxc", blend_x, down, optimize=True)
    full = full * ruled.reshape(rows, cols, 1)
    full = full.reshape(rows, cols, cell, cell).swapaxes(1, 2).reshape(rows * cell, cols * cell)
    return full[: absorbed.shape[0], : absorbed.shape[1]]


def _mean_cell(cells: np.ndarray) -> np.ndarray:
    """Median of cells (n, size, size), of a part of them where there are many."""
    return np.median(cells[:: max(1, len(cells) // ENOUGH_CELLS)], axis=0)


def _region_starts(count: int) -> list[int]:
    regions = max(1, round(count / REGION_CELLS * 1.5))
    return [round(s) for s in np.linspace(0, max(count - REGION_CELLS, 0), regions)]


def _ruled(cells: np.ndarray) -> np.ndarray:
    """Which cells (rows, cols) show the usual ruling; margins and blank borders do not."""
    rows, cols, size, _ = cells.shape
    inner = cells[rows // 4 : rows - rows // 4, cols // 4 : cols - cols // 4]
    pattern = _mean_cell(inner.reshape(-1, size, size))
    top = float(pattern.max() - np.median(pattern))
    pattern = pattern - pattern.mean()
    power = float(np.sum(pattern * pattern))
    if power < 1e-3:
        return np.ones((rows, cols), bool)
    capped = np.minimum(cells, top)
    capped -= capped.mean(axis=(2, 3), keepdims=True)  # else bare paper is like any pattern
    match = np.einsum("rcij,ij->rc", capped, pattern, optimize=True)
    own = np.einsum("rcij,rcij->rc", capped, capped, optimize=True)
    return match > 0.3 * np.sqrt(own * power)


def _blend(centres: np.ndarray, count: int) -> np.ndarray:
    """Linear weights (count, regions) of the regions at each cell."""
    at = np.arange(count)
    return np.stack(
        [np.interp(at, centres, np.eye(len(centres))[k]) for k in range(len(centres))], axis=1
    ).astype(np.float32)

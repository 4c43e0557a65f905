"""What was printed over the grid: how much of each pixel the pen covers.

A pen covers paper and grid; optics then blur the light that comes back. So coverage is linear in
reflected light, not in its logarithm: coverage = (ground - light) / (ground - ink), where the
ground is the paper with its grid. The channels of a colour page are first mixed into the one
light in which the grid is faintest; what is left of the grid is periodic in millimetres, and its
robust mean cell, region by region, is taken as ground.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.sheet import Raster, Sheet

_CODE = np.arange(256) / 255
# IEC 61966-2-1 (sRGB): light from pixel values; optics blur light, not code values.
_LINEAR_LIGHT = np.where(_CODE <= 0.04045, _CODE / 12.92, ((_CODE + 0.055) / 1.055) ** 2.4).astype(
    np.float32
)
# Absorption that varies for other reasons than ink: grey noise; colour noise, mostly of JPEG, which
# keeps colour at half the resolution; and the share of the grid that its mean cell leaves over.
GREY_NOISE, CHROMA_NOISE, GRID_LEFT = 0.02, 0.08, 0.3
CELL_MM = 5  # grids repeat after 5 mm
SPECK_MM = 0.11  # halftone dots are smaller than the thinnest pen
SOLID = 0.32  # smoothed density from which ink is solid
NO_PAPER = 0.35  # darker than this share of the usual paper is finger, desk or hole
OPAQUE = 0.75  # ground darker than this share of a full stroke hides the ink over it
FEWEST_CELLS = 8  # fewer ruled cells give no mean of their own
REGION_CELLS = 7  # the mean cell is taken over so many cells each way


@dataclass(frozen=True, eq=False)
class Ink:
    """Ink on the sheet, the grid taken away.

    `density` is float32, (rows, cols): the share of each pixel that ink covers, 0 on bare or ruled
    paper, about 1 in the middle of a full stroke, noise may be negative. `hidden` is True where
    the paper cannot be seen. `noise` is the standard deviation of `density` on bare paper.
    """

    density: np.ndarray
    hidden: np.ndarray
    raster: Raster
    noise: float
    ruled_mm: tuple[float, float, float, float]
    source_px_per_mm: tuple[float, float]


def find_ink(sheet: Sheet) -> Ink:
    """Return the coverage of the sheet by ink.

    Parameters
    ----------
    sheet : Sheet
        Colour, grey or 1-bit, flattened so that the grid's period is whole pixels.
    """
    light, level = _even_light(sheet)
    absorbed = _mix(light, sheet) if light.ndim == 3 else 1 - light
    ground = _ground(absorbed, sheet.raster)
    absorbed -= ground
    quiet = absorbed[::3, ::3]
    noise = 1.4826 * float(np.median(np.abs(quiet - np.median(quiet))))
    full = _full_stroke(absorbed, noise)
    dark = np.clip(ground / (full + np.maximum(np.median(ground), 0)), 0, 1)
    density = absorbed / (full * np.maximum(1 - dark, 0.25))
    if np.mean(dark[::3, ::3] > OPAQUE) > 0.002:
        density = _bridge(density, dark > OPAQUE)
    return Ink(
        density=density.astype(np.float32),
        hidden=~sheet.inside | (level < NO_PAPER * np.median(level[::8, ::8])),
        raster=sheet.raster,
        noise=max(noise / full, 0.004),
        ruled_mm=sheet.ruled_mm,
        source_px_per_mm=sheet.source_px_per_mm,
    )


def solid_ink(ink: Ink) -> np.ndarray:
    """Where there surely is ink, uint8 0 or 1: specks of a halftone and page edges left out."""
    smooth = cv2.GaussianBlur(ink.density, (0, 0), SPECK_MM * ink.raster.px_per_mm)
    edge = cv2.dilate(ink.hidden.astype(np.uint8), np.ones((15, 15), np.uint8))
    return ((smooth > SOLID) & (edge == 0)).astype(np.uint8)


def _even_light(sheet: Sheet) -> tuple[np.ndarray, np.ndarray]:
    """Light relative to the local paper, float32, and that paper level as a code value.

    Shade and vignetting are divided out.

    The local paper level is the mean of each millimetre cell, closed over 5 mm so that traces do
    not lower it, then smoothed.
    """
    step = int(sheet.raster.px_per_mm)
    pixels = sheet.pixels
    rows, cols = pixels.shape[0] // step, pixels.shape[1] // step
    cells = cv2.resize(
        pixels[: rows * step, : cols * step], (cols, rows), interpolation=cv2.INTER_AREA
    ).astype(np.float32)
    level = cv2.morphologyEx(cells, cv2.MORPH_CLOSE, np.ones((5, 5), np.uint8))
    level = np.maximum(cv2.GaussianBlur(level, (0, 0), 1.5), 8.0)
    size = pixels.shape[1::-1]
    per_light = 1 / np.interp(level, np.arange(256), _LINEAR_LIGHT).astype(np.float32)
    light = _LINEAR_LIGHT[pixels]
    light *= cv2.resize(per_light, size, interpolation=cv2.INTER_LINEAR)
    brightest = level if level.ndim == 2 else level.max(axis=2)
    return light, cv2.resize(brightest, size, interpolation=cv2.INTER_LINEAR)


def _mix(light: np.ndarray, sheet: Sheet) -> np.ndarray:
    """Absorbed light in the mixture of channels where ink is strong and the grid faint.

    Weights w minimise the variance of noise and grid under w'ink = 1: the matched filter that knows
    the grid's colour. The ink's colour is read from the darkest strokes.
    """
    absorbed = 1 - light
    step = sheet.raster.px_per_mm
    sample = absorbed[1::5, 1::5].reshape(-1, 3)
    row = np.arange(1, absorbed.shape[0], 5)
    col = np.arange(1, absorbed.shape[1], 5)
    y, x = sheet.raster.y_mm(row), sheet.raster.x_mm(col)
    off_y, off_x = np.abs(y - np.round(y)), np.abs(x - np.round(x))
    reach = 1.2 / step
    on_line = ((off_y < reach)[:, None] | (off_x < reach)[None, :]).ravel()
    between = ((off_y > 0.3)[:, None] & (off_x > 0.3)[None, :]).ravel()
    usual = sample.mean(axis=1) < 0.4
    grid = np.median(sample[on_line & usual], axis=0) - np.median(sample[between & usual], axis=0)
    ink = np.ones(3)
    for _ in range(2):
        weights = _matched(ink, grid)
        strength = sample @ weights
        dark = strength > max(0.5 * np.quantile(strength, 0.9995), 0.1)
        if np.count_nonzero(dark) < 50:
            break
        ink = np.median(sample[dark], axis=0)
        ink = np.maximum(ink, 0.02) / np.max(ink)
    return absorbed @ _matched(ink, grid).astype(np.float32)


def _matched(ink: np.ndarray, grid: np.ndarray) -> np.ndarray:
    """Channel weights of greatest contrast between ink and what else varies."""
    grey = np.full((3, 3), 1 / 3)
    noise = GREY_NOISE**2 * grey + CHROMA_NOISE**2 * (np.eye(3) - grey)
    noise += GRID_LEFT**2 * np.outer(grid, grid)
    weights = np.linalg.solve(noise, ink)
    return weights / (weights @ ink)


def _ground(absorbed: np.ndarray, raster: Raster) -> np.ndarray:
    """The periodic ground: the median 5 mm cell of each region, blended between regions."""
    cell = round(CELL_MM * raster.px_per_mm)
    rows, cols = (int(np.ceil(n / cell)) for n in absorbed.shape)
    padded = np.pad(
        absorbed,
        ((0, rows * cell - absorbed.shape[0]), (0, cols * cell - absorbed.shape[1])),
        mode="reflect",
    )
    cells = padded.reshape(rows, cell, cols, cell).swapaxes(1, 2)
    ruled = _ruled(cells)
    usual = np.median(cells[ruled], axis=0) if ruled.any() else np.zeros((cell, cell), np.float32)
    tops, lefts = _region_starts(rows), _region_starts(cols)
    size_y, size_x = min(REGION_CELLS, rows), min(REGION_CELLS, cols)

    def mean_cell(top: int, left: int) -> np.ndarray:
        region = slice(top, top + size_y), slice(left, left + size_x)
        own = cells[region][ruled[region]]
        return np.median(own, axis=0) if len(own) >= FEWEST_CELLS else usual

    grounds = np.stack([np.stack([mean_cell(top, left) for left in lefts]) for top in tops])
    blend_y = _blend(np.array(tops) + (size_y - 1) / 2, rows)
    blend_x = _blend(np.array(lefts) + (size_x - 1) / 2, cols)
    flat = grounds.reshape(len(tops), -1)
    down = (blend_y @ flat).reshape(rows, len(lefts), cell * cell)
    full = np.einsum("xl,rlc->rxc", blend_x, down, optimize=True)
    full = full * ruled.reshape(rows, cols, 1)
    full = full.reshape(rows, cols, cell, cell).swapaxes(1, 2).reshape(rows * cell, cols * cell)
    return full[: absorbed.shape[0], : absorbed.shape[1]]


def _region_starts(count: int) -> list[int]:
    regions = max(1, round(count / REGION_CELLS * 1.5))
    return [round(s) for s in np.linspace(0, max(count - REGION_CELLS, 0), regions)]


def _ruled(cells: np.ndarray) -> np.ndarray:
    """Which cells (rows, cols) show the usual ruling; margins and blank borders do not."""
    rows, cols, size, _ = cells.shape
    inner = cells[rows // 4 : rows - rows // 4, cols // 4 : cols - cols // 4]
    pattern = np.median(inner.reshape(-1, size, size)[::3], axis=0)
    pattern = pattern - np.median(pattern)
    power = float(np.sum(pattern * pattern))
    if power < 1e-3:
        return np.ones((rows, cols), bool)
    capped = np.minimum(cells, float(pattern.max())) - np.median(cells)
    match = np.einsum("rcij,ij->rc", capped, pattern, optimize=True)
    own = np.einsum("rcij,rcij->rc", capped, capped, optimize=True)
    return match > 0.3 * np.sqrt(own * power)


def _blend(centres: np.ndarray, count: int) -> np.ndarray:
    """Linear weights (count, regions) of the regions at each cell."""
    at = np.arange(count)
    return np.stack(
        [np.interp(at, centres, np.eye(len(centres))[k]) for k in range(len(centres))], axis=1
    ).astype(np.float32)


def _bridge(density: np.ndarray, opaque: np.ndarray) -> np.ndarray:
    """Fill pixels under opaque grid lines from their neighbours beside the line."""
    opaque = cv2.dilate(opaque.astype(np.uint8), np.ones((3, 3), np.uint8)) > 0
    open_ = (~opaque).astype(np.float32)
    weight = cv2.GaussianBlur(open_, (0, 0), 1.2)
    filled = cv2.GaussianBlur(density * open_, (0, 0), 1.2) / np.maximum(weight, 1e-3)
    return np.where(opaque, filled, density)


def _full_stroke(absorbed: np.ndarray, noise: float) -> float:
    """Absorption in the middle of a stroke: what the darker half of clear ink reaches."""
    ridge = absorbed[1::2, 1::2]
    clear = ridge[ridge > max(8 * noise, 0.12)]
    if clear.size < 100:
        return 1.0
    return max(float(np.quantile(clear, 0.85)), 0.1)

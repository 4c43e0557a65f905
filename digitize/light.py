"""How much light each place of a sheet absorbs, shade and colours told apart from ink.

Optics blur the light that comes back, not its code value and not its logarithm, so everything is
reckoned in linear light relative to the local paper. The channels of a colour page are mixed into
the one light in which ink is strong and the grid faint.
"""

import cv2
import numpy as np

from digitize.sheet import Sheet

_CODE = np.arange(256) / 255
# IEC 61966-2-1 (sRGB): light from pixel values.
_LINEAR_LIGHT = np.where(_CODE <= 0.04045, _CODE / 12.92, ((_CODE + 0.055) / 1.055) ** 2.4).astype(
    np.float32
)
# Absorption that varies for other reasons than ink: grey noise; colour noise, mostly of JPEG, which
# keeps colour at half the resolution; and the share of the grid that its mean cell leaves over.
GREY_NOISE, CHROMA_NOISE, GRID_LEFT = 0.02, 0.08, 0.3
SAMPLE = 5  # pixels between samples for the colours: prime to the pixels per millimetre


def absorbed_light(sheet: Sheet) -> tuple[np.ndarray, np.ndarray]:
    """Return the share of light absorbed at each place, and the local paper level.

    Parameters
    ----------
    sheet : Sheet
        Grey or colour.

    Returns
    -------
    absorbed : float32 array, (rows, cols)
        0 on bare paper, grid lines and ink positive; 1 would be black.
    level : float32 array, (rows, cols)
        Code value of the local paper, its brightest channel.
    """
    pixels = sheet.pixels if sheet.pixels.ndim == 3 else sheet.pixels[..., None]
    level = _paper_level(pixels, int(sheet.raster.px_per_mm))
    per_light = 1 / np.interp(level, np.arange(256), _LINEAR_LIGHT).astype(np.float32)
    weights = np.ones(1)
    if pixels.shape[2] == 3:
        weights = _weights(_sampled(pixels, per_light), sheet)
    size = pixels.shape[1::-1]
    absorbed = np.full(pixels.shape[:2], weights.sum(), np.float32)
    for channel, weight in enumerate(weights):
        table = (_LINEAR_LIGHT * weight).astype(np.float32)
        light = cv2.LUT(np.ascontiguousarray(pixels[..., channel]), table)
        light *= cv2.resize(per_light[..., channel], size, interpolation=cv2.INTER_LINEAR)
        absorbed -= light
    brightest = np.ascontiguousarray(level.max(axis=2))
    return absorbed, cv2.resize(brightest, size, interpolation=cv2.INTER_LINEAR)


def _paper_level(pixels: np.ndarray, step_px: int) -> np.ndarray:
    """Code value of the paper in each millimetre cell, (rows, cols, channels).

    The mean of each cell, closed over 5 mm so that traces do not lower it, then smoothed.
    """
    rows, cols = pixels.shape[0] // step_px, pixels.shape[1] // step_px
    cut = pixels[: rows * step_px, : cols * step_px]
    cells = cv2.resize(cut, (cols, rows), interpolation=cv2.INTER_AREA).astype(np.float32)
    level = cv2.morphologyEx(cells, cv2.MORPH_CLOSE, np.ones((5, 5), np.uint8))
    level = np.maximum(cv2.GaussianBlur(level, (0, 0), 1.5), 8.0)
    return level.reshape(rows, cols, -1)


def _sampled(pixels: np.ndarray, per_light: np.ndarray) -> np.ndarray:
    """Absorbed light of every few pixels, (rows, cols, 3)."""
    sample = pixels[SAMPLE // 2 :: SAMPLE, SAMPLE // 2 :: SAMPLE]
    near = cv2.resize(per_light, sample.shape[1::-1], interpolation=cv2.INTER_LINEAR)
    return 1 - _LINEAR_LIGHT[sample] * near


def _weights(absorbed: np.ndarray, sheet: Sheet) -> np.ndarray:
    """Weights of the channels, (3,).

    Weights w minimise the variance of noise and grid under w'ink = 1: the matched filter that
    knows the grid's colour. The ink's colour is read from the darkest strokes.
    """
    sample = absorbed.reshape(-1, 3)
    y = sheet.raster.y_mm(SAMPLE // 2 + SAMPLE * np.arange(absorbed.shape[0]))
    x = sheet.raster.x_mm(SAMPLE // 2 + SAMPLE * np.arange(absorbed.shape[1]))
    off_y, off_x = np.abs(y - np.round(y)), np.abs(x - np.round(x))
    reach = 1.2 / sheet.raster.px_per_mm
    usual = sample.mean(axis=1) < 0.4
    on_line = ((off_y < reach)[:, None] | (off_x < reach)[None, :]).ravel() & usual
    between = ((off_y > 0.3)[:, None] & (off_x > 0.3)[None, :]).ravel() & usual
    grid = np.zeros(3)
    if on_line.any() and between.any():
        grid = np.median(sample[on_line], axis=0) - np.median(sample[between], axis=0)
    ink = np.ones(3)
    for _ in range(2):
        strength = sample @ _matched(ink, grid)
        dark = strength > max(0.5 * np.quantile(strength, 0.9995), 0.1)
        if np.count_nonzero(dark) < 50:
            break
        ink = np.median(sample[dark], axis=0)
        ink = np.maximum(ink, 0.02) / np.max(ink)
    return _matched(ink, grid)


def _matched(ink: np.ndarray, grid: np.ndarray) -> np.ndarray:
    """Channel weights of greatest contrast between ink and what else varies."""
    grey = np.full((3, 3), 1 / 3)
    noise = GREY_NOISE**2 * grey + CHROMA_NOISE**2 * (np.eye(3) - grey)
    noise += GRID_LEFT**2 * np.outer(grid, grid)
    weights = np.linalg.solve(noise, ink)
    return weights / (weights @ ink)

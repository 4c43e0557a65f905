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

from digitize.ground import ruled_ground
from digitize.light import absorbed_light
from digitize.sheet import Raster, Sheet

SPECK_MM = 0.11  # halftone dots are smaller than the thinnest pen
SOLID = 0.32  # smoothed density from which ink is solid
NO_PAPER = 0.35  # darker than this share of the usual paper is finger, desk or hole
OPAQUE = 0.75  # ground darker than this share of a full stroke hides the ink over it


@dataclass(frozen=True, eq=False)
class Ink:
    """Ink on the sheet, the grid taken away.

    `density` is float32, (rows, cols): the share of each pixel that ink covers, 0 on bare or ruled
    paper, about 1 in the middle of a full stroke, noise may be negative. `hidden` is True where
    the paper cannot be seen. `noise` is the standard deviation of `density` on bare paper. Of a
    `bilevel` page each pixel was black or white.
    """

    density: np.ndarray
    hidden: np.ndarray
    raster: Raster
    noise: float
    ruled_mm: tuple[float, float, float, float]
    source_px_per_mm: tuple[float, float]
    bilevel: bool = False


def find_ink(sheet: Sheet) -> Ink:
    """Return the coverage of the sheet by ink.

    Parameters
    ----------
    sheet : Sheet
        Colour, grey or 1-bit, flattened so that the grid's period is whole pixels.
    """
    absorbed, level = absorbed_light(sheet)
    ground = ruled_ground(absorbed, sheet.raster)
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
        bilevel=sheet.bilevel,
    )


def solid_ink(ink: Ink) -> np.ndarray:
    """Where there surely is ink, uint8 0 or 1: specks of a halftone and page edges left out."""
    smooth = cv2.GaussianBlur(ink.density, (0, 0), SPECK_MM * ink.raster.px_per_mm)
    edge = cv2.dilate(ink.hidden.astype(np.uint8), np.ones((15, 15), np.uint8))
    return ((smooth > SOLID) & (edge == 0)).astype(np.uint8)


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

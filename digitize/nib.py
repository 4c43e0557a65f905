"""The pen of a page: width of the nib, blur of its ink, density of a full stroke.

Across a level stretch the ink's profile is a box as wide as the nib, blurred. The profiles of all
level stretches of a page, laid upon one another by the middle of the ink, show it far more finely
than one column of pixels does.
"""

from dataclasses import replace

import numpy as np
import scipy as sp

from digitize.fit import Line, View
from digitize.ink import Ink
from digitize.pen import Pen, draw_line
from digitize.ways import Way

_USUAL_MM = 0.35  # common practice; where no stretch is level
_LEVEL = 0.15  # slope, rows per column, below which the stroke is as thick as the nib to 1 %
_REACH_MM = 0.9
_PER_PX = 4
_ENOUGH = 20  # pixels in one bin of the profile
_REFINEMENTS = 3
_LOOSE = 0.02  # relative change that costs as much as one pixel's residual
_PATCH = 3  # pixels: about what one node's height hangs on


def find_pen(ink: Ink, ways: tuple[Way, ...]) -> Pen:
    """Estimate the pen from the profile of the ink across level stretches.

    Parameters
    ----------
    ink : Ink
    ways : tuple of Way
        Where the traces run.

    Returns
    -------
    Pen
        In pixels of the ink's raster; blur across is that down, but for the size of the source's
        pixels.
    """
    px = ink.raster.px_per_mm
    half = max(round(_REACH_MM * px), 4)
    bins = (2 * half + 1) * _PER_PX
    total, count = np.zeros(bins), np.zeros(bins)
    for way in ways:
        cols, middle = _level_columns(way)
        rows = np.rint(middle).astype(int)
        inside = (rows > half) & (rows < len(ink.density) - half - 1)
        cols, rows, middle = cols[inside], rows[inside], middle[inside]
        at = rows[:, None] + np.arange(-half, half + 1)
        away = at - middle[:, None]
        place = np.clip(((away + half + 0.5) * _PER_PX).astype(int), 0, bins - 1)
        density = ink.density[at, way.col0 + cols[:, None]]
        total += np.bincount(place.ravel(), density.ravel(), bins)
        count += np.bincount(place.ravel(), minlength=bins)
    away = (np.arange(bins) + 0.5) / _PER_PX - half - 0.5
    used = count > _ENOUGH
    if used.sum() < 4 * _PER_PX:
        return Pen(_USUAL_MM * px, 0.07 * px, 0.07 * px)
    pen = _match(away[used], total[used] / count[used], px)
    across, down = ((px / source) ** 2 / 12 for source in ink.source_px_per_mm)
    blur_x = max(pen.blur_y_px**2 - down + across, 0.09) ** 0.5
    return replace(pen, blur_x_px=blur_x)


def _level_columns(way: Way) -> tuple[np.ndarray, np.ndarray]:
    """Columns where the trace is level and alone, and the middle of its ink there."""
    middle = way.edges.mean(axis=0)
    thick = way.edges[1] - way.edges[0]
    usable = np.isfinite(middle) & ~way.shared
    if usable.sum() < 10:
        return np.zeros(0, int), np.zeros(0)
    slope = np.where(usable, np.abs(np.gradient(np.where(usable, middle, 0))), 9)
    level = sp.ndimage.maximum_filter1d(slope, 7) < _LEVEL
    level &= np.where(usable, thick, 99) < 1.3 * np.median(thick[usable])
    cols = np.flatnonzero(level)
    return cols, middle[cols]


def _match(away: np.ndarray, profile: np.ndarray, px_per_mm: float) -> Pen:
    def misfit(values: np.ndarray) -> np.ndarray:
        width, blur, gain = values
        return (
            gain
            * (
                sp.special.ndtr((away + width / 2) / blur)
                - sp.special.ndtr((away - width / 2) / blur)
            )
            - profile
        )

    low, high = (0.1 * px_per_mm, 0.3, 0.5), (1.0 * px_per_mm, 0.5 * px_per_mm, 1.5)
    start = np.clip((_USUAL_MM * px_per_mm, 0.8, 1.0), low, high)
    width, blur, gain = sp.optimize.least_squares(misfit, start, bounds=(low, high)).x
    return Pen(float(width), float(blur), float(blur), float(gain))


def refine_pen(pen: Pen, strokes: list[tuple[View, Line, float, float]]) -> tuple[Pen, float]:
    """Improve the pen, its blur across included, on fitted lines; and measure what is left.

    Steep flanks show the blur across as level stretches show that down; the two differ where the
    pixels of the source are not square.

    Parameters
    ----------
    pen : Pen
        With which the lines were fitted.
    strokes : list of (View, Line, float, float)
        What each line was fitted to, the line, the place of its first node and the node distance.

    Returns
    -------
    Pen
    float
        Noise of the ink about the strokes, as white noise of the same effect: residuals that
        neighbouring pixels share do not average out.
    """
    regions = [_beside(view, line, x0, step, pen) for view, line, x0, step in strokes]
    values = np.array(pen.nib)

    def residual(nib: np.ndarray) -> list[np.ndarray]:
        trial = Pen(*(float(v) for v in nib))
        return [
            view.image - _drawn(view, line, x0, step, trial) for view, line, x0, step in strokes
        ]

    def on_ink(images: list[np.ndarray]) -> np.ndarray:
        return np.concatenate([im[region] for im, region in zip(images, regions, strict=True)])

    left = residual(values)
    for _ in range(_REFINEMENTS):
        base = on_ink(left)
        scale = max(1.4826 * float(np.median(np.abs(base))), 1e-3)
        weight = 1 / (1 + (base / (4 * scale)) ** 2)
        shifts = 0.02 * values
        slopes = np.stack(
            [
                (base - on_ink(residual(values + shift * np.eye(4)[i]))) / shift
                for i, shift in enumerate(shifts)
            ]
        )
        hold = np.diag((scale / (_LOOSE * values)) ** 2)  # where a page does not show one of them
        move = np.linalg.solve((slopes * weight) @ slopes.T + hold, (slopes * weight) @ base)
        values = values + np.clip(move, -0.2 * values, 0.2 * values)
        left = residual(values)
    return Pen(*(float(v) for v in values)), _white_noise(left, regions)


def _drawn(view: View, line: Line, x0: float, step: float, pen: Pen) -> np.ndarray:
    image = pen.gain * view.other
    draw_line(image, line.y_px, x0, step, pen)
    return image


def _beside(view: View, line: Line, x0: float, step: float, pen: Pen) -> np.ndarray:
    """Pixels on and beside the stroke, where the density says something of the pen."""
    ink = sp.ndimage.maximum_filter(_drawn(view, line, x0, step, pen), 3)
    return (ink > 0.02) & (view.other < 0.02) & np.isfinite(view.image)


def _white_noise(left: list[np.ndarray], regions: list[np.ndarray]) -> float:
    """Standard deviation of white noise with the residuals' power at the scale of the pen."""
    power, count = 0.0, 0
    for image, region in zip(left, regions, strict=True):
        values = np.where(region, image, 0)
        scale = 4 * 1.4826 * np.median(np.abs(values[region]))
        values = np.clip(values, -scale, scale)
        square = sp.ndimage.uniform_filter(values, _PATCH) * _PATCH**2
        full = sp.ndimage.uniform_filter(region.astype(float), _PATCH) * _PATCH**2
        use = region & (full > 0.5 * _PATCH**2)
        power += float((square[use] ** 2 / full[use]).sum())
        count += int(use.sum())
    return (power / max(count, 1)) ** 0.5

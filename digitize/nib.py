"""The pen of a page: width of the nib, blur of its ink, density of a full stroke.

Across a level stretch the ink's profile is a box as wide as the nib, blurred. The profiles of all
level stretches of a page, laid upon one another by the middle of the ink, show it far more finely
than one column of pixels does.
"""

import numpy as np
import scipy as sp

from digitize.fit import Line, View
from digitize.ink import Ink
from digitize.path import flank_runs
from digitize.pen import Pen, draw_line
from digitize.ways import EDGE, Way

_USUAL_MM = 0.35  # common practice; where no stretch is level
_LEVEL = 0.15  # slope, rows per column, below which the stroke is as thick as the nib to 1 %
_REACH_MM = 0.9
_STEEP_MM = 2.5  # ink so tall in one column is a flank
_FLANK_ROWS = 30
_SPREAD = 1.12  # of widths about the thinnest, that are one flank each
_PER_PX = 4
_ENOUGH = 20  # pixels in one bin of the profile
_REFINEMENTS = 3
_LOOSE = 0.02  # relative change that costs as much as one pixel's residual
_PATCH = 3  # pixels: about what one node's height hangs on


def find_pen(ink: Ink, ways: tuple[Way, ...]) -> Pen:
    """Estimate the pen from the profiles of the ink across level stretches and across flanks.

    A trace that trembles within the nib's own width is thickened where it is level, but hardly
    where it is steep: so the flanks tell the width, where there are enough of them.

    Parameters
    ----------
    ink : Ink
    ways : tuple of Way
        Where the traces run.

    Returns
    -------
    Pen
        In pixels of the ink's raster.
    """
    px = ink.raster.px_per_mm
    level = _stacked(ink.density, *_level_places(ink, ways), px)
    if level is None:
        return Pen(_USUAL_MM * px, 0.07 * px, 0.07 * px)
    width, blur_y, gain = _match(*level, px)
    across, down = ((px / source) ** 2 / 12 for source in ink.source_px_per_mm)
    blur_x = max(blur_y**2 - down + across, 0.09) ** 0.5
    cols, middle, lean = _flank_places(ink, ways)
    steep = _stacked(ink.density.T, cols, middle, px) if len(cols) else None
    if steep is not None:
        thick, blur, _ = _match(*steep, px, gain)
        width, blur_x = min(width, thick * lean), blur * lean
    return Pen(float(width), float(blur_x), float(blur_y), float(gain))


def _stacked(
    density: np.ndarray, lines: np.ndarray, middle: np.ndarray, px_per_mm: float
) -> tuple[np.ndarray, np.ndarray] | None:
    """Mean density against the distance from `middle`, down the given columns; None if too few."""
    half = max(round(_REACH_MM * px_per_mm), 4)
    bins = (2 * half + 1) * _PER_PX
    at = np.rint(middle).astype(int)
    inside = (at > half) & (at < len(density) - half - 1)
    rows = at[inside, None] + np.arange(-half, half + 1)
    away = rows - middle[inside, None]
    place = np.clip(((away + half + 0.5) * _PER_PX).astype(int), 0, bins - 1)
    total = np.bincount(place.ravel(), density[rows, lines[inside, None]].ravel(), bins)
    count = np.bincount(place.ravel(), minlength=bins)
    used = count > _ENOUGH
    if used.sum() < 4 * _PER_PX:
        return None
    away = (np.arange(bins) + 0.5) / _PER_PX - half - 0.5
    return away[used], total[used] / count[used]


def _level_places(ink: Ink, ways: tuple[Way, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Columns where a trace is level and alone, and the middle of its ink there."""
    columns, middles = [np.zeros(0, int)], [np.zeros(0)]
    for way in ways:
        middle = way.edges.mean(axis=0)
        usable = np.isfinite(middle) & ~way.shared
        if usable.sum() < 10:
            continue
        thick = way.edges[1] - way.edges[0]
        slope = np.where(usable, np.abs(np.gradient(np.where(usable, middle, 0))), 9)
        level = sp.ndimage.maximum_filter1d(slope, 7) < _LEVEL
        level &= np.where(usable, thick, np.inf) < 1.3 * np.median(thick[usable])
        cols = np.flatnonzero(level)
        columns.append(way.col0 + cols)
        middles.append(middle[cols])
    return np.concatenate(columns), np.concatenate(middles)


def _flank_places(ink: Ink, ways: tuple[Way, ...]) -> tuple[np.ndarray, np.ndarray, float]:
    """Rows where a steep flank stands alone, its middle across, and the cosine of its lean."""
    px = ink.raster.px_per_mm
    found = [
        flank_runs(ink.density, way.edges, way.shared, way.col0, EDGE, _STEEP_MM * px)
        for way in ways
    ]
    row, left, right, lean = np.concatenate(found, axis=1)
    if len(row) < _FLANK_ROWS:
        return np.zeros(0, int), np.zeros(0), 1.0
    wide = (right - left) * lean
    # wider ones are two flanks, a notch, or the round of a peak
    thin = wide < _SPREAD * np.quantile(wide, 0.2)
    return row[thin].astype(int), 0.5 * (left + right)[thin], float(np.median(lean[thin]))


def _match(
    away: np.ndarray, profile: np.ndarray, px_per_mm: float, gain: float | None = None
) -> tuple[float, float, float]:
    """Width, blur and density of the blurred box that is most like a profile."""

    def box(values: np.ndarray) -> np.ndarray:
        width, blur = values[:2]
        high = sp.special.ndtr((away + width / 2) / blur)
        return high - sp.special.ndtr((away - width / 2) / blur)

    def misfit(values: np.ndarray) -> np.ndarray:
        return (values[2] if gain is None else gain) * box(values) - profile

    low = np.array([0.1 * px_per_mm, 0.3, 0.5])
    high = np.array([1.0 * px_per_mm, 0.5 * px_per_mm, 1.5])
    start = np.clip([_USUAL_MM * px_per_mm, 0.8, 1.0], low, high)
    free = 3 if gain is None else 2
    fitted = sp.optimize.least_squares(misfit, start[:free], bounds=(low[:free], high[:free])).x
    return float(fitted[0]), float(fitted[1]), float(fitted[2] if gain is None else gain)


def refine_pen(pen: Pen, strokes: list[tuple[View, Line, float, float]]) -> tuple[Pen, float]:
    """Improve blur and density of the pen on fitted lines, and measure what is left.

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
    width = pen.width_px
    regions = [_beside(view, line, x0, step, pen) for view, line, x0, step in strokes]
    values = np.array(pen.nib[1:])

    def residual(nib: np.ndarray) -> list[np.ndarray]:
        trial = Pen(width, *(float(v) for v in nib))
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
                (base - on_ink(residual(values + shift * np.eye(3)[i]))) / shift
                for i, shift in enumerate(shifts)
            ]
        )
        hold = np.diag((scale / (_LOOSE * values)) ** 2)  # where a page does not show one of them
        move = np.linalg.solve((slopes * weight) @ slopes.T + hold, (slopes * weight) @ base)
        values = values + np.clip(move, -0.2 * values, 0.2 * values)
        left = residual(values)
    return Pen(width, *(float(v) for v in values)), _white_noise(left, regions)


def _drawn(view: View, line: Line, x0: float, step: float, pen: Pen) -> np.ndarray:
    image = pen.gain * view.other
    draw_line(image, line.y_px, x0, step, pen, line.tremor_px)
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

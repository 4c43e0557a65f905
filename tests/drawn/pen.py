"""The stroke of a round pen: every pixel is covered by its exact distance to the line.

A pixel's share of ink is 1 well inside the stroke, 0 well outside, and follows the distance of
its centre from the stroke's edge over the width of one pixel between. Within one stroke the
greatest share counts; separate strokes add up, as ink does.
"""

import numba
import numpy as np

from digitize.sheet import Raster


def draw_stroke(
    layer: np.ndarray,
    raster: Raster,
    x_mm: np.ndarray,
    y_mm: np.ndarray,
    *,
    pen_mm: float,
    amount: float | np.ndarray = 1.0,
) -> None:
    """Add a stroke through the points (x_mm, y_mm) to `layer`, float32, in place.

    `amount` is the ink in the middle of the stroke, one number or one per point; a NaN point
    lifts the pen.
    """
    col = np.ascontiguousarray(raster.col(np.asarray(x_mm, float)))
    row = np.ascontiguousarray(raster.row(np.asarray(y_mm, float)))
    radius_px = pen_mm / 2 * raster.px_per_mm
    ink = np.broadcast_to(np.asarray(amount, float), col.shape)
    reach = radius_px + 2
    top, left = int(np.nanmin(row) - reach), int(np.nanmin(col) - reach)
    bottom, right = int(np.nanmax(row) + reach) + 1, int(np.nanmax(col) + reach) + 1
    top, left = max(top, 0), max(left, 0)
    bottom, right = min(bottom, layer.shape[0]), min(right, layer.shape[1])
    if top >= bottom or left >= right:
        return
    cover = np.zeros((bottom - top, right - left), np.float32)
    _cover(cover, row - top, col - left, np.ascontiguousarray(ink), radius_px)
    layer[top:bottom, left:right] += cover


@numba.njit(cache=True)
def _cover(cover, row, col, ink, radius):  # type: ignore[no-untyped-def]
    """Greatest ink over all segments of a polyline, pixel by pixel, in place."""
    rows, cols = cover.shape
    reach = radius + 1.0
    for k in range(len(row) - 1):
        r0, c0, r1, c1 = row[k], col[k], row[k + 1], col[k + 1]
        if not (np.isfinite(r0) and np.isfinite(r1) and np.isfinite(c0) and np.isfinite(c1)):
            continue
        dr, dc = r1 - r0, c1 - c0
        length2 = dr * dr + dc * dc
        for i in range(
            max(0, int(np.floor(min(r0, r1) - reach))),
            min(rows, int(np.ceil(max(r0, r1) + reach)) + 1),
        ):
            for j in range(
                max(0, int(np.floor(min(c0, c1) - reach))),
                min(cols, int(np.ceil(max(c0, c1) + reach)) + 1),
            ):
                along = 0.0
                if length2 > 0:
                    along = ((i - r0) * dr + (j - c0) * dc) / length2
                    along = min(max(along, 0.0), 1.0)
                off_r, off_c = i - r0 - along * dr, j - c0 - along * dc
                share = radius - np.sqrt(off_r * off_r + off_c * off_c) + 0.5
                share = min(max(share, 0.0), 1.0) * ink[k]
                cover[i, j] = max(cover[i, j], share)

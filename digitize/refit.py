"""A stretch of a trace redrawn by a person, refined by the pen fit.

The points only say where to look: the line that they begin is fitted to the ink like any other,
with the strokes of all other panels drawn beside it. Where there is no ink under it, the trace
stays missing.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import scipy as sp

from digitize.course import BRIDGE_MM
from digitize.errors import NoTrace
from digitize.fit import STEP_MM, View, fit_line, start_from_edges
from digitize.ink import Ink
from digitize.path import cheapest_path, run_at, sharp_edges
from digitize.pen import Pen
from digitize.sheet import Raster
from digitize.trace import Stroke, redraw
from digitize.ways import EDGE

_HAND_MM = 2.5  # a hand's points lie so far from the ink at most
_STEEP_MM = 1.0  # and so far beside a flank
_NEAR_MM = 0.4  # ink so far from the trace's own must be explained
_MARGIN_MM = 3.0
_NOISE_FLOOR = 0.02  # of coverage, as for every trace
_NOTE = "a stretch was redrawn by a person and fitted to the ink"
_BARE = "no ink under a redrawn stretch: left out"


def refit(
    strokes: tuple[Stroke, ...], panel: int, points: Sequence[tuple[float, float]], ink: Ink
) -> Stroke:
    """Return the stroke of one panel with a stretch of it fitted anew.

    Parameters
    ----------
    strokes : tuple of Stroke
        Of all panels of the page.
    panel : int
        Whose stroke is redrawn.
    points : sequence of (float, float)
        Places on the paper in mm, from left to right.
    ink : Ink
        Of the page.

    Raises
    ------
    NoTrace
        The points lie off the panel's own stretch of paper, or there is no ink under them.
    """
    own = strokes[panel]
    given = np.array(points, float)
    inside = (own.x_mm >= given[0, 0]) & (own.x_mm <= given[-1, 0])
    if inside.sum() < 4:
        raise NoTrace("the points lie beside the panel: draw within its edges")
    x_mm = own.x_mm[inside]
    hand_mm = np.interp(x_mm, given[:, 0], given[:, 1])
    y_mm, sigma_mm = _fitted(x_mm, hand_mm, strokes, panel, ink)
    whole_y, whole_sigma = own.y_mm.copy(), own.sigma_mm.copy()
    whole_y[inside], whole_sigma[inside] = y_mm, sigma_mm
    notes = (*own.notes, _NOTE, *((_BARE,) if np.isnan(y_mm).any() else ()))
    return replace(
        own,
        y_mm=whole_y,
        sigma_mm=whole_sigma,
        unexplained=np.nan,  # of the panel as it was: no longer known
        notes=tuple(dict.fromkeys(notes)),
    )


def _fitted(
    x_mm: np.ndarray,
    hand_mm: np.ndarray,
    strokes: tuple[Stroke, ...],
    panel: int,
    ink: Ink,
) -> tuple[np.ndarray, np.ndarray]:
    """Heights and standard errors of the fitted nodes in mm; NaN where there is no ink."""
    own, px = strokes[panel], ink.raster.px_per_mm
    seen, corner = _cut_out(x_mm, hand_mm, ink)
    beside = redraw(
        tuple(replace(s, ink_gain=1.0) for k, s in enumerate(strokes) if k != panel),
        corner,
        seen.shape,
    )
    pen = Pen(own.pen_mm * px, own.blur_mm[0] * px, own.blur_mm[1] * px, own.ink_gain)
    x_px = corner.col(x_mm)
    edges = _edges(np.nan_to_num(seen) - beside, x_px, corner.row(hand_mm), px)
    inked = np.isfinite(edges[0])
    if not inked.any():
        raise NoTrace("there is no ink under the points: strike the stretch out instead")
    cols = np.arange(seen.shape[1])
    top, bottom = (np.interp(cols, cols[inked], side[inked]) for side in edges)
    start_px = start_from_edges(
        np.interp(x_px, cols, top), np.interp(x_px, cols, bottom), STEP_MM * px, pen.width_px / 2
    )
    near = np.stack([np.floor(top - _NEAR_MM * px), np.ceil(bottom + _NEAR_MM * px) + 1])
    rows = np.clip(near, 0, len(seen)).astype(np.int64)
    view = View(seen, beside, rows, max(ink.noise, _NOISE_FLOOR))
    line = fit_line(view, start_px, float(x_px[0]), STEP_MM * px, pen)
    gap = sp.ndimage.binary_opening(~inked, np.ones(max(round(BRIDGE_MM * px), 1)))
    bare = np.interp(x_px, cols, gap.astype(float)) > 0.5
    y_mm = np.where(bare, np.nan, corner.y_mm(line.y_px))
    return y_mm, np.where(bare, np.nan, line.sigma_px / px)


def _cut_out(x_mm: np.ndarray, hand_mm: np.ndarray, ink: Ink) -> tuple[np.ndarray, Raster]:
    """The ink about the points, NaN where it is hidden, and the raster of this cut-out."""
    raster, (rows, cols) = ink.raster, ink.density.shape
    row0 = int(np.clip(raster.row(hand_mm.min() - _MARGIN_MM), 0, rows - 2))
    row1 = int(np.clip(raster.row(hand_mm.max() + _MARGIN_MM) + 1, row0 + 2, rows))
    col0 = int(np.clip(raster.col(x_mm[0]), 0, cols - 2))
    col1 = int(np.clip(raster.col(x_mm[-1]) + 2, col0 + 2, cols))
    cut = (slice(row0, row1), slice(col0, col1))
    seen = np.where(ink.hidden[cut], np.nan, ink.density[cut]).astype(np.float32)
    return seen, Raster(float(raster.x_mm(col0)), float(raster.y_mm(row0)), raster.px_per_mm)


def _edges(
    density: np.ndarray, x_px: np.ndarray, hand_px: np.ndarray, px_per_mm: float
) -> np.ndarray:
    """Top and bottom of the ink that the hand means, (2, cols), NaN where there is none.

    The way of least cost through the ink, within reach of the hand's line.
    """
    rows, cols = density.shape
    hand = np.interp(np.arange(cols), x_px, hand_px)
    steep = 2 * round(_STEEP_MM * px_per_mm) + 1
    high = sp.ndimage.minimum_filter1d(hand, steep) - _HAND_MM * px_per_mm
    low = sp.ndimage.maximum_filter1d(hand, steep) + _HAND_MM * px_per_mm
    row = np.arange(rows)[:, None]
    within = np.where((row >= high) & (row <= low), density, 0).astype(np.float32)
    bare = np.clip(1 - within / EDGE, 0, 1).astype(np.float32)
    away = np.abs(np.arange(rows)[:, None] - hand[[0, -1]]) / px_per_mm
    span, _ = cheapest_path(bare, bare, away[:, 0], away[:, 1], px_per_mm)
    run = run_at(within, span, EDGE, round(_NEAR_MM * px_per_mm))
    return sharp_edges(within, run, EDGE)

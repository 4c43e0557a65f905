"""Ink between the traces that belongs to none of them: writing, stamps, dirt.

Where a trace was followed, its ink lies along the line. What lies elsewhere is something else, or
a stretch of trace that was missed. That one is long and crosses each column once, which neither
writing nor a stamp does for long; or it hangs on the line that was followed, as a wave whose top
was cut short. To take a wave off a tracing is worse than to leave a letter on it: in doubt, ink
stays.
"""

from collections.abc import Sequence

import cv2
import numpy as np

from digitize.ink import Ink, solid_ink
from digitize.sheet import Box, Raster

SPECK_MM = 0.5  # smaller in both directions: no letter, no stroke of one
_AROUND_MM = 0.4
_TRACE_MM = 8.0  # so long is a piece of trace that is told from writing
_PEN_MM = 1.0  # usual height of a trace in a column of pixels, at most
_ALONE = 0.95  # share of its columns that a trace crosses once
_STEEP = 2.0  # height over width of what may be the top of an R or the foot of an S


def stray_ink(
    ink: Ink, panels: Sequence[Box], lines: Sequence[np.ndarray], beside_mm: float
) -> list[np.ndarray]:
    """Return outlines, (n, 2) x and y in mm, of the ink within panels that belongs to no trace.

    The outlines are to be filled together, each crossing of one changing inside to outside.

    Parameters
    ----------
    ink : Ink
        Everything on the sheet.
    panels : sequence of Box
        Where the traces run.
    lines : sequence of (n, 2) array
        The traces, x and y in mm, without gaps.
    beside_mm : float
        What lies so near to a line is its own ink.
    """
    raster = ink.raster
    inside, near = np.zeros((2, *ink.density.shape), np.uint8)
    for box in panels:
        corners = _to_px(
            np.array([(box.left_mm, box.top_mm), (box.right_mm, box.bottom_mm)]), raster
        )
        cv2.rectangle(inside, corners[0].tolist(), corners[1].tolist(), 1, -1)
    width_px = max(round(2 * beside_mm * raster.px_per_mm), 3)
    for line in lines:
        cv2.polylines(near, [_to_px(line, raster)], False, 1, width_px)
    left_over = _without_traces(solid_ink(ink) & inside & (1 - near), near, raster.px_per_mm)
    reach = 2 * round(_AROUND_MM * raster.px_per_mm) + 1
    grown = cv2.dilate(left_over, np.ones((reach, reach), np.uint8))
    contours, _ = cv2.findContours(grown, cv2.RETR_CCOMP, cv2.CHAIN_APPROX_NONE)
    outlines = [contour[:, 0].astype(float) for contour in contours]
    return [
        np.stack([raster.x_mm(outline[:, 0]), raster.y_mm(outline[:, 1])], axis=1)
        for outline in outlines
    ]


def _without_traces(mask: np.ndarray, near: np.ndarray, px_per_mm: float) -> np.ndarray:
    """The pieces of a mask but for specks and for what looks like a trace."""
    _, labels, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=8)
    size = np.maximum(stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT])
    chosen = size >= SPECK_MM * px_per_mm
    chosen[0] = False
    hangs = np.zeros(len(stats), bool)
    hangs[labels[cv2.dilate(near, np.ones((3, 3), np.uint8)) > 0]] = True
    long = stats[:, cv2.CC_STAT_WIDTH] >= _TRACE_MM * px_per_mm
    for k in np.flatnonzero(chosen & (hangs | long)):
        left, top, width, height = stats[k, :4]
        piece = labels[top : top + height, left : left + width] == k
        steep = hangs[k] and height >= _STEEP * width
        chosen[k] = not (steep or _looks_like_a_trace(piece, px_per_mm, thin=not hangs[k]))
    return chosen[labels].astype(np.uint8)


def _looks_like_a_trace(piece: np.ndarray, px_per_mm: float, *, thin: bool) -> bool:
    """Whether a piece of ink crosses nearly every column once, as thin as a pen if need be."""
    starts = np.diff(np.pad(piece, ((1, 0), (0, 0))).astype(np.int8), axis=0) == 1
    once = np.mean(starts.sum(axis=0) == 1) >= _ALONE
    return bool(once and not (thin and np.median(piece.sum(axis=0)) > _PEN_MM * px_per_mm))


def _to_px(points_mm: np.ndarray, raster: Raster) -> np.ndarray:
    """Columns and rows of places on the paper, whole pixels."""
    columns_rows = np.stack([raster.col(points_mm[:, 0]), raster.row(points_mm[:, 1])], axis=1)
    return np.rint(columns_rows).astype(np.int32)

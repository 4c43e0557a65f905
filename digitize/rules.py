"""Straight lines that are no trace: frames, separators, the strokes of calibration marks.

Rows are found without the long ones, and printing is read without any: a lead name that touches
such a line, or stands inside a calibration mark, is then a word like the others.
"""

from collections.abc import Sequence
from dataclasses import replace

import cv2
import numpy as np

from digitize.ink import Ink, solid_ink
from digitize.marks import Mark
from digitize.sheet import Box, Raster

LONG_RULE_MM = 28.0  # a straight upright line this long is a frame or separator, no QRS
FLAT_RULE_MM = 70.0  # a straight level line this long is a frame
LETTER_MM = 4.0  # what is no higher may be a letter with two upright strokes
STROKE_MM = 0.6  # half a pen and its blur: ink of a mark's stroke lies this near to its middle
TOUCHING = 0.4  # density beside a stroke of what touches it
FAINTEST = 0.1  # density of ink that belongs to a stroke
THROUGH = 1.25  # an upright stroke this much higher than a word is no part of it


def straight_rules(mask: np.ndarray, ink: Ink) -> tuple[np.ndarray, tuple[Box, ...]]:
    """Return where long straight lines run.

    Parameters
    ----------
    mask : (rows, cols) uint8 array
        1 where there is solid ink.
    ink : Ink
        For its raster.

    Returns
    -------
    rules : (rows, cols) bool array
        Ink of level and upright lines.
    uprights : tuple of Box
        The upright ones.
    """
    scale = ink.raster.px_per_mm
    tall = np.ones((round(LONG_RULE_MM * scale), 1), np.uint8)
    wide = np.ones((1, round(FLAT_RULE_MM * scale)), np.uint8)
    upright, level = _opened(mask, tall), _opened(mask, wide)
    grow = np.ones((3, 3), np.uint8)
    boxes = _boxes(cv2.dilate(upright, grow), ink.raster) if upright.any() else ()
    return cv2.dilate(np.maximum(upright, level), grow) > 0, boxes


def _boxes(mask: np.ndarray, raster: Raster) -> tuple[Box, ...]:
    """One rectangle for each piece of a mask."""
    _, _, stats, _ = cv2.connectedComponentsWithStats(mask)
    return tuple(
        Box(
            raster.x_mm(left),
            raster.y_mm(top),
            raster.x_mm(left + width),
            raster.y_mm(top + height),
        )
        for left, top, width, height, _ in stats[1:]
    )


def _opened(mask: np.ndarray, kernel: np.ndarray) -> np.ndarray:
    """What of a mask the kernel fits into; on most pages nothing, which is known half-way."""
    left = cv2.erode(mask, kernel)
    return cv2.dilate(left, kernel) if left.any() else left


def lettering(ink: Ink, marks: Sequence[Mark]) -> Ink:
    """Return the ink without straight rules and without the strokes of calibration marks."""
    rules, _ = straight_rules(solid_ink(ink), ink)
    density = np.where(rules, np.float32(0), ink.density)
    for mark in marks:
        if mark.height_mm > LETTER_MM:
            _take_off(density, mark, ink)
    return replace(ink, density=density)


def without_crossings(ink: Ink, boxes: Sequence[Box]) -> Ink:
    """Return the ink without the upright strokes of a trace that cross the words in some boxes."""
    density, solid, scale = ink.density.copy(), solid_ink(ink), ink.raster.px_per_mm
    for box in boxes:
        high_mm = box.bottom_mm - box.top_mm
        rows = _within(
            ink.raster.row(box.top_mm - high_mm), ink.raster.row(box.bottom_mm + high_mm)
        )
        cols = _within(
            ink.raster.col(box.left_mm - high_mm), ink.raster.col(box.right_mm + high_mm)
        )
        tall = np.ones((max(round(THROUGH * high_mm * scale), 3), 1), np.uint8)
        stroke = cv2.morphologyEx(solid[rows, cols], cv2.MORPH_OPEN, tall)
        density[rows, cols][cv2.dilate(stroke, np.ones((3, 3), np.uint8)) > 0] = 0
    return replace(ink, density=density)


def _within(low: float, high: float) -> slice:
    return slice(max(round(low), 0), max(round(high), 0) + 1)


def _take_off(density: np.ndarray, mark: Mark, ink: Ink) -> None:
    """Blank the two upright strokes of a mark and its roof, in place.

    The median along a stroke is its own profile: a letter that touches it does not widen it.
    """
    raster = ink.raster
    reach = max(round(STROKE_MM * raster.px_per_mm), 1)
    rows = slice(max(round(raster.row(mark.top_mm)), 0), round(raster.row(mark.foot_mm)) + 1)
    cols = slice(max(round(raster.col(mark.left_mm)), 0), round(raster.col(mark.right_mm)) + 1)
    for side in (cols.start, cols.stop - 1):
        _blank(density[rows, max(side - reach, 0) : side + reach + 1])
    _blank(density[max(rows.start - reach, 0) : rows.start + reach + 1, cols].T)


def _blank(beside: np.ndarray) -> None:
    """Blank an upright stroke but where other ink touches it, in place."""
    own = np.median(beside, axis=0) > FAINTEST
    alone = (beside[:, ~own] < TOUCHING).all(axis=1)
    beside[np.ix_(alone, own)] = 0

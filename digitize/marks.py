"""Calibration marks: 1 mV for 200 ms, drawn as a rectangular pulse at the end of a row.

Two upright strokes of equal height, joined at the top by a level stroke, nothing inside. Height
is the gain, width the speed.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.ink import Ink, solid_ink
from digitize.sheet import Box

INK_LEVEL = 0.35
PULSE_S = 0.2  # common practice
HEIGHTS_MM = (2.5, 5.0, 10.0, 20.0, 40.0)  # of 1 mV
WIDTHS_MM = (2.5, 5.0, 10.0)
FULLEST = 0.3  # inked share of the inside: a lead name may stand there
HEIGHT_OFF = 0.12  # of a usual height: letters with two upright strokes are of any
STRAIGHT = 0.8  # share of a side that must be inked
LEVEL_MM = 0.15  # a recorder's pulse is level; the top of a QRS rises, sinks and is notched


@dataclass(frozen=True)
class Mark:
    """One calibration mark, by the middles of its strokes."""

    left_mm: float
    right_mm: float
    top_mm: float
    foot_mm: float

    @property
    def height_mm(self) -> float:
        """Height of 1 mV."""
        return self.foot_mm - self.top_mm

    @property
    def width_mm(self) -> float:
        """Width of 200 ms."""
        return self.right_mm - self.left_mm


def find_marks(ink: Ink) -> tuple[Mark, ...]:
    """Return the calibration marks of a sheet, left to right."""
    scale = ink.raster.px_per_mm
    mask = solid_ink(ink)
    tall = np.ones((round(0.8 * HEIGHTS_MM[0] * scale), 1), np.uint8)
    strokes = cv2.morphologyEx(mask, cv2.MORPH_OPEN, tall)
    strokes = cv2.dilate(strokes, np.ones((3, 3), np.uint8))
    _, _, stats, centres = cv2.connectedComponentsWithStats(strokes)
    keep = [
        (x, top + 1, top + height - 1)
        for (_, top, width, height, _), (x, _) in zip(stats[1:], centres[1:], strict=True)
        if width < 1.6 * scale and height < 1.25 * HEIGHTS_MM[-1] * scale
    ]
    keep.sort()
    marks = []
    for k, left in enumerate(keep):
        for right in keep[k + 1 :]:
            width = (right[0] - left[0]) / scale
            if width > 1.25 * WIDTHS_MM[-1]:
                break
            mark = _pulse(mask, ink, left, right)
            if mark is not None:
                marks.append(mark)
    return tuple(_apart(marks))


def mark_box(mark: Mark, tail_mm: float = 0.4) -> Box:
    """The rectangle that a mark covers."""
    return Box(
        mark.left_mm - tail_mm, mark.top_mm - tail_mm, mark.right_mm + tail_mm, mark.foot_mm + 0.4
    )


def _pulse(
    mask: np.ndarray,
    ink: Ink,
    left: tuple[float, int, int],
    right: tuple[float, int, int],
) -> Mark | None:
    """The pulse between two upright strokes, if they carry a level top and nothing inside."""
    scale = ink.raster.px_per_mm
    if abs(left[1] - right[1]) > 0.9 * scale or abs(left[2] - right[2]) > 1.2 * scale:
        return None
    width = (right[0] - left[0]) / scale
    height = (min(left[2], right[2]) - max(left[1], right[1])) / scale
    if not any(abs(width / w - 1) < 0.2 for w in WIDTHS_MM):
        return None
    if not any(abs(height / h - 1) < 0.2 for h in HEIGHTS_MM):
        return None
    a, b = round(left[0]) + 1, round(right[0])
    y0 = max(min(left[1], right[1]) - round(0.3 * scale), 0)
    y1 = max(left[1], right[1]) + round(0.9 * scale)
    roof = mask[y0:y1, a:b].any(axis=0).mean()
    inner = slice(a + round(0.5 * scale), b - round(0.5 * scale))
    bottom = min(left[2], right[2]) - round(0.8 * scale)
    inside = mask[y1 + round(0.3 * scale) : bottom, inner]
    if roof < 0.9 or (inside.size and inside.mean() > FULLEST):
        return None
    x0, x1 = ink.raster.x_mm(left[0]), ink.raster.x_mm(right[0])
    density = np.clip(ink.density, 0, 1)
    top = _level(density[y0:y1, inner], y0, ink)
    foot = _foot(density, ink, left, right)
    if top is None or _unevenness_mm(density[y0:y1, inner], scale) > LEVEL_MM:
        return None
    if foot is None:
        foot = float(ink.raster.y_mm((left[2] + right[2]) / 2)) - 0.15
    mark = Mark(float(x0), float(x1), top, foot)
    usual = any(abs(mark.height_mm / h - 1) < HEIGHT_OFF for h in HEIGHTS_MM)
    return mark if usual else None


def _level(part: np.ndarray, first_row: int, ink: Ink) -> float | None:
    """Height of a level stroke: the centroid of its ink."""
    weight = part.sum(axis=1)
    if weight.sum() < 1:
        return None
    row = float(np.sum(weight * np.arange(len(weight))) / weight.sum())
    return float(ink.raster.y_mm(first_row + row))


def _unevenness_mm(part: np.ndarray, px_per_mm: float) -> float:
    """Standard deviation of the height of a stroke along its length."""
    weight = part.sum(axis=0)
    inked = weight > INK_LEVEL
    if not inked.any():
        return np.inf
    height = np.arange(part.shape[0]) @ part[:, inked] / weight[inked]
    return float(np.std(height)) / px_per_mm


def _foot(
    density: np.ndarray, ink: Ink, left: tuple[float, int, int], right: tuple[float, int, int]
) -> float | None:
    """Height of the zero line next to the pulse, where a tail of it was drawn."""
    scale = ink.raster.px_per_mm
    found = []
    for x, side in ((left[0], -1), (right[0], 1)):
        bottom = left[2] if side < 0 else right[2]
        a, b = sorted((round(x + side * 0.4 * scale), round(x + side * 1.0 * scale)))
        y0, y1 = bottom - round(0.9 * scale), bottom + round(0.5 * scale)
        part = density[max(y0, 0) : y1, max(a, 0) : b]
        if part.size and (part > INK_LEVEL).any(axis=0).mean() > STRAIGHT:
            level = _level(part, max(y0, 0), ink)
            if level is not None:
                found.append(level)
    return float(np.mean(found)) if found else None


def _apart(marks: list[Mark]) -> list[Mark]:
    """Of marks that overlap, the one nearest to a usual size."""

    def oddity(mark: Mark) -> float:
        return min(abs(mark.height_mm / h - 1) for h in HEIGHTS_MM) + min(
            abs(mark.width_mm / w - 1) for w in WIDTHS_MM
        )

    kept: list[Mark] = []
    for mark in sorted(marks, key=oddity):
        if all(
            mark.left_mm > k.right_mm - 0.5
            or mark.right_mm < k.left_mm + 0.5
            or mark.top_mm > k.foot_mm
            or mark.foot_mm < k.top_mm
            for k in kept
        ):
            kept.append(mark)
    return sorted(kept, key=lambda m: (m.left_mm, m.top_mm))

"""Unbroken lines of a drawing that could be traces: left to right, in millimetres.

A recorder's program may draw a row, a lead, a beat or a single sample with one stroke: strokes that
share an end are joined first. That the page shows a line at all is checked against the ink.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np
import scipy as sp

from digitize.drawing import Drawing, DrawnLine
from digitize.grid import Grid
from digitize.ink import Ink
from digitize.sheet import Raster

SAME_END_PX = 0.25  # ends of one line that was cut: coordinates are rounded, pens are 2 px wide
LONG_MM = 20.0  # a single straight piece this long is a rule or a frame
LEAST_MM = 1.0  # shorter lines are ticks and letters
BACK_PX = 0.01  # a trace never runs backward in time by more than rounding
INKED, SEEN_SHARE = 0.2, 0.7  # density and share of a line that the page shows


@dataclass(frozen=True, eq=False)
class Course:
    """One line in millimetres, left to right; `step_mm` is the resolution of its coordinates."""

    x_mm: np.ndarray
    y_mm: np.ndarray
    pen_mm: float
    step_mm: float

    @property
    def length_mm(self) -> float:
        """Length across the page."""
        return float(self.x_mm[-1] - self.x_mm[0])

    def height_mm(self, left_mm: float, right_mm: float) -> float:
        """Usual height between two places that the line reaches into."""
        x_mm = np.linspace(max(left_mm, self.x_mm[0]), min(right_mm, self.x_mm[-1]), 200)
        return float(np.median(np.interp(x_mm, self.x_mm, self.y_mm)))

    def apart_from(self, other: "Course") -> bool:
        """Whether the two lines are nowhere above one another: parts of one trace."""
        return bool(self.x_mm[-1] <= other.x_mm[0] or other.x_mm[-1] <= self.x_mm[0])

    def overlap_mm(self, left_mm: float, right_mm: float) -> float:
        """Length that the line and a span have in common."""
        return min(right_mm, float(self.x_mm[-1])) - max(left_mm, float(self.x_mm[0]))


def find_courses(drawing: Drawing, grid: Grid, ink: Ink) -> list[Course]:
    """Return the lines of a drawing that run from left to right and can be seen."""
    shown = cv2.dilate(ink.density, np.ones((3, 3), np.uint8)) > INKED
    return [c for c in _rightward_courses(drawing, grid) if _is_seen(c, shown, ink.raster)]


def _rightward_courses(drawing: Drawing, grid: Grid) -> list[Course]:
    """Joined lines that run from left to right, in millimetres."""
    scale = float(np.mean(grid.px_per_mm))
    courses = []
    for points, line in _joined([_rightward(line) for line in drawing.lines]):
        along = np.diff(points[:, 0])
        straight = len(points) == 2 and float(np.hypot(*(points[1] - points[0]))) > LONG_MM * scale
        if straight or along.sum() < LEAST_MM * scale or along.min() < -BACK_PX:
            continue
        x_mm, y_mm = grid.page_map.to_mm(*points.T)
        courses.append(Course(x_mm, y_mm, line.width_px / scale, line.step_px / scale))
    return courses


def _rightward(line: DrawnLine) -> DrawnLine:
    if line.points_px[0, 0] <= line.points_px[-1, 0]:
        return line
    return replace(line, points_px=line.points_px[::-1])


def _joined(lines: Sequence[DrawnLine]) -> list[tuple[np.ndarray, DrawnLine]]:
    """Vertices of lines that continue one another, with the line of finest coordinates of each.

    The line drawn next is looked at first: where traces cross, others may begin at the same place.
    """
    starts = np.array([line.points_px[0] for line in lines]).reshape(-1, 2)
    ends = np.array([line.points_px[-1] for line in lines]).reshape(-1, 2)
    free = np.ones(len(lines), bool)
    tree = sp.spatial.cKDTree(starts) if len(lines) else None
    following: dict[int, int] = {}
    for k, end in enumerate(ends):
        near = [] if tree is None else tree.query_ball_point(end, SAME_END_PX)
        near = [j for j in near if free[j] and j != k and _alike(lines[j], lines[k])]
        if near:
            following[k] = min(near, key=lambda j: (j != k + 1, abs(j - k)))
            free[following[k]] = False
    joined = []
    for k in np.flatnonzero(free).tolist():
        chain = [k]
        while chain[-1] in following:
            chain.append(following[chain[-1]])
        parts = [lines[chain[0]].points_px, *(lines[j].points_px[1:] for j in chain[1:])]
        # Few coordinates may seem coarser than they are: the finest line speaks for all.
        joined.append((np.concatenate(parts), min((lines[j] for j in chain), key=_fineness)))
    return joined


def _alike(one: DrawnLine, other: DrawnLine) -> bool:
    return abs(one.width_px - other.width_px) < 0.1 * max(one.width_px, 0.1)


def _fineness(line: DrawnLine) -> float:
    return line.step_px


def _is_seen(course: Course, shown: np.ndarray, raster: Raster) -> bool:
    """Whether the page shows ink along a line."""
    row = np.rint(raster.row(course.y_mm)).astype(int)
    col = np.rint(raster.col(course.x_mm)).astype(int)
    rows, cols = shown.shape
    inside = (row >= 0) & (row < rows) & (col >= 0) & (col < cols)
    return bool(shown[row[inside], col[inside]].sum() >= SEEN_SHARE * len(row))

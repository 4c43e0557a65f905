"""Traces of a drawing: the samples are the vertices of its lines, so no pen has to be fitted.

A recorder's program may draw a row, a lead, a beat or a single sample with one stroke: strokes that
share an end are joined first. Which line is which panel's is settled for all rows of a column
together, by height; that the page shows it at all is checked against the ink.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np
import scipy as sp

from digitize.drawing import Drawing, DrawnLine
from digitize.grid import Grid
from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.sheet import Box, Raster
from digitize.trace import Stroke
from digitize.tracing import FS_HZ

SAME_END_PX = 0.25  # ends of one line that was cut: coordinates are rounded, pens are 2 px wide
LONG_MM = 20.0  # a single straight piece this long is a rule or a frame
BACK_PX = 0.01  # a trace never runs backward in time by more than rounding
MAIN_SHARE = 0.5  # of a panel's width that its line covers at least
EDGE_MM = 2.5  # a line that begins or ends this near the edge of its panel is that edge
INKED, SEEN_SHARE = 0.2, 0.7  # density and share of a line that the page shows


@dataclass(frozen=True, eq=False)
class _Course:
    """One line in millimetres, left to right; `step_mm` is the resolution of its coordinates."""

    x_mm: np.ndarray
    y_mm: np.ndarray
    pen_mm: float
    step_mm: float

    def within(self, left_mm: float, right_mm: float) -> np.ndarray:
        """Which vertices lie between two places."""
        return (self.x_mm >= left_mm) & (self.x_mm <= right_mm)

    def overlap_mm(self, left_mm: float, right_mm: float) -> float:
        """Length that the line and a span have in common."""
        return min(right_mm, float(self.x_mm[-1])) - max(left_mm, float(self.x_mm[0]))


def drawn_strokes(
    drawing: Drawing, grid: Grid, layout: Layout, ink: Ink
) -> tuple[Layout, tuple[Stroke | None, ...]]:
    """Return the strokes that a drawing holds, and the layout with its edges made exact.

    Parameters
    ----------
    drawing : Drawing
    grid : Grid
        Millimetres of the page.
    layout : Layout
        Panels as they were found in the picture of the page.
    ink : Ink
        What the page shows: a line without ink is hidden and does not count.

    Returns
    -------
    layout : Layout
        Where a line begins or ends next to the edge of its panel, that is the edge.
    strokes : tuple of Stroke or None
        In the order of `layout.panels`; None where no line of the drawing is the panel's trace.
    """
    shown = cv2.dilate(ink.density, np.ones((3, 3), np.uint8)) > INKED
    courses = [c for c in _courses(drawing, grid) if _is_seen(c, shown, ink.raster)]
    chosen = _assign(layout.panels, courses)
    places = [
        place if not own else _exact(place, own)
        for place, own in zip(layout.panels, chosen, strict=True)
    ]
    start_mm = min((p.box.left_mm for p in places), default=0.0)
    timed = tuple(
        replace(p, start_s=(p.box.left_mm - start_mm) / p.speed_mm_s) if p.start_s > 0 else p
        for p in places
    )
    strokes = tuple(
        _stroke(place, own) if own else None for place, own in zip(timed, chosen, strict=True)
    )
    return replace(layout, panels=timed), strokes


def _courses(drawing: Drawing, grid: Grid) -> list[_Course]:
    """Joined lines that run from left to right, in millimetres."""
    scale = float(np.mean(grid.px_per_mm))
    courses = []
    for points, line in _joined([_rightward(line) for line in drawing.lines]):
        along = np.diff(points[:, 0])
        straight = len(points) == 2 and float(np.hypot(*(points[1] - points[0]))) > LONG_MM * scale
        if straight or along.sum() <= 0 or along.min() < -BACK_PX:
            continue
        x_mm, y_mm = grid.page_map.to_mm(*points.T)
        courses.append(_Course(x_mm, y_mm, line.width_px / scale, line.step_px / scale))
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


def _is_seen(course: _Course, shown: np.ndarray, raster: Raster) -> bool:
    """Whether the page shows ink along a line."""
    row = np.rint(raster.row(course.y_mm)).astype(int)
    col = np.rint(raster.col(course.x_mm)).astype(int)
    rows, cols = shown.shape
    inside = (row >= 0) & (row < rows) & (col >= 0) & (col < cols)
    return bool(shown[row[inside], col[inside]].sum() >= SEEN_SHARE * len(row))


def _assign(panels: Sequence[PanelPlace], courses: Sequence[_Course]) -> list[list[_Course]]:
    """The lines of each panel, left to right; empty where it has none."""
    chosen: list[list[_Course]] = [[] for _ in panels]
    for span in {(p.box.left_mm, p.box.right_mm) for p in panels}:
        there = [k for k, p in enumerate(panels) if _covers(p.box, span)]
        long = [c for c in courses if c.overlap_mm(*span) > MAIN_SHARE * (span[1] - span[0])]
        if not long:
            continue
        height = np.array([np.median(c.y_mm[c.within(*span)]) for c in long])
        usual = np.array([(panels[k].box.top_mm + panels[k].box.bottom_mm) / 2 for k in there])
        away = np.abs(usual[:, None] - height[None, :])
        for row, col in zip(*sp.optimize.linear_sum_assignment(away), strict=True):
            panel = panels[there[row]]
            high = panel.box.bottom_mm - panel.box.top_mm
            if (panel.box.left_mm, panel.box.right_mm) == span and away[row, col] < high:
                chosen[there[row]] = [long[col]]
    return chosen


def _covers(box: Box, span: tuple[float, float]) -> bool:
    common = min(box.right_mm, span[1]) - max(box.left_mm, span[0])
    return common > MAIN_SHARE * (span[1] - span[0])


def _exact(place: PanelPlace, own: Sequence[_Course]) -> PanelPlace:
    """The panel from the first to behind the last sample of its line."""
    box, step_mm = place.box, place.speed_mm_s / FS_HZ
    x_mm = np.concatenate([course.x_mm for course in own])
    left, right = float(x_mm[0]), float(x_mm[-1]) + step_mm
    if left < box.left_mm - EDGE_MM:  # the line began in an earlier column
        left = float(x_mm[np.argmin(np.abs(x_mm - box.left_mm))])
    if right > box.right_mm + EDGE_MM:
        right = float(x_mm[np.argmin(np.abs(x_mm - box.right_mm))])
    edges = {
        "left_mm": left if left < box.left_mm + EDGE_MM else box.left_mm,
        "right_mm": right if right > box.right_mm - EDGE_MM else box.right_mm,
    }
    return replace(place, box=replace(box, **edges))


def _stroke(place: PanelPlace, own: Sequence[_Course]) -> Stroke:
    """The line at the places of the panel's samples."""
    box, course = place.box, own[0]
    first = round(place.start_s * FS_HZ)
    count = max(round((box.right_mm - box.left_mm) / place.speed_mm_s * FS_HZ), 2)
    time_s = (first + np.arange(count)) / FS_HZ
    x_mm = box.left_mm + (time_s - place.start_s) * place.speed_mm_s
    near = np.clip(x_mm, course.x_mm[0], course.x_mm[-1])
    outside = np.abs(near - x_mm) > course.step_mm + 1e-3
    y_mm = np.where(outside, np.nan, np.interp(near, course.x_mm, course.y_mm))
    slope = np.gradient(y_mm, x_mm)
    rounding_mm = course.step_mm / np.sqrt(12)
    sigma_mm = np.hypot(rounding_mm * np.hypot(1, slope), _hidden_mm(near, course))
    return Stroke(x_mm, y_mm, np.where(outside, np.nan, sigma_mm), course.pen_mm, 0.0)


def _hidden_mm(x_mm: np.ndarray, course: _Course) -> np.ndarray:
    """What the straight pieces between vertices can hide: a parabola's distance from its chord."""
    x, y = course.x_mm, course.y_mm
    bend = np.zeros(len(x))
    if len(x) > 2:
        bend[1:-1] = np.abs(y[1:-1] - 0.5 * (y[:-2] + y[2:]))
    left = np.clip(np.searchsorted(x, x_mm, side="right") - 1, 0, len(x) - 2)
    share = np.clip((x_mm - x[left]) / np.maximum(x[left + 1] - x[left], 1e-9), 0, 1)
    return share * (1 - share) * np.maximum(bend[left], bend[left + 1])

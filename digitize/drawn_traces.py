"""Traces of a drawing: the samples are the vertices of its lines, so no pen has to be fitted.

Which line is which panel's is settled for all rows of a column together, by height.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import scipy as sp

from digitize.drawing import Drawing
from digitize.drawn_edges import exact_panels
from digitize.drawn_lines import LEAST_MM, Course, find_courses
from digitize.grid import Grid
from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.sheet import Box
from digitize.trace import Stroke
from digitize.tracing import FS_HZ

MAIN_SHARE = 0.5  # of a panel's width that its line covers at least
MOSTLY = 0.8  # of a line that lies in a panel if it belongs there
ROUNDING_MM = 1e-3


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
    chosen = _assign(layout.panels, find_courses(drawing, grid, ink))
    panels = exact_panels(layout.panels, chosen, layout.marks)
    strokes = tuple(
        _stroke(panel, own) if own else None for panel, own in zip(panels, chosen, strict=True)
    )
    return replace(layout, panels=panels), strokes


def _assign(panels: Sequence[PanelPlace], courses: Sequence[Course]) -> list[list[Course]]:
    """The lines of each panel, left to right; empty where it has none."""
    chosen: list[list[Course]] = [[] for _ in panels]
    for span in sorted({(p.box.left_mm, p.box.right_mm) for p in panels}):
        there = [k for k, p in enumerate(panels) if _covers(p.box, span)]
        usual = np.array([(panels[k].box.top_mm + panels[k].box.bottom_mm) / 2 for k in there])
        inside = [c for c in courses if c.overlap_mm(*span) > LEAST_MM]
        long = [c for c in inside if c.overlap_mm(*span) > MAIN_SHARE * (span[1] - span[0])]
        away = np.array([np.abs(usual - c.height_mm(*span)) for c in long]).reshape(-1, len(usual))
        own: list[list[Course]] = [[] for _ in there]
        for line, row in zip(*sp.optimize.linear_sum_assignment(away), strict=True):
            own[row] = [long[line]]
        for piece in (c for c in inside if c.overlap_mm(*span) > MOSTLY * c.length_mm):
            row = int(np.argmin(np.abs(usual - piece.height_mm(*span))))
            if own[row] and all(c.apart_from(piece) for c in own[row]):
                own[row].append(piece)
        for k, lines in zip(there, own, strict=True):
            box = panels[k].box
            near = [c for c in lines if box.top_mm < c.height_mm(*span) < box.bottom_mm]
            if (box.left_mm, box.right_mm) == span:
                chosen[k] = sorted(near, key=_start_mm)
    return chosen


def _start_mm(course: Course) -> float:
    return float(course.x_mm[0])


def _covers(box: Box, span: tuple[float, float]) -> bool:
    common = min(box.right_mm, span[1]) - max(box.left_mm, span[0])
    return common > MAIN_SHARE * (span[1] - span[0])


def _stroke(place: PanelPlace, own: Sequence[Course]) -> Stroke:
    """The lines at the places of the panel's samples."""
    box = place.box
    first = round(place.start_s * FS_HZ)
    count = max(round((box.right_mm - box.left_mm) / place.speed_mm_s * FS_HZ), 2)
    time_s = (first + np.arange(count)) / FS_HZ
    x_mm = box.left_mm + (time_s - place.start_s) * place.speed_mm_s
    y_mm, sigma_mm = np.full(count, np.nan), np.full(count, np.nan)
    for course in own:
        near = np.clip(x_mm, course.x_mm[0], course.x_mm[-1])
        there = np.abs(near - x_mm) < course.step_mm + ROUNDING_MM
        y_mm[there] = np.interp(near[there], course.x_mm, course.y_mm)
        sigma_mm[there] = _sigma_mm(near[there], course)
    notes = ("the document draws no line here",) if np.isnan(y_mm).any() else ()
    return Stroke(x_mm, y_mm, sigma_mm, own[0].pen_mm, 0.0, notes)


def _sigma_mm(x_mm: np.ndarray, course: Course) -> np.ndarray:
    """Rounding of the coordinates, and what the straight pieces between vertices can hide.

    What they hide of a parabola is share (1 - share) of the middle vertex's height over its chord.
    """
    x, y = course.x_mm, course.y_mm
    bend = np.zeros(len(x))
    bend[1:-1] = np.abs(y[1:-1] - 0.5 * (y[:-2] + y[2:]))
    left = np.clip(np.searchsorted(x, x_mm, side="right") - 1, 0, len(x) - 2)
    width = np.maximum(np.diff(x), course.step_mm)[left]
    share = np.clip((x_mm - x[left]) / width, 0, 1)
    hidden_mm = 2 * share * (1 - share) * np.maximum(bend[left], bend[left + 1])
    rounding_mm = course.step_mm / np.sqrt(12)
    return np.hypot(rounding_mm * np.hypot(1, np.diff(y)[left] / width), hidden_mm)

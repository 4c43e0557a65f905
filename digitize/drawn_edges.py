"""Where the panels of a drawing begin and end: at a vertex of their lines, not at a pixel."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from digitize.drawn_lines import Course
from digitize.layout import PanelPlace
from digitize.sheet import Box
from digitize.tracing import FS_HZ

EDGE_MM = 5.0  # a line that begins or ends this near the edge found for its panel is the edge
PEN_MM = 0.5  # an edge found in the picture is this near to the line's own end
BREAK_MM = 1.0  # a line that runs on breaks this near the edge found in the picture
STEP_MM = 0.05  # a break is a step at least so much higher than those beside it
CLEAR = 2.0  # times the next highest


def exact_panels(
    panels: Sequence[PanelPlace], own: Sequence[Sequence[Course]], marks: Sequence[Box]
) -> tuple[PanelPlace, ...]:
    """Return the panels from the first to behind the last sample of their lines.

    Parameters
    ----------
    panels : sequence of PanelPlace
        With edges found in the picture of the page.
    own : sequence of sequences of Course
        The lines of each panel, left to right; none: the panel stays as it is.
    marks : sequence of Box
        Calibration marks, which may be drawn with the same stroke as the trace.
    """
    edges = sorted({edge for p in panels for edge in (p.box.left_mm, p.box.right_mm)})
    breaks = {edge: _break_mm(edge, panels, own) for edge in edges}
    placed = [
        _exact(panel, lines, marks, breaks) if lines else panel
        for panel, lines in zip(panels, own, strict=True)
    ]
    start_mm = min((panel.box.left_mm for panel in placed), default=0.0)
    return tuple(
        replace(p, start_s=(p.box.left_mm - start_mm) / p.speed_mm_s) if p.start_s > 0 else p
        for p in placed
    )


def _exact(
    place: PanelPlace, own: Sequence[Course], marks: Sequence[Box], breaks: dict[float, float]
) -> PanelPlace:
    """One panel; where its line comes from elsewhere, it begins at the break."""
    box = place.box
    x_mm = np.concatenate([course.x_mm for course in own])
    ends = float(x_mm[0]), float(x_mm[-1]) + place.speed_mm_s / FS_HZ
    edges = []
    for end, found in zip(ends, (box.left_mm, box.right_mm), strict=True):
        left, right = min(end, found), max(end, found)
        marked = right - left > PEN_MM and any(
            mark.left_mm < right and mark.right_mm > left and _beside(mark, box) for mark in marks
        )
        nearest = float(x_mm[np.argmin(np.abs(x_mm - breaks[found]))])
        edges.append(end if right - left < EDGE_MM and not marked else nearest)
    return replace(place, box=replace(box, left_mm=edges[0], right_mm=edges[1]))


def _beside(mark: Box, box: Box) -> bool:
    """Whether a mark belongs to the row of a panel."""
    return mark.top_mm < box.bottom_mm and mark.bottom_mm > box.top_mm


def _break_mm(
    edge_mm: float, panels: Sequence[PanelPlace], own: Sequence[Sequence[Course]]
) -> float:
    """The vertex at which the lines that run on through an edge jump to their next lead.

    A jump is one step alone: the flanks of a QRS take several of about the same height. All rows
    jump at the same place. Where none clearly does, the edge is where columns of equal length meet
    if that is where it was found, else as it was found.
    """
    ending = [
        line
        for panel, lines in zip(panels, own, strict=True)
        if edge_mm in (panel.box.left_mm, panel.box.right_mm)
        for line in lines
    ]
    score: dict[float, float] = {}
    for course in {id(c): c for c in ending if c.x_mm[0] < edge_mm < c.x_mm[-1]}.values():
        near = np.flatnonzero(np.abs(course.x_mm - edge_mm) < BREAK_MM)
        near = near[(near >= 2) & (near < len(course.x_mm) - 1)]
        step = np.abs(np.diff(course.y_mm))  # step k leads to vertex k + 1
        alone = step[near - 1] - step[near - 2] - step[near]
        for x_mm, height_mm in zip(course.x_mm[near], alone, strict=True):
            place = round(float(x_mm), 2)
            score[place] = score.get(place, 0.0) + max(float(height_mm), 0.0)
    ranked = sorted(score, key=lambda x_mm: -score[x_mm])
    if ranked and score[ranked[0]] > max(STEP_MM, CLEAR * sum(score[x] for x in ranked[1:2])):
        return ranked[0]
    return _even_mm(edge_mm, panels, ending)


def _even_mm(edge_mm: float, panels: Sequence[PanelPlace], ending: Sequence[Course]) -> float:
    """Where columns of equal length would meet, if the edge was found there."""
    columns = max(panel.column for panel in panels) + 1
    if not ending:
        return edge_mm
    left = float(np.median([course.x_mm[0] for course in ending]))
    right = float(np.median([2 * course.x_mm[-1] - course.x_mm[-2] for course in ending]))
    even = left + (right - left) * round((edge_mm - left) / (right - left) * columns) / columns
    return even if abs(even - edge_mm) < PEN_MM else edge_mm

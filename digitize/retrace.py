"""The traces once more where the ink was changed, the rest of each line kept.

What a trace does far from a stamp does not depend on the stamp. So the trace stage is given the
strip of paper about the change alone, and the lines it finds there replace the earlier ones.
"""

from dataclasses import replace

import numpy as np

from digitize.fit import STEP_MM
from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.sheet import Box, Raster
from digitize.trace import Stroke, trace_panels

_ASTRAY_MM = 5.0  # so far beside the change may a line have been led astray
_LEAD_IN_MM = 8.0  # and so much more is given to the search, to find its way in
_SHORTEST_MM = 2.0  # of a panel that is worth a search
_NOTE = "a region was marked to be ignored: the line about it was followed again without it"


def retrace(
    ink: Ink, layout: Layout, strokes: tuple[Stroke, ...], changed: Box
) -> tuple[Stroke, ...]:
    """Return the strokes with those parts traced anew that a change of the ink can reach.

    All traces beside the change are searched together, since they share its ink; those in other
    rows that never came near it stay as they were.

    Parameters
    ----------
    ink : Ink
        As it is after the change.
    layout : Layout
        Whose panels the strokes belong to, in the same order.
    strokes : tuple of Stroke
        As they were before the change.
    changed : Box
        Where the ink was changed.
    """
    core = changed.left_mm - _ASTRAY_MM, changed.right_mm + _ASTRAY_MM
    wide = core[0] - _LEAD_IN_MM, core[1] + _LEAD_IN_MM
    touched = [k for k, p in enumerate(layout.panels) if _shared_mm(p, *wide) > _SHORTEST_MM]
    if not touched:
        return strokes
    firsts = {k: _first_node(layout.panels[k], wide[0]) for k in touched}
    panels = tuple(_cut(layout.panels[k], firsts[k], wide[1]) for k in touched)
    part = replace(layout, panels=panels)
    again = trace_panels(_strip(ink, *wide), part)
    new = list(strokes)
    for k, stroke in zip(touched, again, strict=True):
        if _met(layout.panels[k], strokes[k], changed):
            new[k] = _spliced(strokes[k], stroke, firsts[k], core)
    return tuple(new)


def _met(panel: PanelPlace, stroke: Stroke, changed: Box) -> bool:
    """Whether a change lies in a panel's row or on its line."""
    if min(panel.box.bottom_mm, changed.bottom_mm) > max(panel.box.top_mm, changed.top_mm):
        return True
    near = np.abs(stroke.x_mm - (changed.left_mm + changed.right_mm) / 2) < _ASTRAY_MM + (
        (changed.right_mm - changed.left_mm) / 2
    )
    y_mm = stroke.y_mm[near]
    return bool(((y_mm > changed.top_mm) & (y_mm < changed.bottom_mm)).any())


def _shared_mm(panel: PanelPlace, left_mm: float, right_mm: float) -> float:
    return min(panel.box.right_mm, right_mm) - max(panel.box.left_mm, left_mm)


def _first_node(panel: PanelPlace, left_mm: float) -> int:
    """The first node of a panel's line at or after a place."""
    return max(int(np.ceil((left_mm - panel.box.left_mm) / STEP_MM)), 0)


def _cut(panel: PanelPlace, first: int, right_mm: float) -> PanelPlace:
    """The part of a panel from one of its nodes on."""
    left_mm = panel.box.left_mm + first * STEP_MM
    box = replace(panel.box, left_mm=left_mm, right_mm=min(panel.box.right_mm, right_mm))
    return replace(panel, box=box)


def _strip(ink: Ink, left_mm: float, right_mm: float) -> Ink:
    """The ink between two places."""
    cols = ink.density.shape[1]
    first = int(np.clip(ink.raster.col(left_mm) - 1, 0, cols - 2))
    last = int(np.clip(np.ceil(ink.raster.col(right_mm)) + 2, first + 2, cols))
    raster = Raster(ink.raster.x_mm(float(first)), ink.raster.top_mm, ink.raster.px_per_mm)
    part = np.s_[:, first:last]
    return replace(
        ink,
        density=np.ascontiguousarray(ink.density[part]),
        hidden=np.ascontiguousarray(ink.hidden[part]),
        raster=raster,
    )


def _spliced(old: Stroke, new: Stroke, first: int, core: tuple[float, float]) -> Stroke:
    """A stroke with its nodes near the change taken from a new one that begins at node `first`."""
    count = min(len(new.x_mm), len(old.x_mm) - first)
    x_mm = old.x_mm[first : first + count]
    near = np.flatnonzero((x_mm >= core[0]) & (x_mm <= core[1]))
    y_mm, sigma_mm = old.y_mm.copy(), old.sigma_mm.copy()
    y_mm[first + near], sigma_mm[first + near] = new.y_mm[near], new.sigma_mm[near]
    notes = tuple(dict.fromkeys((*old.notes, *new.notes, _NOTE)))
    return replace(old, y_mm=y_mm, sigma_mm=sigma_mm, notes=notes)

"""Traces of other panels cut out of the lines of the same rows.

Another arrangement cuts the rows of a page in other places and gives the pieces other names; the
line that the pen drew along a row stays what it is. It is followed anew only where it was not
followed before, or where the ink that it was followed by is no longer there.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from digitize.calibrate import read_off
from digitize.fit import STEP_MM
from digitize.ink import SOLID, Ink
from digitize.layout import Layout, PanelPlace
from digitize.trace import Stroke

_SAME_ROW_MM = 2.0  # between two places of the zero line: the row was found at the same height
_ASTRAY_MM = 5.0  # so far above and below a row may ink have led its trace astray
_UNREACHED_MM = 0.3  # of a panel that no earlier line reaches: shorter than any wave
_JOINED_MM = 0.15  # nodes of one line stand 0.05 mm apart: more than this between two is a gap


def recut(
    before: Layout, strokes: Sequence[Stroke], seen: Ink, after: Layout, ink: Ink
) -> tuple[Stroke, ...] | None:
    """Return the strokes of the panels of another layout; None where they must be traced.

    Parameters
    ----------
    before, strokes, seen
        The panels that were traced, their strokes, the ink in which they were.
    after, ink
        The panels that are wanted, and the ink that is left: parts of it may be hidden since.
    """
    if any(_lost_ink(panel, seen, ink) for panel in after.panels):
        return None
    cut = [_cut(panel, before, strokes) for panel in after.panels]
    found = tuple(stroke for stroke in cut if stroke is not None)
    return found if len(found) == len(cut) else None


def joined(own: Stroke, strokes: Sequence[Stroke]) -> Stroke:
    """All strokes of one row as one, with a missing node in each gap between them."""
    parts: list[np.ndarray] = []
    last_mm = -np.inf
    for stroke in sorted(strokes, key=lambda s: s.x_mm[0]):
        tremor_mm = np.broadcast_to(stroke.tremor_mm, stroke.x_mm.shape)
        nodes = np.stack([stroke.x_mm, stroke.y_mm, stroke.sigma_mm, tremor_mm])
        nodes = nodes[:, nodes[0] > last_mm + 1e-9]
        if parts and nodes.shape[1] and nodes[0, 0] - last_mm > _JOINED_MM:
            parts.append(np.array([[(last_mm + nodes[0, 0]) / 2], [np.nan], [np.nan], [0.0]]))
        if nodes.shape[1]:
            parts.append(nodes)
            last_mm = float(nodes[0, -1])
    x_mm, y_mm, sigma_mm, tremor_mm = np.concatenate(parts, axis=1)
    return replace(own, x_mm=x_mm, y_mm=y_mm, sigma_mm=sigma_mm, tremor_mm=tremor_mm)


def _lost_ink(panel: PanelPlace, seen: Ink, ink: Ink) -> bool:
    """Whether ink that a panel's trace may have followed is hidden now."""
    if ink is seen:
        return False
    box, raster, (rows, cols) = panel.box, ink.raster, ink.hidden.shape
    top, bottom = raster.row(box.top_mm - _ASTRAY_MM), raster.row(box.bottom_mm + _ASTRAY_MM)
    down = slice(*np.clip([int(top), int(bottom) + 1], 0, rows))
    across = slice(
        *np.clip([int(raster.col(box.left_mm)), int(raster.col(box.right_mm)) + 1], 0, cols)
    )
    hidden = ink.hidden[down, across] & ~seen.hidden[down, across]
    return bool((seen.density[down, across][hidden] > SOLID).any())


def _cut(panel: PanelPlace, before: Layout, strokes: Sequence[Stroke]) -> Stroke | None:
    """The stretch of the panel out of the line of its row; None where that does not reach it."""
    nearest = min(before.panels, key=lambda p: abs(p.baseline_mm - panel.baseline_mm))
    if abs(nearest.baseline_mm - panel.baseline_mm) > _SAME_ROW_MM:
        return None
    box = panel.box
    beside = [
        stroke
        for stroke, place in zip(strokes, before.panels, strict=True)
        if place.row == nearest.row
        and min(place.box.right_mm, box.right_mm) > max(place.box.left_mm, box.left_mm)
    ]
    reached = sum(
        min(stroke.x_mm[-1], box.right_mm) - max(stroke.x_mm[0], box.left_mm) for stroke in beside
    )
    if box.right_mm - box.left_mm - reached > _UNREACHED_MM:
        return None
    own = max(beside, key=lambda stroke: stroke.unexplained)
    line = joined(own, beside)
    x_mm = box.left_mm + STEP_MM * np.arange(int((box.right_mm - box.left_mm) / STEP_MM + 1e-6) + 1)
    y_mm, sigma_mm = read_off(line, x_mm)
    notes = tuple(dict.fromkeys(note for stroke in beside for note in stroke.notes))
    tremor_mm = np.interp(x_mm, line.x_mm, line.tremor_mm)
    return replace(line, x_mm=x_mm, y_mm=y_mm, sigma_mm=sigma_mm, notes=notes, tremor_mm=tremor_mm)

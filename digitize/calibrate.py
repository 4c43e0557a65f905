"""Strokes in millimetres become panels in millivolts against seconds.

x divided by the paper speed is time, height above the baseline divided by the gain is voltage.
The samples stand on one 2 ms raster that all panels of a page share.
"""

import numpy as np

from digitize.layout import Layout, PanelPlace
from digitize.trace import Stroke
from digitize.tracing import FS_HZ, Panel

_ON_NODE = 1e-6  # a place this close to a node, in node spacings, is the node: rounding alone


def to_panels(layout: Layout, strokes: tuple[Stroke, ...]) -> tuple[Panel, ...]:
    """Return one calibrated panel per stroke, in the order of `layout.panels`.

    A panel begins at the sample next to its `start_s` and ends with its right edge. Between the
    nodes of a stroke the pen drew straight lines, so samples are interpolated linearly; what the
    stroke leaves out stays NaN and is never bridged. The standard error of an interpolated sample
    takes neighbouring nodes as fully correlated and adds what their curvature can hide. Lead -aVR
    (Cabrera's order) comes out as aVR, turned round, and its notes say so. A stroke whose usual
    height lies in another row would be another lead's: nothing of it is kept.

    Parameters
    ----------
    layout : Layout
        Where each panel stands, at what speed and gain.
    strokes : tuple of Stroke
        One per panel of the layout.
    """
    return tuple(
        _to_panel(place, stroke) for place, stroke in zip(layout.panels, strokes, strict=True)
    )


def _to_panel(place: PanelPlace, stroke: Stroke) -> Panel:
    """One stroke as a panel."""
    box = place.box
    first = round(place.start_s * FS_HZ)
    count = max(round((box.right_mm - box.left_mm) / place.speed_mm_s * FS_HZ), 0)
    time_s = (first + np.arange(count)) / FS_HZ
    x_mm = box.left_mm + (time_s - place.start_s) * place.speed_mm_s
    y_mm, sigma_mm = read_off(stroke, x_mm)
    lead, notes = place.lead, stroke.notes
    if _strayed(y_mm, place):
        y_mm, sigma_mm = np.full_like(y_mm, np.nan), np.full_like(sigma_mm, np.nan)
        notes = (*notes, "the line that was followed belongs to another row: left out")
    mv = (place.baseline_mm - y_mm) / place.gain_mm_mv  # y runs down the page, voltage up
    if lead.startswith("-"):
        lead, mv = lead[1:], -mv
        notes = (f"printed upside down as {place.lead}: turned round here", *notes)
    return Panel(
        lead=lead,
        strip=place.strip,
        row=place.row,
        start_s=first / FS_HZ,
        fs_hz=FS_HZ,
        mv=mv,
        sigma_mv=sigma_mm / place.gain_mm_mv,
        box_mm=(box.left_mm, box.top_mm, box.right_mm, box.bottom_mm),
        speed_mm_s=place.speed_mm_s,
        gain_mm_mv=place.gain_mm_mv,
        lead_source=place.lead_source,
        notes=notes,
    )


def _strayed(y_mm: np.ndarray, place: PanelPlace) -> bool:
    """Whether the usual height of a trace lies outside the row that it should be in."""
    read = y_mm[np.isfinite(y_mm)]
    return len(read) > 0 and not place.box.top_mm <= np.median(read) <= place.box.bottom_mm


def read_off(stroke: Stroke, x_mm: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Height of a stroke at places along it, and its standard error; NaN off its ends."""
    nodes = stroke.x_mm
    if len(nodes) < 2 or len(x_mm) == 0:
        return np.full(len(x_mm), np.nan), np.full(len(x_mm), np.nan)
    left = np.clip(np.searchsorted(nodes, x_mm, side="right") - 1, 0, len(nodes) - 2)
    share = (x_mm - nodes[left]) / (nodes[left + 1] - nodes[left])
    share = np.where(np.abs(share - np.rint(share)) < _ON_NODE, np.rint(share), share)
    share = np.where((share < 0) | (share > 1), np.nan, share)

    def between(values: np.ndarray) -> np.ndarray:
        inner = (1 - share) * values[left] + share * values[left + 1]
        # On a node its neighbour has no say: it may be missing.
        return np.where(share == 0, values[left], np.where(share == 1, values[left + 1], inner))

    bend = np.zeros(len(nodes))
    bend[1:-1] = np.abs(np.nan_to_num(np.diff(stroke.y_mm, 2)))
    # A parabola through the nodes leaves the straight line by share (1 - share) / 2 x bend.
    hidden_mm = share * (1 - share) / 2 * np.maximum(bend[left], bend[left + 1])
    return between(stroke.y_mm), np.hypot(between(stroke.sigma_mm), hidden_mm)

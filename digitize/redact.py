"""A page with everything covered but the traces, their grid and what calibrates them.

What may stay is listed, rather than what must go: the panels, the pen's own path, the calibration
marks. All else takes the colour of the paper, whether or not anything was recognised there.
Within the panels, pieces of ink that have the size of letters and lie off the traces are covered.
"""

import dataclasses

import cv2
import numpy as np

from digitize.geometry import page_map_of
from digitize.pagemap import PageMap
from digitize.pages import Page
from digitize.read import Stages
from digitize.tracing import Panel

_BESIDE_TRACE_MM = 1.2  # kept on each side of the path: pen, blur and the step of the map
_AROUND_LETTER_MM = 0.4
_AROUND_MARK_MM = 1.0
_STEPS = 24  # of an edge that the map may bend


def cover(stages: Stages) -> Page:
    """Return the upright page of a reading with its printing covered.

    Printed lead names and the printed run are covered too; the tracing holds what they said. The
    drawing of a vector page is left out, for it holds its text.
    """
    page, tracing = stages.page, stages.tracing
    page_map = page_map_of(tracing.geometry)
    shape = page.pixels.shape[:2]
    boxes, path = np.zeros(shape, np.uint8), np.zeros(shape, np.uint8)
    letters = np.zeros(shape, np.uint8)
    for panel, fact in zip(tracing.panels, tracing.geometry["panels"], strict=True):
        _fill(boxes, page_map, panel.box_mm, 0.0)
        _follow(path, page_map, panel, fact)
    for mark in tracing.geometry["marks_mm"]:
        _fill(path, page_map, tuple(mark), _AROUND_MARK_MM)
    for word in stages.layout.words:
        box = (word.left_mm, word.top_mm, word.right_mm, word.bottom_mm)
        _fill(letters, page_map, box, _AROUND_LETTER_MM)
    kept = (path > 0) | ((boxes > 0) & (letters == 0))
    pixels = page.pixels.copy()
    pixels[~kept] = _paper(page.pixels, boxes > 0)
    return dataclasses.replace(page, pixels=pixels, drawing=None)


def _paper(pixels: np.ndarray, inside: np.ndarray) -> np.ndarray:
    """The usual colour of the paper between the traces; white where there is no panel."""
    if not inside.any():
        return np.full(pixels.shape[2:], 255, np.uint8)
    return np.median(pixels[inside], axis=0).astype(np.uint8)


def _fill(mask: np.ndarray, page_map: PageMap, box_mm: tuple[float, ...], around_mm: float) -> None:
    """Set a rectangle on the paper, bent as the page is."""
    left, top, right, bottom = box_mm
    left, top = left - around_mm, top - around_mm
    right, bottom = right + around_mm, bottom + around_mm
    there = np.linspace(0, 1, _STEPS)
    x_mm = np.concatenate(
        [left + there * (right - left), np.full(_STEPS, right), right - there * (right - left),
         np.full(_STEPS, left)]
    )  # fmt: skip
    y_mm = np.concatenate(
        [np.full(_STEPS, top), top + there * (bottom - top), np.full(_STEPS, bottom),
         bottom - there * (bottom - top)]
    )  # fmt: skip
    x_px, y_px = page_map.to_px(x_mm, y_mm)
    points = np.rint(np.stack([x_px, y_px], axis=1)).astype(np.int32)
    cv2.fillPoly(mask, [points], 255)


def _follow(mask: np.ndarray, page_map: PageMap, panel: Panel, fact: dict) -> None:
    """Set what lies beside the path of a trace, each stretch without a gap for itself."""
    sign = -1.0 if fact["upside_down"] else 1.0
    x_mm = panel.box_mm[0] + (panel.time_s - panel.start_s) * panel.speed_mm_s
    y_mm = fact["baseline_mm"] - sign * panel.mv * panel.gain_mm_mv
    known = np.flatnonzero(np.isfinite(y_mm))
    width_px = max(round(2 * _BESIDE_TRACE_MM * max(page_map.scale_px_per_mm())), 3)
    for part in np.split(known, np.flatnonzero(np.diff(known) > 1) + 1):
        if len(part):
            x_px, y_px = page_map.to_px(x_mm[part], y_mm[part])
            points = np.rint(np.stack([x_px, y_px], axis=1)).astype(np.int32)
            cv2.polylines(mask, [points], False, 255, width_px)

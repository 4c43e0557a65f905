"""A page with everything covered but the traces, their grid and what names and calibrates them.

What may stay is listed, rather than what must go: the panels, the pen's own path, calibration
marks, lead names, a line that holds the run ("25 mm/s 10 mm/mV") and nothing else. All else takes
the colour of the paper, whether or not anything was recognised there. Within the panels the grid
stays; letters are covered, and other ink that cannot be a stretch of a trace.
"""

import re
from collections.abc import Collection
from dataclasses import astuple, replace

import cv2
import numpy as np

from digitize.geometry import page_map_of
from digitize.pagemap import PageMap
from digitize.pages import Page
from digitize.read import Stages
from digitize.sheet import Box
from digitize.stray import stray_ink
from digitize.tracing import Panel
from digitize.words import SPELLINGS, read_printing

_BESIDE_TRACE_MM = 1.2  # kept on each side of the path: pen, blur and the step of the map
_AROUND_LETTER_MM = 0.4
_AROUND_MARK_MM = 1.0
_RUN = re.compile(r"(?:\d{1,3}(?!\d)|[\s.,;:~*/|()-]|mm|cm|mv|hz|sec|s)+", re.IGNORECASE)
_UNIT = re.compile(r"mm|hz", re.IGNORECASE)
_SURE, _SHORTEST = 0.8, 4  # mean letter probability and letters of a line that counts
_STEPS = 24  # of an edge that the map may bend


def cover(stages: Stages) -> Page:
    """Return the upright page of a reading with its printing covered.

    The drawing of a vector page is left out, for it holds its text. Writing that runs through a
    trace stays where it touches the pen's path: a person looks at the result.
    """
    page, tracing = stages.page, stages.tracing
    page_map = page_map_of(tracing.geometry)
    boxes, kept, letters, strays = (np.zeros(page.pixels.shape[:2], np.uint8) for _ in range(4))
    lines = []
    for panel, fact in zip(tracing.panels, tracing.geometry["panels"], strict=True):
        _fill(boxes, page_map, panel.box_mm, 0.0)
        lines += _lines(panel, fact)
    for line in lines:
        width_px = max(round(2 * _BESIDE_TRACE_MM * max(page_map.scale_px_per_mm())), 3)
        cv2.polylines(kept, [_on_page(line, page_map)], False, 255, width_px)
    panels = [Box(*panel.box_mm) for panel in tracing.panels]
    outlines = stray_ink(stages.ink, panels, lines, _BESIDE_TRACE_MM)
    if outlines:
        cv2.fillPoly(strays, [_on_page(outline, page_map) for outline in outlines], 255)
    for mark in tracing.geometry["marks_mm"]:
        _fill(kept, page_map, tuple(mark), _AROUND_MARK_MM)
    printing = read_printing(stages.ink)
    for letter in printing.letters:
        _fill(letters, page_map, astuple(letter), _AROUND_LETTER_MM)
    for word in (*printing.words, *printing.lines):
        if names_lead(word.text, tracing.leads) or states_run(word.text):
            _fill(kept, page_map, astuple(word.box), _AROUND_LETTER_MM)
    stays = (kept > 0) | ((boxes > 0) & (letters == 0) & (strays == 0))
    pixels = page.pixels.copy()
    pixels[~stays] = _paper(page.pixels, boxes > 0)
    return replace(page, pixels=pixels, drawing=None)


def names_lead(text: str, leads: Collection[str]) -> bool:
    """Whether a word is the name of a lead that is on the page, and nothing else."""
    return any(text.strip() in SPELLINGS.get(lead, (lead,)) for lead in leads)


def states_run(text: str) -> bool:
    """Whether a line states speed, gain or bandwidth and nothing else: no long number, no word."""
    return _RUN.fullmatch(text) is not None and _UNIT.search(text) is not None


def leftover(stages: Stages) -> list[str]:
    """Lines of a page read again after it was covered that are neither lead names nor the run.

    Readings that are unsure, or shorter than a word, are no lines: the recogniser sees letters in
    the teeth of a trace.
    """
    leads = stages.tracing.leads
    return [
        line.text
        for line in read_printing(stages.ink).lines
        if line.score > _SURE
        and len(line.text.replace(" ", "")) >= _SHORTEST
        and not states_run(line.text)
        and not all(names_lead(word, leads) for word in line.text.split())
    ]


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
    cv2.fillPoly(mask, [_on_page(np.stack([x_mm, y_mm], axis=1), page_map)], 255)


def _lines(panel: Panel, fact: dict) -> list[np.ndarray]:
    """The path of a trace, (n, 2) x and y in mm: each stretch without a gap for itself."""
    sign = -1.0 if fact["upside_down"] else 1.0
    x_mm = panel.box_mm[0] + (panel.time_s - panel.start_s) * panel.speed_mm_s
    y_mm = fact["baseline_mm"] - sign * panel.mv * panel.gain_mm_mv
    known = np.flatnonzero(np.isfinite(y_mm))
    parts = np.split(known, np.flatnonzero(np.diff(known) > 1) + 1)
    return [np.stack([x_mm[part], y_mm[part]], axis=1) for part in parts if len(part)]


def _on_page(points_mm: np.ndarray, page_map: PageMap) -> np.ndarray:
    """Places of the paper in whole pixels of the page, (n, 2) int32."""
    points = np.stack(page_map.to_px(points_mm[:, 0], points_mm[:, 1]), axis=1)
    return np.rint(points).astype(np.int32)

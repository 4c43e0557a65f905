"""What the first page has to load and compile, done once in the process that pages are forked from.

Libraries, compiled functions and the network that reads print take some seconds, which every page
would spend anew in a process of its own. So a small invented page is read before the fork, and all
others find these things in their memory. To import this module is to do so; `worker.Task.preload`
names it.
"""

from contextlib import suppress

import cv2
import numpy as np

from digitize.archive.reading import read_for_store
from digitize.options import Options
from digitize.pages import Page
from digitize.tracing import PageSource

_PX_PER_MM, _SIZE_MM = 8, (120, 40)  # across, down
_PAPER, _RULED, _INK = (255, 250, 246), (240, 170, 160), (25, 25, 30)
_BEAT_MM = ((0, 0), (3, -1), (6, 0), (7, 1), (8, -9), (9, 3), (10, 0), (14, -3), (18, 0))
GIVEN = Options(speed_mm_s=25.0, gain_mm_mv=10.0, layout="1x1", lead_order=("II",))


def _warm() -> None:
    """Read the page through every stage, whatever comes of it."""
    cv2.setNumThreads(0)  # a fork does not take them along
    with suppress(Exception):  # what fails here fails again, and is told, where a page needs it
        read_for_store(invented_page(), GIVEN)


def invented_page() -> Page:
    """A strip of four beats on ruled paper, with a name and a run."""
    across, down = (side * _PX_PER_MM for side in _SIZE_MM)
    pixels = np.full((down, across, 3), _PAPER, np.uint8)
    for step_mm, width in ((1, 1), (5, 2)):
        for k in range(width):
            pixels[k :: step_mm * _PX_PER_MM] = _RULED
            pixels[:, k :: step_mm * _PX_PER_MM] = _RULED
    line_mm = [(8 + 25 * beat + x, 22 + y) for beat in range(4) for x, y in _BEAT_MM]
    points = np.array([(4, 22), *line_mm, (116, 22)]) * _PX_PER_MM
    cv2.polylines(pixels, [points.astype(np.int32)], False, _INK, 3, cv2.LINE_AA)
    for text, x_mm, y_mm in (("II", 5, 10), ("25 mm/s 10 mm/mV", 5, 38)):
        place = (x_mm * _PX_PER_MM, y_mm * _PX_PER_MM)
        cv2.putText(pixels, text, place, cv2.FONT_HERSHEY_SIMPLEX, 0.8, _INK, 2, cv2.LINE_AA)
    source = PageSource("invented", "0" * 64, 1, across, down, None)
    return Page(pixels, source)


_warm()

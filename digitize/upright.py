"""Which way up the page is.

Rows of trace gather the ink on a few heights, which tells upright from sideways; lead names can
only be read the right way up, which tells upright from upside down.
"""

from dataclasses import replace

import numpy as np
import scipy as sp

from digitize.ink import Ink
from digitize.labels import posterior
from digitize.pages import Page
from digitize.words import Printing, Word, read_printing

CLEAR = 0.9
ENOUGH = 3  # clearly read lead names that settle it


def find_turn(ink: Ink, printing: Printing) -> int:
    """Return the clockwise turn in degrees that makes the page upright: 0, 90, 180 or 270.

    Parameters
    ----------
    ink, printing : Ink, Printing
        The sheet as it lies; it is read again turned only where its names cannot be read.
    """
    if _names(printing.words) >= ENOUGH:
        return 0
    ruled = _ruled_part(ink)
    sideways = _concentration(ruled, axis=0) > _concentration(ruled, axis=1)
    turns = (90, 270) if sideways else (180,)
    read = {turn: _names(read_printing(_turned(ink, turn)).words) for turn in turns}
    if not sideways:
        read[0] = _names(printing.words)
    best = max(read, key=lambda turn: read[turn])
    others = max((n for turn, n in read.items() if turn != best), default=0)
    if read[best] > others:
        return best
    return 90 if sideways else 0


def turn_page(page: Page, turn_deg: int) -> Page:
    """The page turned clockwise by 90, 180 or 270 degrees."""
    pixels = np.ascontiguousarray(np.rot90(page.pixels, -turn_deg // 90))
    dpi = page.source.dpi
    if dpi is not None and turn_deg in (90, 270):
        dpi = dpi[::-1]
    return replace(page, pixels=pixels, source=replace(page.source, dpi=dpi))


def _ruled_part(ink: Ink) -> np.ndarray:
    """Density within the ruled area, away from the edges of the sheet and what lies beside it."""
    left, top, right, bottom = ink.ruled_mm
    rows = slice(max(int(ink.raster.row(top + 5)), 0), max(int(ink.raster.row(bottom - 5)), 1))
    cols = slice(max(int(ink.raster.col(left + 5)), 0), max(int(ink.raster.col(right - 5)), 1))
    return np.where(ink.hidden, 0, ink.density)[rows, cols]


def _concentration(density: np.ndarray, axis: int) -> float:
    """How unevenly ink is spread over lines along an axis: rows of trace gather it."""
    profile = np.maximum(density, 0).sum(axis=axis)
    profile = sp.ndimage.gaussian_filter1d(profile, 8.0)
    return float(np.mean(profile**2) / max(np.mean(profile) ** 2, 1e-9))


def _names(words: tuple[Word, ...]) -> int:
    """How many words are clearly a lead name that no single stroke looks like."""
    count = 0
    for word in words:
        names = posterior(word)
        best = max(names, key=lambda n: names[n], default="I")
        count += best not in ("I", "II", "III") and names[best] > CLEAR
    return count


def _turned(ink: Ink, turn_deg: int) -> Ink:
    times = -turn_deg // 90
    return replace(
        ink,
        density=np.ascontiguousarray(np.rot90(ink.density, times)),
        hidden=np.ascontiguousarray(np.rot90(ink.hidden, times)),
    )

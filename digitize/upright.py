"""Which way up the page is.

Traces that run across the page leave ink on nearly every column of their rows, seen sideways they
do not; lead names can only be read the right way up.
"""

from dataclasses import replace

import numpy as np

from digitize.ink import Ink
from digitize.labels import posterior
from digitize.pages import Page
from digitize.rows import coverage_mm, find_rows
from digitize.words import Printing, Word, read_printing

CLEAR = 0.9
ENOUGH = 3  # clearly read lead names that settle it
LONG, SURE = 8, 0.85  # letters of a line, and their mean probability, that settle it too


def find_turn(ink: Ink, printing: Printing) -> int:
    """Return the clockwise turn in degrees that makes the page upright: 0, 90, 180 or 270.

    Parameters
    ----------
    ink, printing : Ink, Printing
        The sheet as it lies; it is read again turned only where its names cannot be read.
    """
    if _legible(printing) >= ENOUGH:
        return 0
    sideways = _row_share(_turned(_ruled_part(ink), 90)) > _row_share(_ruled_part(ink))
    read = {0: _legible(printing)}
    # The likelier turns first; where no names are read there, the others may show them.
    for turns in ((90, 270), (180,)) if sideways else ((180,), (90, 270)):
        read |= {turn: _legible(read_printing(_turned(ink, turn))) for turn in turns}
        if max(read.values()) >= ENOUGH:
            break
    best = max(read, key=lambda turn: read[turn])
    others = max(n for turn, n in read.items() if turn != best)
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


def _ruled_part(ink: Ink) -> Ink:
    """The ruled area, away from the edges of the sheet and what lies beside it."""
    left, top, right, bottom = ink.ruled_mm
    rows = slice(max(int(ink.raster.row(top + 5)), 0), max(int(ink.raster.row(bottom - 5)), 1))
    cols = slice(max(int(ink.raster.col(left + 5)), 0), max(int(ink.raster.col(right - 5)), 1))
    return replace(ink, density=ink.density[rows, cols], hidden=ink.hidden[rows, cols])


def _row_share(ink: Ink) -> float:
    """Mean share of the width over which the rows of trace that are seen have ink."""
    rows = find_rows(ink, ())
    wide_mm = ink.density.shape[1] / ink.raster.px_per_mm
    inked = [coverage_mm(rows.runs, row.y_mm) for row in rows.rows]
    return float(np.mean(inked)) / wide_mm if inked else 0.0


def _legible(printing: Printing) -> int:
    """How many lead names are clearly read; a line that is counts as enough of them."""
    return _names(printing.words) + ENOUGH * any(map(_clear, printing.lines))


def _clear(line: Word) -> bool:
    """Whether a line reads as print does the right way up; upside down, letters are guesses."""
    return len(line.text) >= LONG and line.score > SURE and line.text.isascii()


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

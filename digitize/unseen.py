"""Parts of a page that a person says are no ECG: as if the paper could not be seen there."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from digitize.ink import Ink
from digitize.marks import Mark, mark_box
from digitize.sheet import Box
from digitize.words import Printing


def hide(ink: Ink, box: Box) -> Ink:
    """Return the ink with a part of the paper unseen: a stamp, handwriting."""
    return _hidden(ink, _pixels(ink, box))


def hide_around(ink: Ink, box: Box) -> Ink:
    """Return the ink with nothing seen but a part of the paper, which is ruled at most."""
    around = np.ones(ink.density.shape, bool)
    around[_pixels(ink, box)] = False
    left, top, right, bottom = ink.ruled_mm
    ruled_mm = (
        max(left, box.left_mm),
        max(top, box.top_mm),
        min(right, box.right_mm),
        min(bottom, box.bottom_mm),
    )
    return replace(_hidden(ink, around), ruled_mm=ruled_mm)


def seen_printing(printing: Printing, ink: Ink) -> Printing:
    """Return the printing without what stands where the ink is hidden."""
    return Printing(
        words=tuple(word for word in printing.words if _seen(word.box, ink)),
        lines=tuple(line for line in printing.lines if _seen(line.box, ink)),
        letters=tuple(box for box in printing.letters if _seen(box, ink)),
    )


def seen_marks(marks: Sequence[Mark], ink: Ink) -> tuple[Mark, ...]:
    """Return the calibration marks without those that stand where the ink is hidden."""
    return tuple(mark for mark in marks if _seen(mark_box(mark), ink))


def _hidden(ink: Ink, where: tuple[slice, slice] | np.ndarray) -> Ink:
    density, hidden = ink.density.copy(), ink.hidden.copy()
    density[where], hidden[where] = 0.0, True
    return replace(ink, density=density, hidden=hidden)


def _pixels(ink: Ink, box: Box) -> tuple[slice, slice]:
    """Rows and columns of the ink whose centres lie in a box."""
    raster, (rows, cols) = ink.raster, ink.density.shape
    down = np.clip(np.ceil(raster.row(np.array([box.top_mm, box.bottom_mm]))), 0, rows)
    across = np.clip(np.ceil(raster.col(np.array([box.left_mm, box.right_mm]))), 0, cols)
    return slice(*down.astype(int)), slice(*across.astype(int))


def _seen(box: Box, ink: Ink) -> bool:
    """Whether the middle of a box lies on paper that is seen."""
    rows, cols = ink.hidden.shape
    row = int(np.clip(round(ink.raster.row((box.top_mm + box.bottom_mm) / 2)), 0, rows - 1))
    col = int(np.clip(round(ink.raster.col((box.left_mm + box.right_mm) / 2)), 0, cols - 1))
    return not ink.hidden[row, col]

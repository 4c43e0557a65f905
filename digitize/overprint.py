"""Lead names that touch a trace: their letters are hidden where the trace does not run.

A recorder prints its names with no regard to what the trace will do there. Where one touches the
other, their ink is one piece, and a path could as well go up and down the letters. But the trace
leads out of the name's place to both sides, and the letters do not: what lies off the straight way
through is print, or not to be told from it.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from digitize.ink import Ink
from digitize.sheet import Box, Raster

_MARGIN_MM = 0.3  # about a name's place
_INKED = 0.25  # density that belongs to a piece of ink
_STROKE_MM = 1.0  # thickness of a trace that leads out of the place: level or nearly so
_BESIDE_MM = 0.4  # off the straight way, half a pen included, what may still be the trace


def hide_names(ink: Ink, names: Sequence[Box]) -> Ink:
    """Return the ink with the letters of names that touch a trace marked as hidden.

    Parameters
    ----------
    ink : Ink
    names : sequence of Box
        Where lead names are printed.
    """
    hidden = ink.hidden.copy()
    raster, margin_px = ink.raster, _MARGIN_MM * ink.raster.px_per_mm
    for name in names:
        high_px = (name.bottom_mm - name.top_mm) * raster.px_per_mm
        top, bottom = raster.row(name.top_mm) - margin_px, raster.row(name.bottom_mm) + margin_px
        rows = slice(max(round(top), 0), max(round(bottom), 0) + 1)
        band = ink.density[rows]
        left = _leaves(band, round(raster.col(name.left_mm) - margin_px), -1, high_px, raster)
        right = _leaves(band, round(raster.col(name.right_mm) + margin_px), 1, high_px, raster)
        if left is None or right is None:
            continue
        cols = np.arange(left[0], right[0] + 1)
        way = np.interp(cols, (left[0], right[0]), (left[1], right[1]))
        off = np.abs(np.arange(len(band))[:, None] - way)
        hidden[rows, cols[0] : cols[-1] + 1] |= (off > _BESIDE_MM * raster.px_per_mm) & (
            band[:, cols] > _INKED
        )
    return replace(ink, hidden=hidden)


def _leaves(
    band: np.ndarray, start: int, step: int, reach_px: float, raster: Raster
) -> tuple[int, float] | None:
    """Column and row where one thin stroke leads out of a name's place, the first from its side.

    The place is guessed from the height of the letters: a wide one may end a little further out.
    """
    for col in range(start, start + step * (round(reach_px) + 1), step):
        if not 0 <= col < band.shape[1]:
            return None
        inked = np.flatnonzero(band[:, col] > _INKED)
        if len(inked) and inked[-1] - inked[0] + 1 < _STROKE_MM * raster.px_per_mm:
            return col, float(inked.mean())
    return None

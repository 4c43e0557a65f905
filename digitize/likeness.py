"""Names of strips told by likeness: a page prints all its lead names in one hand.

A recogniser cannot tell I, II and III apart when each is a stroke or two, and stumbles over what a
fax left of a letter. But the name of a strip stands on the same page in the same type at the lead
that it repeats: the two pictures are alike.
"""

from collections.abc import Mapping, Sequence

import cv2
import numpy as np

from digitize.ink import Ink
from digitize.labels import LabelFit, Slot
from digitize.sheet import Box

ASIDE, ABOVE = 0.8, 0.25  # blank paper around a name that counts, in heights of its letters
SHIFT = 0.6  # how far a name may stand from its place, in heights of its letters
BLUR_MM = 0.12
ALIKE, CLEAR = 0.62, 0.06  # correlation of the same name, and its lead over the next best


def names_by_likeness(
    ink: Ink, fit: LabelFit, slots: Sequence[Slot]
) -> dict[tuple[int, int], tuple[str, float]]:
    """Return the names of slots of which none is expected, where another name looks the same.

    Parameters
    ----------
    ink : Ink
        With printing, without calibration marks.
    fit : LabelFit
        Where names were found, those of strips among them.
    slots : sequence of Slot
        Of the arrangement.

    Returns
    -------
    dict
        By (row, column): the name, and the correlation of the two pictures.
    """
    known = {s.name: fit.places[s.row, s.column] for s in slots if _has_place(s, fit) and s.name}
    found = {}
    for slot in slots:
        if slot.name is None and _has_place(slot, fit):
            name, alike = _most_alike(ink, fit.places[slot.row, slot.column], known)
            if name is not None:
                found[slot.row, slot.column] = (name, alike)
    return found


def _has_place(slot: Slot, fit: LabelFit) -> bool:
    return (slot.row, slot.column) in fit.places


def _most_alike(ink: Ink, place: Box, known: Mapping[str, Box]) -> tuple[str | None, float]:
    """The name whose picture is most like that at a place, None where none clearly is."""
    scores = sorted(((_alike(ink, place, box), name) for name, box in known.items()), reverse=True)
    if not scores or scores[0][0] < ALIKE:
        return None, 0.0
    second = scores[1][0] if len(scores) > 1 else 0.0
    return (scores[0][1], scores[0][0]) if scores[0][0] - second > CLEAR else (None, 0.0)


def _alike(ink: Ink, place: Box, box: Box) -> float:
    """Largest correlation of a known name, blank paper around it included, near a place."""
    high = box.bottom_mm - box.top_mm
    wide = max(box.right_mm - box.left_mm, place.right_mm - place.left_mm)
    pattern = _cut(ink, box, ASIDE * high, ABOVE * high)
    # The place may be that of a part of the name: from its left edge or to its right.
    room = Box(
        place.right_mm - wide, place.bottom_mm - high, place.left_mm + wide, place.top_mm + high
    )
    field = _cut(ink, room, (ASIDE + SHIFT) * high, (ABOVE + SHIFT) * high)
    if any(p > f for p, f in zip(pattern.shape, field.shape, strict=True)) or np.ptp(pattern) == 0:
        return 0.0
    return float(cv2.matchTemplate(field, pattern, cv2.TM_CCOEFF_NORMED).max())


def _cut(ink: Ink, box: Box, aside_mm: float, above_mm: float) -> np.ndarray:
    """Blurred ink of a box with margins."""
    raster = ink.raster
    rows = sorted((raster.row(box.top_mm - above_mm), raster.row(box.bottom_mm + above_mm)))
    cols = sorted((raster.col(box.left_mm - aside_mm), raster.col(box.right_mm + aside_mm)))
    inside = [slice(max(round(low), 0), max(round(high), 0) + 1) for low, high in (rows, cols)]
    part = ink.density[inside[0], inside[1]]
    clipped = np.clip(part, 0, 1).astype(np.float32)
    return cv2.GaussianBlur(clipped, (0, 0), BLUR_MM * raster.px_per_mm) if part.size else clipped

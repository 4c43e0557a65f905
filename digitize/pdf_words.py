"""The words of a PDF page, read from its text instead of from its pixels."""

import ctypes
import math
from collections.abc import Iterator

import numpy as np
import pypdfium2 as pdfium
import pypdfium2.raw as pdfium_c

from digitize.drawing import DrawnWord

_ASLANT_DEG = 1.5  # off the nearest quarter turn
_WORD_GAP, _WORD_OVERLAP = 0.35, 0.4  # of the letter height: letters of one word

Frame = tuple[float, float, float, float]  # left, top, right, bottom


def words_of(page: pdfium.PdfPage, to_px: tuple[float, ...]) -> Iterator[DrawnWord]:
    """Words of a page's text: letters that stand close together on one base line.

    Parameters
    ----------
    page : PdfPage
    to_px : tuple of 6 floats
        The matrix a b c d e f from page space to pixels.
    """
    text = page.get_textpage()
    word, box, turn_deg = "", (0.0, 0.0, 0.0, 0.0), None
    for k in range(text.count_chars()):
        letter = chr(pdfium_c.FPDFText_GetUnicode(text, k))
        own = _letter_box(text, k, to_px)
        own_turn = _turn_deg(text, k, to_px)
        if word and (letter.isspace() or not _follows(box, own, turn_deg) or own_turn != turn_deg):
            yield DrawnWord(word, box, turn_deg)
            word = ""
        if letter.isspace() or not letter.isprintable():
            continue
        turn_deg = own_turn
        box = _around(box, own) if word else own
        word += letter
    if word:
        yield DrawnWord(word, box, turn_deg)
    text.close()


def _letter_box(text: pdfium.PdfTextPage, k: int, to_px: tuple[float, ...]) -> Frame:
    left, right, bottom, top = (ctypes.c_double() for _ in range(4))
    pdfium_c.FPDFText_GetCharBox(text, k, left, right, bottom, top)
    corners = np.array([[left.value, bottom.value], [right.value, top.value]])
    turn = np.array([to_px[:2], to_px[2:4]])
    (x0, y0), (x1, y1) = np.sort(corners @ turn + to_px[4:], axis=0)
    return float(x0), float(y0), float(x1), float(y1)


def _turn_deg(text: pdfium.PdfTextPage, k: int, to_px: tuple[float, ...]) -> int | None:
    """How far clockwise a letter is turned on the rendered page, in quarter turns."""
    m = pdfium_c.FS_MATRIX()
    pdfium_c.FPDFText_GetMatrix(text, k, m)
    across, down = to_px[0] * m.a + to_px[2] * m.b, to_px[1] * m.a + to_px[3] * m.b
    turn_deg = math.degrees(math.atan2(down, across))
    quarter = round(turn_deg / 90) * 90
    return quarter % 360 if abs(turn_deg - quarter) < _ASLANT_DEG else None


def _follows(word: Frame, letter: Frame, turn_deg: int | None) -> bool:
    """Whether a letter stands next to a word on its line."""
    along, over = (1, 0) if turn_deg in (90, 270) else (0, 1)
    high = max(word[over + 2] - word[over], letter[over + 2] - letter[over])
    low = min(word[over + 2] - word[over], letter[over + 2] - letter[over])
    overlap = min(word[over + 2], letter[over + 2]) - max(word[over], letter[over])
    backward = turn_deg in (180, 270)
    gap = word[along] - letter[along + 2] if backward else letter[along] - word[along + 2]
    return bool(overlap >= _WORD_OVERLAP * low and -high < gap < _WORD_GAP * high)


def _around(one: Frame, other: Frame) -> Frame:
    return (
        min(one[0], other[0]),
        min(one[1], other[1]),
        max(one[2], other[2]),
        max(one[3], other[3]),
    )

"""The words of a PDF page, read from its text instead of from its pixels."""

import ctypes
import math
from collections.abc import Iterator

import numpy as np
import pypdfium2 as pdfium
import pypdfium2.raw as pdfium_c

from digitize.drawing import DrawnWord

_TURNED = 0.02  # slope from which text counts as turned
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
    word, box, upright = "", (0.0, 0.0, 0.0, 0.0), True
    for k in range(text.count_chars()):
        letter = chr(pdfium_c.FPDFText_GetUnicode(text, k))
        own = _letter_box(text, k, to_px)
        level = _is_level(text, k, to_px)
        if word and (letter.isspace() or not _follows(box, own) or level != upright):
            yield DrawnWord(word, box, upright)
            word = ""
        if letter.isspace() or not letter.isprintable():
            continue
        upright = level
        box = _around(box, own) if word else own
        word += letter
    if word:
        yield DrawnWord(word, box, upright)
    text.close()


def _letter_box(text: pdfium.PdfTextPage, k: int, to_px: tuple[float, ...]) -> Frame:
    left, right, bottom, top = (ctypes.c_double() for _ in range(4))
    pdfium_c.FPDFText_GetCharBox(text, k, left, right, bottom, top)
    corners = np.array([[left.value, bottom.value], [right.value, top.value]])
    turn = np.array([to_px[:2], to_px[2:4]])
    (x0, y0), (x1, y1) = np.sort(corners @ turn + to_px[4:], axis=0)
    return float(x0), float(y0), float(x1), float(y1)


def _is_level(text: pdfium.PdfTextPage, k: int, to_px: tuple[float, ...]) -> bool:
    """Whether a letter stands upright on the rendered page."""
    angle = pdfium_c.FPDFText_GetCharAngle(text, k)
    a, b, c, d, _, _ = to_px
    across, down = (
        (a * math.cos(angle) + c * math.sin(angle)),
        (b * math.cos(angle) + d * math.sin(angle)),
    )
    return across > 0 and abs(down) < _TURNED * across


def _follows(word: Frame, letter: Frame) -> bool:
    """Whether a letter stands next to a word on its line."""
    high = max(word[3] - word[1], letter[3] - letter[1])
    overlap = min(word[3], letter[3]) - max(word[1], letter[1])
    gap = letter[0] - word[2]
    low = min(word[3] - word[1], letter[3] - letter[1])
    return bool(overlap >= _WORD_OVERLAP * low and -high < gap < _WORD_GAP * high)


def _around(one: Frame, other: Frame) -> Frame:
    return (
        min(one[0], other[0]),
        min(one[1], other[1]),
        max(one[2], other[2]),
        max(one[3], other[3]),
    )

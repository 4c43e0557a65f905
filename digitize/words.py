"""Printing on the sheet: where words stand, what they say, which lead they may name.

Letters are small separate pieces of ink; neighbours are joined to words and lines, and each is
read once. A word is kept as soft evidence: how likely it is each of the lead names.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass, replace

import cv2
import numpy as np

from digitize.ink import Ink, solid_ink
from digitize.recogniser import recogniser
from digitize.sheet import Box
from digitize.tracing import LEADS

NAMES = (*LEADS, "-aVR", "V3R", "V4R", "V7", "V8", "V9")
# Other ways to print the same name, and the recogniser's usual slips on them.
SPELLINGS: Mapping[str, tuple[str, ...]] = {
    "I": ("I", "l", "1", "|", "DI", "L1"),
    "II": ("II", "ll", "11", "Ⅱ", "DII", "L2", "||"),
    "III": ("III", "lll", "111", "Ⅲ", "DIII", "L3", "|||"),
    "aVR": ("aVR", "AVR", "avR", "aVr", "avr", "VR"),
    "aVL": ("aVL", "AVL", "avL", "aVl", "avl", "VL"),
    "aVF": ("aVF", "AVF", "avF", "aVf", "avf", "VF"),
    "-aVR": ("-aVR", "-AVR", "–aVR", "-avR"),
    **{f"V{n}": (f"V{n}", f"v{n}", f"C{n}") for n in (1, 2, 3, 4, 5, 6, 7, 8, 9)},
    "V3R": ("V3R", "V3r"),
    "V4R": ("V4R", "V4r"),
}
SPELT = {text for name in NAMES for text in SPELLINGS[name] if len(text) > 1}
CLEAR = 0.8  # mean letter probability of a name that is surely one
LETTER_MM = (0.7, 6.5)  # height of a letter
WIDEST_LETTER_MM = 9.0
LINE_MM, LINE_WIDE, LINE_FILL = 4.0, 1.2, 0.25  # so long, flat and thin is a piece of a trace
LINE_FLAT, LINE_PEN_MM = 2.5, 0.55  # and so is what is still flatter, and as thin as a pen
TICK_WIDE = 0.25  # width of an upright stroke over its height
MERGED_MM = (1.3, 60.0)  # height and width of letters run together
MERGED_FILL = (0.3, 0.85)  # share of their box that they cover: traces less, bars more
NAME_MM = (1.1, 6.0)  # height of a lead name
MOST_LINES = 30  # lines of printing read on one page
MOST_LENGTH = 250  # of all lines together, in heights of their letters
MOST_WORDS = 70  # words held against the lead names on one page


@dataclass(frozen=True)
class Word:
    """One word or line of printing.

    `text` is the free reading, `score` its mean letter probability. `names` gives the log
    probability of each lead name under the same crop.
    """

    box: Box
    text: str
    score: float
    names: Mapping[str, float]


@dataclass(frozen=True)
class Printing:
    """All printing found: `words` that could be lead names, longer `lines`, each letter's box."""

    words: tuple[Word, ...]
    lines: tuple[Word, ...]
    letters: tuple[Box, ...]


def read_printing(ink: Ink) -> Printing:
    """Return the words and lines of a sheet, read."""
    letters, merged = _pieces(ink)
    words = _join(letters, reach=0.75)
    words += _without_ticks(words, letters)
    lines = _join([*letters, *merged], reach=3.5)
    lines = [line for line in lines if line.right_mm - line.left_mm > 8]
    short = [w for w in words if _name_sized(w)]
    short = sorted(short, key=lambda w: -_blackness(ink, w))[:MOST_WORDS]
    lines = sorted(lines, key=lambda b: _off_middle(b, ink))[::-1][:MOST_LINES]
    lengths = np.cumsum([(b.right_mm - b.left_mm) / (b.bottom_mm - b.top_mm) for b in lines])
    lines = [line for line, length in zip(lines, lengths, strict=True) if length < MOST_LENGTH]
    return Printing(
        words=tuple(read_boxes(ink, short)),
        lines=tuple(read_boxes(ink, lines)),
        letters=tuple(letters),
    )


def apart_from_traces(printing: Printing, ink: Ink) -> Printing:
    """Return printing that was read without straight rules, with the letters that are surely such.

    Parameters
    ----------
    printing : Printing
        Tall complexes that run into one another look like a rule, and without it the trace between
        them falls into pieces as small as letters.
    ink : Ink
        With the rules: what is a piece of its own here is a letter, and so is what stands in a word
        with such, or in one that reads as a name.
    """
    whole = set(_pieces(ink)[0])
    words = [
        word.box
        for word in printing.words
        if (word.score > CLEAR and word.text in SPELT) or any(_inside(x, word.box) for x in whole)
    ]
    letters = (x for x in printing.letters if x in whole or any(_inside(x, w) for w in words))
    return replace(printing, letters=tuple(letters))


def read_boxes(ink: Ink, boxes: list[Box]) -> list[Word]:
    """Read the printing in each box."""
    reader = recogniser()
    probabilities = reader.probabilities([_crop(ink, box) for box in boxes])
    words = []
    for box, p in zip(boxes, probabilities, strict=True):
        text, score = reader.text(p)
        short = len(text) <= 6
        words.append(Word(box, text, score, _name_scores(p) if short else {}))
    return words


def _name_scores(probabilities: np.ndarray) -> dict[str, float]:
    reader = recogniser()
    return {
        name: max(reader.likelihood(probabilities, s) for s in SPELLINGS[name]) for name in NAMES
    }


def _pieces(ink: Ink) -> tuple[list[Box], list[Box]]:
    """Boxes of pieces of ink that have the size of a letter, and of letters that have run together.

    Blur joins the letters of small or bold print. A trace of that shape fills less of its box.
    """
    _, _, stats, _ = cv2.connectedComponentsWithStats(solid_ink(ink), connectivity=8)
    scale = ink.raster.px_per_mm
    left, top, width, height, area = (stats[1:, k] / scale for k in range(5))
    area = area / scale
    fill = area / (width * height)
    thin = (width > LINE_WIDE * height) & (fill < LINE_FILL)
    flat = (width > LINE_FLAT * height) & (area < LINE_PEN_MM * width)
    line = (width > LINE_MM) & (thin | flat)
    fits = (
        ~line
        & (height > LETTER_MM[0])
        & (height < LETTER_MM[1])
        & (width < WIDEST_LETTER_MM)
        & (width < 7 * height)
        & (area > 0.08 * height)
    )
    merged = (
        ~fits
        & (height > MERGED_MM[0])
        & (height < LETTER_MM[1])
        & (width > height)
        & (width < MERGED_MM[1])
        & (fill > MERGED_FILL[0])
        & (fill < MERGED_FILL[1])
    )
    x0, y0 = ink.raster.left_mm, ink.raster.top_mm

    def boxes(of: np.ndarray) -> list[Box]:
        return [
            Box(x0 + a, y0 + b, x0 + a + c, y0 + b + d)
            for a, b, c, d in zip(left[of], top[of], width[of], height[of], strict=True)
        ]

    return boxes(fits), boxes(merged)


def _join(letters: list[Box], reach: float) -> list[Box]:
    """Join letters that stand side by side, closer than `reach` times their height."""
    boxes: list[Box] = []
    for letter in sorted(letters, key=lambda b: b.left_mm):
        for k in range(len(boxes) - 1, -1, -1):
            word = boxes[k]
            tall = max(word.bottom_mm - word.top_mm, letter.bottom_mm - letter.top_mm)
            short = min(word.bottom_mm - word.top_mm, letter.bottom_mm - letter.top_mm)
            overlap = min(word.bottom_mm, letter.bottom_mm) - max(word.top_mm, letter.top_mm)
            gap = letter.left_mm - word.right_mm
            if overlap > 0.55 * short and gap < reach * tall and short > 0.3 * tall:
                boxes[k] = _around([word, letter])
                break
        else:
            boxes.append(letter)
    return boxes


def _without_ticks(words: list[Box], letters: list[Box]) -> list[Box]:
    """Words that begin or end with an upright stroke once more without it: it may be a tick."""
    shorter = []
    for word in words:
        own = sorted((x for x in letters if _inside(x, word)), key=lambda b: b.left_mm)
        upright = [b.right_mm - b.left_mm < TICK_WIDE * (b.bottom_mm - b.top_mm) for b in own]
        for rest, cut in ((own[1:], upright[:1]), (own[:-1], upright[-1:])):
            if any(cut) and rest and not all(upright):
                shorter.append(_around(rest))
    return shorter


def _inside(inner: Box, outer: Box) -> bool:
    return (
        inner.left_mm >= outer.left_mm
        and inner.right_mm <= outer.right_mm
        and inner.top_mm >= outer.top_mm
        and inner.bottom_mm <= outer.bottom_mm
    )


def _around(boxes: list[Box]) -> Box:
    return Box(
        min(b.left_mm for b in boxes),
        min(b.top_mm for b in boxes),
        max(b.right_mm for b in boxes),
        max(b.bottom_mm for b in boxes),
    )


def _name_sized(box: Box) -> bool:
    height = box.bottom_mm - box.top_mm
    return NAME_MM[0] < height < NAME_MM[1] and box.right_mm - box.left_mm < 4.5 * height


def _blackness(ink: Ink, box: Box) -> float:
    """Ink of the blackest part of a box: print is as black as the trace, residue of grid is not."""
    r = ink.raster
    rows = slice(int(r.row(box.top_mm)), int(r.row(box.bottom_mm)) + 1)
    cols = slice(int(r.col(box.left_mm)), int(r.col(box.right_mm)) + 1)
    return float(np.quantile(ink.density[rows, cols], 0.9))


def _off_middle(box: Box, ink: Ink) -> float:
    """How far a line stands from the middle of the sheet: the run is printed at the edges."""
    middle = ink.raster.y_mm(ink.density.shape[0] / 2)
    return abs((box.top_mm + box.bottom_mm) / 2 - middle)


def _crop(ink: Ink, box: Box) -> np.ndarray:
    """Dark-on-light picture of a box with a margin, uint8."""
    margin = 0.22 * (box.bottom_mm - box.top_mm) + 0.2
    rows, cols = ink.density.shape
    r = ink.raster
    y0, y1 = r.row(box.top_mm - margin), r.row(box.bottom_mm + margin)
    x0, x1 = r.col(box.left_mm - margin), r.col(box.right_mm + margin)
    y0, x0 = max(int(y0), 0), max(int(x0), 0)
    y1, x1 = min(int(np.ceil(y1)), rows), min(int(np.ceil(x1)), cols)
    part = ink.density[y0 : max(y1, y0 + 2), x0 : max(x1, x0 + 2)]
    return np.clip(255 * (1 - part), 0, 255).astype(np.uint8)


_NUMBER = r"(?<![\d.,])(\d{1,3}(?:[.,]\d)?|[lIO]{1,2}|[lI]0|lO|[sS])"
_SPEED = re.compile(_NUMBER + r"\s*m{2,3}\s*[/7|lI]?\s*s(?!\w*V)", re.IGNORECASE)
_GAIN = re.compile(_NUMBER + r"\s*m{2,3}\s*[/7|lI]?\s*mv", re.IGNORECASE)
_SLIPS = str.maketrans({"l": "1", "I": "1", "O": "0", "o": "0", "s": "5", "S": "5", ",": "."})
SPEEDS_MM_S = (12.5, 25.0, 50.0, 100.0)
GAINS_MM_MV = (2.5, 5.0, 10.0, 20.0, 40.0)


def printed_speeds(printing: Printing) -> list[float]:
    """Paper speeds in mm/s that the page states, in the order of its lines."""
    return _numbers(printing, _SPEED, SPEEDS_MM_S)


def printed_gains(printing: Printing) -> list[float]:
    """Gains in mm/mV that the page states, in the order of its lines."""
    return _numbers(printing, _GAIN, GAINS_MM_MV)


def _numbers(printing: Printing, pattern: re.Pattern[str], usual: tuple[float, ...]) -> list[float]:
    found = []
    for line in sorted(printing.lines, key=lambda w: (w.box.top_mm, w.box.left_mm)):
        for text in pattern.findall(line.text):
            try:
                value = float(text.translate(_SLIPS))
            except ValueError:
                continue
            if value in usual and value not in found:
                found.append(value)
    return found

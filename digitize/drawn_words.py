"""Printing of a page that carries its text as text: nothing has to be recognised."""

import numpy as np

from digitize.drawing import Drawing, DrawnWord
from digitize.grid import Grid
from digitize.sheet import Box
from digitize.words import NAMES, SPELLINGS, Printing, Word

SAME_LINE, LINE_GAP = 0.5, 3.5  # of the letter height: words of one line
IMPOSSIBLE = -20.0  # log probability of a name that the letters do not spell


def drawn_printing(drawing: Drawing, grid: Grid) -> Printing | None:
    """Return the words of a drawing as printing, None where none of them names a lead.

    Names may be missing from the text although the page shows them: they may be drawn as lines.
    """
    words = [_word(word, grid) for word in drawing.words if word.turn_deg == 0]
    if not any(max(word.names.values()) == 0 for word in words):
        return None
    return Printing(
        words=tuple(words),
        lines=tuple(_lines(words)),
        letters=tuple(word.box for word in words),
    )


def _word(word: DrawnWord, grid: Grid) -> Word:
    left, top, right, bottom = word.box_px
    x_mm, y_mm = grid.page_map.to_mm(np.array([left, right]), np.array([top, bottom]))
    spelt = word.text.strip(".,:;()").casefold()
    names = {name: 0.0 if spelt in _spellings(name) else IMPOSSIBLE for name in NAMES}
    box = Box(float(x_mm[0]), float(y_mm[0]), float(x_mm[1]), float(y_mm[1]))
    return Word(box, word.text, 1.0, names)


def _spellings(name: str) -> set[str]:
    """How a name may be spelt, without what only a poor reading makes of it."""
    return {name.casefold()} | {
        spelling.casefold() for spelling in SPELLINGS[name] if spelling.strip("l1|")
    }


def _lines(words: list[Word]) -> list[Word]:
    """Words that stand side by side, joined."""
    lines: list[Word] = []
    for word in sorted(words, key=lambda w: w.box.left_mm):
        box = word.box
        for k, line in enumerate(lines):
            high = min(line.box.bottom_mm - line.box.top_mm, box.bottom_mm - box.top_mm)
            overlap = min(line.box.bottom_mm, box.bottom_mm) - max(line.box.top_mm, box.top_mm)
            if overlap > SAME_LINE * high and box.left_mm - line.box.right_mm < LINE_GAP * high:
                around = Box(
                    line.box.left_mm,
                    min(line.box.top_mm, box.top_mm),
                    max(line.box.right_mm, box.right_mm),
                    max(line.box.bottom_mm, box.bottom_mm),
                )
                lines[k] = Word(around, f"{line.text} {word.text}", 1.0, {})
                break
        else:
            lines.append(Word(box, word.text, 1.0, {}))
    return lines

"""What a page drew as lines and text, for pages that never were pixels.

All places are pixels of the page as it was rendered: (0, 0) is the centre of the first pixel, x
across, y down, so that one `Grid` serves pixels and lines alike.
"""

from dataclasses import dataclass, replace

import numpy as np


@dataclass(frozen=True, eq=False)
class DrawnLine:
    """One unbroken stroked line.

    `points_px` is (n, 2): x and y of its vertices, curves flattened, cut off where a clip hides
    it. `step_px` is the resolution of its coordinates in the document.
    """

    points_px: np.ndarray
    width_px: float
    step_px: float


@dataclass(frozen=True)
class DrawnWord:
    """A word of the document's own text: exact letters, the box of its glyphs, its direction.

    `turn_deg` is how far clockwise it is turned from upright: 0, 90, 180, 270; None: aslant.
    """

    text: str
    box_px: tuple[float, float, float, float]  # left, top, right, bottom
    turn_deg: int | None


@dataclass(frozen=True, eq=False)
class Drawing:
    """The stroked lines and the words of one page, in the order in which they were drawn.

    `unit_px_per_mm` is the scale of the document's own units: 72 points are an inch of paper.
    """

    lines: tuple[DrawnLine, ...]
    words: tuple[DrawnWord, ...]
    unit_px_per_mm: float

    def turned(self, turn_deg: int, shape: tuple[int, int]) -> "Drawing":
        """The drawing on a page of (rows, cols) turned clockwise by 90, 180 or 270 degrees."""
        rows, cols = shape
        turn, shift = {
            90: ([[0, -1], [1, 0]], (rows - 1, 0)),
            180: ([[-1, 0], [0, -1]], (cols - 1, rows - 1)),
            270: ([[0, 1], [-1, 0]], (0, cols - 1)),
        }[turn_deg]
        matrix, offset = np.array(turn, float), np.array(shift, float)
        lines = tuple(
            replace(line, points_px=line.points_px @ matrix.T + offset) for line in self.lines
        )
        words = []
        for word in self.words:
            corners = np.array([word.box_px[:2], word.box_px[2:]]) @ matrix.T + offset
            (left, top), (right, bottom) = np.sort(corners, axis=0).tolist()
            own = None if word.turn_deg is None else (word.turn_deg + turn_deg) % 360
            words.append(DrawnWord(word.text, (left, top, right, bottom), own))
        return replace(self, lines=lines, words=tuple(words))

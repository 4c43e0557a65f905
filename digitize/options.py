"""What a person may know better than the page: one record that every caller builds.

The command line, the archive and the over-read page all hand this same record down; it is saved
with the result.
"""

import math
import re
from dataclasses import dataclass

LAYOUT_FORM = re.compile(r"[1-9]\d?x[1-9](\+[0-9])?")  # rows x columns + rhythm strips
TURNS_DEG = (0, 90, 180, 270)
TIMINGS = ("consecutive", "simultaneous")


@dataclass(frozen=True)
class Options:
    """Everything a person can give before a page is read; None means: find it on the page.

    Raises
    ------
    ValueError
        A value that no page can have; the text is fit to be shown to the person.
    """

    speed_mm_s: float | None = None
    gain_mm_mv: float | None = None
    layout: str | None = None  # "3x4", "3x4+1", "3x4+3", "6x2", "12x1", "4x3", "6x1", "1x1", ...
    lead_order: tuple[str, ...] | None = None  # lead names, row by row from the top left
    turn_deg: int | None = None  # clockwise turn that makes the page upright: 0, 90, 180, 270
    timing: str | None = None  # "consecutive" or "simultaneous"
    px_per_mm: tuple[float, float] | None = None  # across, down; where the page has no grid
    max_megapixels: float = 120.0

    def __post_init__(self) -> None:
        """Refuse values that no page can have."""
        for what, value in (("paper speed", self.speed_mm_s), ("gain", self.gain_mm_mv)):
            if value is not None and not (math.isfinite(value) and 1 <= value <= 200):
                raise ValueError(f"a {what} of {value:g} is not possible: give 1 to 200")
        if self.layout is not None and not LAYOUT_FORM.fullmatch(self.layout):
            raise ValueError(
                f"'{self.layout}' is no layout: give rows x columns + strips, such as 3x4+1"
            )
        if self.lead_order is not None and not all(self.lead_order):
            raise ValueError("a lead name in the lead order is empty")
        if self.turn_deg is not None and self.turn_deg not in TURNS_DEG:
            raise ValueError(f"a turn of {self.turn_deg} is not possible: 0, 90, 180 or 270")
        if self.timing is not None and self.timing not in TIMINGS:
            raise ValueError(f"'{self.timing}' is no timing: give {' or '.join(TIMINGS)}")
        scale = self.px_per_mm
        if scale is not None and not all(math.isfinite(s) and 0.5 <= s <= 100 for s in scale):
            raise ValueError("pixels per mm are not possible: give 0.5 to 100")
        if not (math.isfinite(self.max_megapixels) and self.max_megapixels > 0):
            raise ValueError("the limit of megapixels must be above 0")


def names_from(text: str | None) -> tuple[str, ...] | None:
    """Lead names out of a list with commas."""
    return None if text is None else tuple(name.strip() for name in text.split(","))


def scale_from(text: str | None) -> tuple[float, float] | None:
    """Pixels per mm across and down out of one number or two.

    Raises
    ------
    ValueError
        It is neither; the text is fit to be shown to the person.
    """
    if text is None:
        return None
    try:
        values = [float(part) for part in text.split(",")]
    except ValueError:
        values = []
    if len(values) not in (1, 2):
        raise ValueError(f"'{text}' is no scale: give one number or two, such as 8.04,3.85")
    return values[0], values[-1]

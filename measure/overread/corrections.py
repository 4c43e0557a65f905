"""Corrections that a person makes, as records: each is an input of one stage.

A correction names what it changes in the units of that stage. It is checked when it comes in, so
that no stage ever sees a value that no page can have.
"""

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from digitize.options import TIMINGS, TURNS_DEG, Options

EDGES = ("p_on_ms", "p_off_ms", "qrs_on_ms", "qrs_off_ms", "t_off_ms")
LONGEST_NAME = 8  # characters of a lead's name: "V10R" and the like leave room
MOST_POINTS = 200
OLDEST_YEARS = 130.0


class Refused(ValueError):  # noqa: N818 - it says what happened
    """A correction that cannot be taken; the text says why and is fit to be shown."""


EdgeName = Literal["p_on_ms", "p_off_ms", "qrs_on_ms", "qrs_off_ms", "t_off_ms"]


@dataclass(frozen=True)
class LeadName:
    """Panel `panel` shows lead `lead`."""

    panel: int
    lead: str

    def __post_init__(self) -> None:
        """A name is letters and figures."""
        _name(self.lead)


@dataclass(frozen=True)
class Swap:
    """Two panels have each other's names."""

    panel: int
    other: int


@dataclass(frozen=True)
class Flip:
    """The lead of a panel is printed upside down."""

    panel: int


@dataclass(frozen=True)
class Speed:
    """The paper ran at this speed."""

    mm_s: float

    def __post_init__(self) -> None:
        """A speed that a recorder can have."""
        _within("paper speed", self.mm_s, 1, 200)


@dataclass(frozen=True)
class Gain:
    """One panel, or all of them, was recorded at this gain."""

    mm_mv: float
    panel: int | None = None

    def __post_init__(self) -> None:
        """A gain that a recorder can have."""
        _within("gain", self.mm_mv, 1, 200)


@dataclass(frozen=True)
class ColumnTiming:
    """How the columns follow in time: "consecutive" or "simultaneous"."""

    timing: str

    def __post_init__(self) -> None:
        """One of the two."""
        if self.timing not in TIMINGS:
            raise Refused(f"'{self.timing[:20]}' is no timing: {' or '.join(TIMINGS)}")


@dataclass(frozen=True)
class PanelEdges:
    """A panel runs from `left_mm` to `right_mm` of the paper."""

    panel: int
    left_mm: float
    right_mm: float

    def __post_init__(self) -> None:
        """A panel of at least a fifth of a second at the usual speed."""
        _rising("panel", self.left_mm, self.right_mm, 5.0)


@dataclass(frozen=True)
class StrikeOut:
    """The trace of a panel cannot be read between two places."""

    panel: int
    left_mm: float
    right_mm: float

    def __post_init__(self) -> None:
        """Some stretch of paper."""
        _rising("stretch", self.left_mm, self.right_mm, 0.05)


@dataclass(frozen=True)
class Redraw:
    """The trace of a panel runs about through these places (x_mm, y_mm) of the paper."""

    panel: int
    points: tuple[tuple[float, float], ...]

    def __post_init__(self) -> None:
        """At least two points, from left to right."""
        if not 2 <= len(self.points) <= MOST_POINTS:
            raise Refused(f"a stretch is redrawn by 2 to {MOST_POINTS} points")
        _somewhere(self.points)
        xs = [x for x, _ in self.points]
        if any(b <= a for a, b in itertools.pairwise(xs)):
            raise Refused("the points of a stretch must run from left to right")


@dataclass(frozen=True)
class Turn:
    """The page as it was given becomes upright by a clockwise turn of so many degrees."""

    turn_deg: int

    def __post_init__(self) -> None:
        """A quarter of a turn or several."""
        if self.turn_deg not in TURNS_DEG:
            raise Refused("a page is turned by 0, 90, 180 or 270 degrees")


@dataclass(frozen=True)
class Arrangement:
    """Rows x columns + rhythm strips of the page, such as "3x4+1"; lead names row by row."""

    layout: str
    lead_order: tuple[str, ...] | None = None

    def __post_init__(self) -> None:
        """A layout that the layout stage knows how to look for."""
        try:
            Options(layout=self.layout)
        except ValueError as error:
            raise Refused(str(error)) from None
        for name in self.lead_order or ():
            _name(name)


@dataclass(frozen=True)
class Crop:
    """Only this part of the paper belongs to the ECG."""

    left_mm: float
    top_mm: float
    right_mm: float
    bottom_mm: float

    def __post_init__(self) -> None:
        """Room for a panel."""
        _rising("crop", self.left_mm, self.right_mm, 20.0)
        _rising("crop", self.top_mm, self.bottom_mm, 10.0)


@dataclass(frozen=True)
class Ignore:
    """What stands here hides the ECG: a stamp, handwriting."""

    left_mm: float
    top_mm: float
    right_mm: float
    bottom_mm: float

    def __post_init__(self) -> None:
        """Some piece of paper."""
        _rising("region", self.left_mm, self.right_mm, 0.2)
        _rising("region", self.top_mm, self.bottom_mm, 0.2)


@dataclass(frozen=True)
class Measured:
    """Calipers set in a panel: from one place (x_mm, y_mm) to another. It changes nothing."""

    panel: int
    points: tuple[tuple[float, float], ...]

    def __post_init__(self) -> None:
        """Two places."""
        if len(self.points) != 2:
            raise Refused("calipers have two legs")
        _somewhere(self.points)


@dataclass(frozen=True)
class Boundary:
    """An overall boundary of the dominant beat, in ms after its fiducial point."""

    edge: EdgeName
    at_ms: float

    def __post_init__(self) -> None:
        """One of the five boundaries, near the beat."""
        if self.edge not in EDGES:
            raise Refused("there is no such boundary")
        _within("boundary in ms", self.at_ms, -500, 1000)


@dataclass(frozen=True)
class BeatUse:
    """The beat at `time_s` is part of the average, or is not."""

    time_s: float
    use: bool

    def __post_init__(self) -> None:
        """A time within a recording of a day."""
        _within("time of a beat in seconds", self.time_s, -1, 86400)


@dataclass(frozen=True)
class Patient:
    """Sex and age of the patient, where thresholds depend on them."""

    sex: str | None = None
    age_years: float | None = None

    def __post_init__(self) -> None:
        """Words and ages that the criteria know."""
        if self.sex not in (None, "male", "female"):
            raise Refused("sex is male, female or not given")
        if self.age_years is not None:
            _within("age in years", self.age_years, 0, OLDEST_YEARS)


Correction = (
    Turn
    | Arrangement
    | Crop
    | Ignore
    | LeadName
    | Swap
    | Flip
    | Speed
    | Gain
    | ColumnTiming
    | PanelEdges
    | StrikeOut
    | Redraw
    | Boundary
    | BeatUse
    | Patient
    | Measured
)
REGIONS = (Crop, Ignore)  # inputs of the ink
ARRANGING = (Turn, Arrangement, Crop)  # the panels are found anew after them
PAGE = (Turn, Arrangement, *REGIONS)
PLACES = (LeadName, Swap, Flip, Speed, Gain, ColumnTiming, PanelEdges)  # inputs of the layout
STROKES = (StrikeOut, Redraw)  # inputs of the trace
_IN_TIME = (Boundary, BeatUse)


def in_force(corrections: Sequence[Correction]) -> tuple[Correction, ...]:
    """The corrections that count; see `counted`."""
    counts = counted(corrections)
    return tuple(c for c, counts_too in zip(corrections, counts, strict=True) if counts_too)


def counted(corrections: Sequence[Correction]) -> tuple[bool, ...]:
    """Whether each correction still counts.

    What was placed in time before the speed changed is void, and what names a panel, or a time in
    one, before the panels were found anew. A region is void once the page was turned after it. Of
    several turns, crops or arrangements the last one counts.
    """
    later: list[Correction] = []
    counts = []
    for correction in reversed(corrections):
        counts.append(not any(_voids(after, correction) for after in later))
        later.append(correction)
    return tuple(reversed(counts))


def _voids(after: Correction, before: Correction) -> bool:
    """Whether the later correction leaves nothing of the earlier one."""
    if isinstance(after, Speed):
        return isinstance(before, _IN_TIME)
    if not isinstance(after, ARRANGING):
        return False
    if type(after) is type(before):
        return True
    if isinstance(after, Turn) and isinstance(before, REGIONS):
        return True
    of_panel = getattr(before, "panel", None) is not None
    return of_panel or isinstance(before, _IN_TIME)


def _within(what: str, value: float, low: float, high: float) -> None:
    if not (math.isfinite(value) and low <= value <= high):
        raise Refused(f"a {what} of {value:g} is not possible: give {low:g} to {high:g}")


def _rising(what: str, left_mm: float, right_mm: float, least_mm: float) -> None:
    if not (math.isfinite(left_mm) and math.isfinite(right_mm) and right_mm - left_mm >= least_mm):
        raise Refused(f"a {what} must be {least_mm:g} mm wide or more, from left to right")


def _name(name: str) -> None:
    if not (0 < len(name) <= LONGEST_NAME and name.isascii() and name.isalnum()):
        raise Refused(f"'{name[:20]}' is no name of a lead: letters and figures alone")


def _somewhere(points: Sequence[Sequence[float]]) -> None:
    if not all(math.isfinite(v) for point in points for v in point):
        raise Refused("a point lies nowhere on the paper")

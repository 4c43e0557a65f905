"""Corrections that a person makes, as records: each is an input of one stage.

A correction names what it changes in the units of that stage. It is checked when it comes in, so
that no stage ever sees a value that no page can have.
"""

import itertools
import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, fields
from typing import Any, Literal

from digitize.options import TIMINGS

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
        name = self.lead
        if not (0 < len(name) <= LONGEST_NAME and name.isascii() and name.isalnum()):
            raise Refused(f"'{name[:20]}' is no name of a lead: letters and figures alone")


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
        if not all(math.isfinite(v) for point in self.points for v in point):
            raise Refused("a point lies nowhere on the paper")
        xs = [x for x, _ in self.points]
        if any(b <= a for a, b in itertools.pairwise(xs)):
            raise Refused("the points of a stretch must run from left to right")


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
    LeadName
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
)
PLACES = (LeadName, Swap, Flip, Speed, Gain, ColumnTiming, PanelEdges)  # inputs of the layout
STROKES = (StrikeOut, Redraw)  # inputs of the trace
_KINDS: dict[str, type] = {
    "lead name": LeadName,
    "swap": Swap,
    "flip": Flip,
    "speed": Speed,
    "gain": Gain,
    "timing": ColumnTiming,
    "panel edges": PanelEdges,
    "strike out": StrikeOut,
    "redraw": Redraw,
    "boundary": Boundary,
    "beat": BeatUse,
    "patient": Patient,
}
_NAMES = {kind: name for name, kind in _KINDS.items()}


def to_plain(correction: Correction) -> dict[str, Any]:
    """The correction as JSON can hold it, its kind first."""
    return {"kind": _NAMES[type(correction)], **asdict(correction)}


def from_plain(entry: Mapping[str, Any]) -> Correction:
    """The correction that a dictionary describes.

    Raises
    ------
    Refused
        There is no such correction, or it holds what no page can have; the text is fit to show.
    """
    kind = _KINDS.get(str(entry.get("kind")))
    if kind is None:
        raise Refused("there is no such correction")
    values = {key: value for key, value in entry.items() if key != "kind"}
    try:
        given = {
            f.name: _typed(f.type, values.pop(f.name)) for f in fields(kind) if f.name in values
        }
        if values:
            raise TypeError
        return kind(**given)
    except (TypeError, KeyError, OverflowError):
        raise Refused("the correction is not complete") from None


def in_force(corrections: Sequence[Correction]) -> tuple[Correction, ...]:
    """The corrections that count: what was placed in time before the speed changed is void."""
    last = max((k for k, c in enumerate(corrections) if isinstance(c, Speed)), default=-1)
    return tuple(
        c for k, c in enumerate(corrections) if k > last or not isinstance(c, (Boundary, BeatUse))
    )


def _typed(kind: Any, value: Any) -> Any:
    """A value of the field's own kind; TypeError where it is another."""
    if kind is float or (kind == float | None and value is not None):
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise TypeError
        return float(value)
    if kind is int or (kind == int | None and value is not None):
        if isinstance(value, bool) or not isinstance(value, int):
            raise TypeError
        return value
    if kind is bool:
        if not isinstance(value, bool):
            raise TypeError
        return value
    if kind == tuple[tuple[float, float], ...]:
        return tuple((_typed(float, x), _typed(float, y)) for x, y in value)
    if value is not None and not isinstance(value, str):
        raise TypeError
    return value


def _within(what: str, value: float, low: float, high: float) -> None:
    if not (math.isfinite(value) and low <= value <= high):
        raise Refused(f"a {what} of {value:g} is not possible: give {low:g} to {high:g}")


def _rising(what: str, left_mm: float, right_mm: float, least_mm: float) -> None:
    if not (math.isfinite(left_mm) and math.isfinite(right_mm) and right_mm - left_mm >= least_mm):
        raise Refused(f"a {what} must be {least_mm:g} mm wide or more, from left to right")

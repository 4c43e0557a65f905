"""A published definition held against one ECG, clause by clause."""

from dataclasses import dataclass
from typing import Literal

Result = Literal["met", "not met", "undecided"]


@dataclass(frozen=True)
class Evidence:
    """One value that a clause looked at, as it stood against its threshold.

    `time_ms` is after the overall QRS onset, where on the beat the value was found.
    """

    lead: str
    what: str  # "R peak time", "q amplitude", "notch"
    value: float
    se: float
    unit: str
    threshold: str  # in words and numbers: "> 60 ms"
    time_ms: float | None = None


@dataclass(frozen=True)
class Clause:
    """One clause of a definition. `settle` says what would decide an undecided one."""

    text: str
    result: Result
    evidence: tuple[Evidence, ...] = ()
    settle: str | None = None
    required: bool = True


@dataclass(frozen=True)
class Finding:
    """A definition with its source and result; "meets the criteria of", never a diagnosis."""

    key: str  # "lbbb_aha", "lbbb_strict", "rbbb_complete", ...
    definition: str
    source: str
    result: Result
    clauses: tuple[Clause, ...]
    cautions: tuple[str, ...] = ()

"""Three-valued comparison: a threshold against a value that carries a standard error.

The rule. A comparison is decided where the value lies at least one standard error from the
threshold, else it is undecided. One standard error leaves a chance of at most one in six that the
error alone put the value on its side; two would leave a tenth of all wide QRS undecided although
any reader would call them, because the errors of onset and offset add to 4-8 ms on paper. A
definition is met where every required clause is met, not met where one of them is not, and
undecided otherwise: one clear "no" settles it, doubt elsewhere does not matter then.
"""

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal

from measure.criteria.finding import Clause, Evidence, Finding, Result
from measure.quantity import Quantity

OVERALL = "overall"  # stands for the lead where a value belongs to all leads together


@dataclass(frozen=True)
class Look:
    """What one look at one lead or value gave: a result, its evidence, and what is open.

    `open` holds pairs of a lead and what would settle it there.
    """

    result: Result
    evidence: tuple[Evidence, ...] = ()
    open: tuple[tuple[str, str], ...] = ()

    @property
    def settle(self) -> str | None:
        """What would settle it in words, each reason once with all its leads."""
        leads: dict[str, list[str]] = {}
        for lead, reason in self.open:
            leads.setdefault(reason, []).append(lead)
        parts = [
            reason if OVERALL in names else f"{', '.join(dict.fromkeys(names))}: {reason}"
            for reason, names in leads.items()
        ]
        return "; ".join(parts) or None


@dataclass(frozen=True)
class Limit:
    """A published threshold, such as ">= 120 ms"."""

    sign: Literal[">=", ">", "<=", "<"]
    value: float
    unit: str

    def __str__(self) -> str:
        return f"{self.sign} {self.value:.3g} {self.unit}".rstrip()

    def judge(self, value: float, se: float) -> Result:
        """Compare a value and its standard error with the threshold; NaN is undecided."""
        distance = value - self.value
        if math.isnan(distance) or math.isnan(se) or abs(distance) < se:
            return "undecided"
        holds = {
            ">=": distance >= 0,
            ">": distance > 0,
            "<=": distance <= 0,
            "<": distance < 0,
        }[self.sign]
        return "met" if holds else "not met"


def look_at(
    quantity: Quantity, limit: Limit, *, lead: str, what: str, time_ms: float | None = None
) -> Look:
    """Compare one quantity with one threshold."""
    if not quantity.known:
        return unseen(lead, f"{what}: {quantity.reason}")
    result = limit.judge(quantity.value, quantity.se)
    seen = Evidence(lead, what, quantity.value, quantity.se, quantity.unit, str(limit), time_ms)
    return Look(result, (seen,), ((lead, _close_call(seen)),) if result == "undecided" else ())


def unseen(lead: str, reason: str) -> Look:
    """An undecided look where nothing could be measured."""
    return Look("undecided", (), ((lead, reason),))


def every(looks: Iterable[Look]) -> Look:
    """Met where all are met, not met where one is not."""
    looks = tuple(looks)
    return at_least(len(looks), looks)


def some(looks: Iterable[Look]) -> Look:
    """Met where one is met, not met where none is."""
    return at_least(1, looks)


def at_least(count: int, looks: Iterable[Look]) -> Look:
    """Met where at least `count` are met, not met where no more than `count - 1` can be."""
    looks = tuple(looks)
    met = sum(look.result == "met" for look in looks)
    possible = met + sum(look.result == "undecided" for look in looks)
    result: Result = "met" if met >= count else "undecided" if possible >= count else "not met"
    return Look(result, _evidence(looks), _open(looks) if result == "undecided" else ())


def reverse(look: Look) -> Look:
    """The opposite of a look: met becomes not met; undecided stays."""
    turned: dict[Result, Result] = {"met": "not met", "not met": "met", "undecided": "undecided"}
    return replace(look, result=turned[look.result])


def by_sex(sex: str | None, *, male: Look, female: Look) -> Look:
    """Take the look for the given sex; where it is not given, both, and what differs is said."""
    if sex is not None:
        return male if sex == "male" else female
    evidence = tuple(dict.fromkeys(male.evidence + female.evidence))
    if male.result == female.result:
        return Look(male.result, evidence, male.open)
    why = f"the patient's sex: {female.result} for a woman, {male.result} for a man"
    return Look("undecided", evidence, ((OVERALL, why),))


def clause(text: str, look: Look, *, required: bool = True) -> Clause:
    """One clause of a definition from what was seen."""
    settle = look.settle if look.result == "undecided" else None
    return Clause(text, look.result, look.evidence, settle, required)


def finding(
    key: str,
    definition: str,
    source: str,
    clauses: Iterable[Clause],
    cautions: Iterable[str] = (),
) -> Finding:
    """Combine clauses into the result of a definition."""
    clauses = tuple(clauses)
    needed = every(Look(c.result) for c in clauses if c.required)
    return Finding(key, definition, source, needed.result, clauses, tuple(cautions))


def as_look(other: Finding) -> Look:
    """A finding used as a clause of another: its result, without repeating its evidence."""
    if other.result != "undecided":
        return Look(other.result)
    return unseen(OVERALL, f"whether the criteria of {other.definition} are met")


def _close_call(seen: Evidence) -> str:
    places = 2 if seen.unit == "mV" else 0
    number = f"{seen.value:.{places}f} ± {seen.se:.{places}f} {seen.unit}".rstrip()
    return f"measure by hand: {seen.what} {number} is too close to {seen.threshold}"


def _evidence(looks: tuple[Look, ...]) -> tuple[Evidence, ...]:
    return tuple(dict.fromkeys(seen for look in looks for seen in look.evidence))


def _open(looks: tuple[Look, ...]) -> tuple[tuple[str, str], ...]:
    pairs = (pair for look in looks if look.result == "undecided" for pair in look.open)
    return tuple(dict.fromkeys(pairs))

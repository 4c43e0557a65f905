"""Numbers and evidence in words: one way of writing them for table, report and comparison."""

import math

from measure.criteria.decide import OVERALL
from measure.criteria.finding import Clause, Evidence, Finding
from measure.quantity import Quantity

NOTICE = (
    "This is no diagnosis. A qualified clinician reads the original tracing; every number here "
    "was measured by a program and can be wrong."
)
ONE_SE = "± is one standard error."
SIGNS = {"met": "■", "undecided": "◪", "not met": "□"}  # told apart without colour
_DECIMALS = {"mV": 2, "1/min": 1, "mV ms": 1, "": 2}
_SHOWN_UNIT = {"deg": "°", "1/min": "/min"}


def number(quantity: Quantity) -> str:
    """A quantity with its error and unit, or why there is none."""
    if not quantity.known:
        return f"not measured: {quantity.reason}"
    return value_text(quantity.value, quantity.se, quantity.unit)


def value_text(value: float, se: float, unit: str) -> str:
    """Value, error and unit, rounded as far as the unit makes sense."""
    places = _DECIMALS.get(unit, 0)
    if 0 < se < 0.5 * 10.0**-places:  # an error that would be shown as 0
        places += 1
    shown_unit = _SHOWN_UNIT.get(unit, unit)
    glue = "" if unit == "deg" else " "
    error = "" if math.isnan(se) else f" ± {_fixed(se, places)}"
    return f"{_fixed(value, places)}{error}{glue}{shown_unit}".rstrip()


def signed(quantity: Quantity) -> str:
    """A value alone, with its sign; a dash where there is none."""
    return f"{quantity.value:+.2f}" if quantity.known else "\N{EN DASH}"


def origin(quantity: Quantity) -> str:
    """From how many leads and beats a quantity comes."""
    if not quantity.known:
        return ""
    leads = _plural(len(quantity.leads), "lead") if quantity.leads else ""
    if 0 < len(quantity.leads) <= 3:
        leads = ", ".join(quantity.leads)
    beats = _plural(quantity.beats, "beat") if quantity.beats else ""
    return "; ".join(part for part in (leads, beats) if part)


def evidence_lines(evidence: tuple[Evidence, ...]) -> tuple[str, ...]:
    """Evidence put together: one line for each kind of value, with all its leads.

    As in "R peak time (> 60 ms): V5 72 ± 3, V6 81 ± 3". A value that was held against two
    thresholds is shown once with both.
    """
    thresholds: dict[tuple[str, ...], dict[str, None]] = {}
    for seen in evidence:
        thresholds.setdefault(_place_and_value(seen), {})[seen.threshold] = None
    lines: dict[tuple[str, str], list[str]] = {}
    for (lead, what, value), wanted in thresholds.items():
        shown = " ".join(part for part in (lead, value) if part)
        lines.setdefault((what, ", ".join(wanted)), []).append(shown)
    return tuple(
        nice(f"{what} ({wanted}): {', '.join(places)}") for (what, wanted), places in lines.items()
    )


def clause_lines(clause: Clause) -> tuple[str, ...]:
    """The evidence of a clause, and what would settle it where it is undecided."""
    lines = evidence_lines(clause.evidence)
    if clause.result == "undecided" and clause.settle:
        return (*lines, nice(f"to settle it: {clause.settle}"))
    return lines


def nice(text: str) -> str:
    """Signs as they are printed."""
    return text.replace(">=", "≥").replace("<=", "≤").replace(" -", " \N{MINUS SIGN}")


def deciding(finding: Finding) -> tuple[Clause, ...]:
    """The clauses that made the result: those that failed, else those still open, else all."""
    needed = tuple(c for c in finding.clauses if c.required)
    if finding.result == "met":
        return needed
    return tuple(c for c in needed if c.result == finding.result)


def _place_and_value(seen: Evidence) -> tuple[str, str, str]:
    """Lead, kind and value of one piece of evidence; a shape stands where there is no number."""
    lead = "" if seen.lead == OVERALL else seen.lead
    if math.isnan(seen.value):
        return lead, "shape", seen.what.removeprefix("shape ")
    value = value_text(seen.value, seen.se, seen.unit)
    if seen.unit and seen.threshold.endswith(seen.unit):  # the threshold names the unit already
        value = value.removesuffix(_SHOWN_UNIT.get(seen.unit, seen.unit)).rstrip()
    elif seen.time_ms is not None and math.isfinite(seen.time_ms):
        value = f"at {seen.time_ms:.0f} ms {value}"
    return lead, seen.what, value


def _fixed(value: float, places: int) -> str:
    text = f"{value:.{places}f}"
    if float(text) == 0:
        text = text.lstrip("-")
    return text.replace("-", "\N{MINUS SIGN}")


def _plural(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"

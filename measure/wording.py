"""Numbers and evidence in words: one way of writing them for table, report and comparison."""

import math

from measure.criteria.finding import Clause, Evidence, Finding
from measure.quantity import Quantity

NOTICE = (
    "This is no diagnosis. A qualified clinician reads the original tracing; every number here "
    "was measured by a program and can be wrong."
)
ONE_SE = "± is one standard error."
SIGNS = {"met": "■", "undecided": "◪", "not met": "□"}  # told apart without colour
_DECIMALS = {"mV": 2, "1/min": 0, "mV ms": 1, "": 2}
_SHOWN_UNIT = {"deg": "°", "1/min": "/min"}


def number(quantity: Quantity) -> str:
    """A quantity with its error and unit, or why there is none."""
    if not quantity.known:
        return f"not measured: {quantity.reason}"
    return value_text(quantity.value, quantity.se, quantity.unit)


def value_text(value: float, se: float, unit: str) -> str:
    """Value, error and unit, rounded as far as the unit makes sense."""
    places = _DECIMALS.get(unit, 0)
    shown_unit = _SHOWN_UNIT.get(unit, unit)
    glue = "" if unit == "deg" else " "
    error = "" if math.isnan(se) else f" ± {_fixed(se, places)}"
    return f"{_fixed(value, places)}{error}{glue}{shown_unit}".rstrip()


def origin(quantity: Quantity) -> str:
    """From how many leads and beats a quantity comes."""
    if not quantity.known:
        return ""
    leads = _plural(len(quantity.leads), "lead") if quantity.leads else ""
    if 0 < len(quantity.leads) <= 3:
        leads = ", ".join(quantity.leads)
    beats = _plural(quantity.beats, "beat") if quantity.beats else ""
    return "; ".join(part for part in (leads, beats) if part)


def evidence_text(seen: Evidence) -> str:
    """One piece of evidence, as in "V6: R peak time 72 ± 3 ms (> 60 ms)"."""
    value = "" if math.isnan(seen.value) else " " + value_text(seen.value, seen.se, seen.unit)
    at = ""
    if seen.time_ms is not None and math.isfinite(seen.time_ms) and seen.unit != "ms":
        at = f" at {seen.time_ms:.0f} ms"
    lead = "" if seen.lead == "overall" else f"{seen.lead}: "
    return f"{lead}{seen.what}{value}{at} ({seen.threshold})"


def clause_text(clause: Clause) -> str:
    """A clause with its evidence, or with what would settle it."""
    parts = [evidence_text(seen) for seen in clause.evidence]
    if clause.result == "undecided" and clause.settle:
        parts.append(f"to settle it: {clause.settle}")
    return "; ".join(parts)


def deciding(finding: Finding) -> tuple[Clause, ...]:
    """The clauses that made the result: those that failed, else those still open, else all."""
    needed = tuple(c for c in finding.clauses if c.required)
    if finding.result == "met":
        return needed
    return tuple(c for c in needed if c.result == finding.result)


def _fixed(value: float, places: int) -> str:
    text = f"{value:.{places}f}"
    if float(text) == 0:
        text = text.lstrip("-")
    return text.replace("-", "\N{MINUS SIGN}")


def _plural(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"

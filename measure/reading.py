"""One ECG read: rhythm, intervals, shapes and findings together."""

from collections.abc import Mapping
from dataclasses import dataclass

from digitize.tracing import Tracing
from measure.average import DominantBeat
from measure.boundaries import Boundaries
from measure.criteria.finding import Finding
from measure.quantity import Quantity
from measure.rhythm import Rhythm
from measure.waves import LeadWaves


@dataclass(frozen=True)
class Person:
    """What a person says about the patient, where thresholds depend on it."""

    sex: str | None = None  # "male" or "female"
    age_years: float | None = None


@dataclass(frozen=True, eq=False)
class Reading:
    """Everything measured on one tracing.

    `intervals` is keyed: rate_bpm, rr_ms, p_ms, pr_ms, qrs_ms, qt_ms, jt_ms, qtc_bazett_ms,
    qtc_fridericia_ms, qtc_framingham_ms, qtc_hodges_ms, p_axis_deg, qrs_axis_deg, t_axis_deg.
    """

    tracing: Tracing
    person: Person
    rhythm: Rhythm
    beat: DominantBeat
    boundaries: Boundaries
    waves: Mapping[str, LeadWaves]
    intervals: Mapping[str, Quantity]
    findings: tuple[Finding, ...]
    cautions: tuple[str, ...]

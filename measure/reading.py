"""One ECG read: rhythm, intervals, shapes and findings together."""

from collections.abc import Mapping
from dataclasses import dataclass

from digitize.tracing import Tracing
from measure.average import DominantBeat, average_beats
from measure.beats import Beats, find_beats
from measure.boundaries import Boundaries, find_boundaries
from measure.criteria import judge
from measure.criteria.finding import Finding
from measure.intervals import measure_intervals
from measure.quantity import Quantity
from measure.rhythm import Rhythm, describe_rhythm
from measure.waves import LeadWaves, measure_waves

_ALWAYS = ("This is no diagnosis: a qualified clinician reads the original tracing and decides.",)
_FEW_BEATS = 3
_HIGH_SHARE_ODD = 0.3


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
    beats: Beats
    rhythm: Rhythm
    beat: DominantBeat
    boundaries: Boundaries
    waves: Mapping[str, LeadWaves]
    intervals: Mapping[str, Quantity]
    findings: tuple[Finding, ...]
    cautions: tuple[str, ...]


def read(tracing: Tracing, person: Person | None = None) -> Reading:
    """Return the whole reading of one tracing.

    Raises
    ------
    NoTrace
        No beat stands out in any lead.
    """
    person = person or Person()
    beats = find_beats(tracing)
    beat = average_beats(tracing, beats)
    boundaries = find_boundaries(beat, beats)
    waves = measure_waves(beat, boundaries)
    rhythm = describe_rhythm(beats, boundaries, waves)
    intervals = measure_intervals(beat, boundaries, rhythm, waves)
    return Reading(
        tracing=tracing,
        person=person,
        beats=beats,
        rhythm=rhythm,
        beat=beat,
        boundaries=boundaries,
        waves=waves,
        intervals=intervals,
        findings=judge(waves, boundaries, intervals, rhythm, beat, person),
        cautions=cautions_of(tracing, beats, beat),
    )


def cautions_of(tracing: Tracing, beats: Beats, beat: DominantBeat) -> tuple[str, ...]:
    """What a person must know before using the numbers."""
    cautions = list(_ALWAYS)
    cautions += [f"Check by eye: {check.message}" for check in tracing.checks if not check.passed]
    for what, known in (
        ("paper speed", tracing.speed_mm_s),
        ("gain", tracing.gain_mm_mv),
        ("timing of the columns", tracing.timing),
    ):
        if known.source == "assumed" and tracing.layout.value != "digital":
            cautions.append(f"The {what} was assumed, not found on the page: {known.value}.")
    few = [lead for lead, n in zip(beat.leads, beat.beats, strict=True) if 0 < n < _FEW_BEATS]
    if few:
        cautions.append(f"Only one or two whole beats are visible in {', '.join(few)}.")
    none = [lead for lead, n in zip(beat.leads, beat.beats, strict=True) if n == 0]
    if none:
        cautions.append(f"No whole usual beat is visible in {', '.join(none)}.")
    aside = 1 - beats.dominant.mean()
    if aside > _HIGH_SHARE_ODD:
        cautions.append(
            f"{aside:.0%} of the beats were set aside; what is called usual may not be so."
        )
    return tuple(cautions)

"""What was measured on a tracing, as the formats take it: numbers with their codes, and findings.

Codes of ISO/IEEE 11073-10101 are those of DICOM PS3.16 CID 3227, 3228, 3229 and 3689, which the
tests hold them against; heart rate, the reference identifiers and all LOINC codes are written down
from memory. What no standard has a code for stands under its words alone. Units are UCUM.
"""

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class Concept:
    """What a number is called: in words, in UCUM, and in the code systems that have it.

    `mdc` is the code in partition 2 of ISO/IEEE 11073-10101, `refid` its reference identifier.
    """

    words: str
    unit: str
    mdc: int | None = None
    refid: str | None = None
    loinc: str | None = None


CONCEPTS: Mapping[str, Concept] = {
    "rate_bpm": Concept("Heart rate", "/min", 16770, "MDC_ECG_HEART_RATE", "8867-4"),
    "rr_ms": Concept("RR interval", "ms", 16168, "MDC_ECG_TIME_PD_RR_GL", "8637-1"),
    "p_ms": Concept("P duration", "ms", 16184, "MDC_ECG_TIME_PD_P_GL"),
    "pr_ms": Concept("PR interval", "ms", 15872, "MDC_ECG_TIME_PD_PR_GL", "8625-6"),
    "qrs_ms": Concept("QRS duration", "ms", 16156, "MDC_ECG_TIME_PD_QRS_GL", "8633-0"),
    "qt_ms": Concept("QT interval", "ms", 16160, "MDC_ECG_TIME_PD_QT_GL", "8634-8"),
    "jt_ms": Concept("JT interval", "ms"),
    "qtc_bazett_ms": Concept(
        "QTc interval by Bazett", "ms", 15880, "MDC_ECG_TIME_PD_QTcB", "8636-3"
    ),
    "qtc_fridericia_ms": Concept(
        "QTc interval by Fridericia", "ms", 15892, "MDC_ECG_TIME_PD_QTcF", "8636-3"
    ),
    "qtc_framingham_ms": Concept("QTc interval by the Framingham formula", "ms", loinc="8636-3"),
    "qtc_hodges_ms": Concept("QTc interval by Hodges", "ms", loinc="8636-3"),
    "p_axis_deg": Concept("P axis", "deg", 16128, "MDC_ECG_ANGLE_P_FRONT", "8626-4"),
    "qrs_axis_deg": Concept("QRS axis", "deg", 16132, "MDC_ECG_ANGLE_QRS_FRONT", "8632-2"),
    "t_axis_deg": Concept("T axis", "deg", 16136, "MDC_ECG_ANGLE_T_FRONT", "8638-9"),
}


@dataclass(frozen=True)
class Number:
    """One measured number with its standard error in the unit of its concept.

    `value` and `se` are None where it could not be measured; `reason` then says why.
    """

    key: str  # of `CONCEPTS`
    value: float | None
    se: float | None
    reason: str | None = None

    @property
    def concept(self) -> Concept:
        """What the number is called."""
        return CONCEPTS[self.key]


@dataclass(frozen=True)
class Judged:
    """A published definition and whether it is "met", "not met" or "undecided"."""

    definition: str
    source: str
    result: str


@dataclass(frozen=True)
class Measurements:
    """All that was measured on one tracing, in the order of the reading.

    `remarks` are whole sentences that go with it: what to beware of, whether anyone signed it.
    """

    numbers: tuple[Number, ...] = ()
    findings: tuple[Judged, ...] = ()
    remarks: tuple[str, ...] = ()


NOTHING = Measurements()


def rounded(value: float) -> float:
    """Tenths: finer than any of these can be measured on paper."""
    return round(value, 1) + 0.0  # adding zero turns -0.0 round

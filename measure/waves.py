"""The shape of the dominant beat, lead by lead: deflections, notches, ST and T."""

from collections.abc import Mapping
from dataclasses import dataclass

from measure.quantity import Quantity


@dataclass(frozen=True)
class Deflection:
    """One wave of a QRS. Times in ms after the overall QRS onset; downward amplitudes negative."""

    name: str  # "Q", "R", "S", "R'", "S'", "QS"
    amplitude_mv: float
    se_mv: float
    onset_ms: float
    peak_ms: float
    offset_ms: float
    area_mv_ms: float

    @property
    def duration_ms(self) -> float:
        """Length of the deflection."""
        return self.offset_ms - self.onset_ms


@dataclass(frozen=True)
class Notch:
    """A notch (a turning point within a deflection) or a slur (a sudden slowing without one)."""

    kind: str  # "notch" or "slur"
    onset_ms: float  # after the overall QRS onset
    peak_ms: float
    depth_mv: float
    prominence_se: float  # depth over its standard error


@dataclass(frozen=True)
class LeadWaves:
    """Everything measured within one lead of the dominant beat.

    `smallest_mv` is the amplitude from which a deflection counts in this lead: the published
    limit, or more where the noise asks for it; it is what an absent q was compared with.
    `st_mv` is keyed by ms after the J point: 0, 40, 60, 80. `qrs_complete` is False where the
    edge of the panel cuts the QRS.
    """

    lead: str
    shape: str  # "qRs", "rSR'", "QS", ...; a notched R says so
    deflections: tuple[Deflection, ...]
    notches: tuple[Notch, ...]
    r_peak_time_ms: Quantity  # lead's own QRS onset to the peak of the last R that is a peak
    net_area_mv_ms: Quantity
    st_mv: Mapping[int, Quantity]
    t_mv: Quantity  # signed peak of T
    p_mv: Quantity  # signed peak of P
    smallest_mv: float
    qrs_complete: bool
    beats: int

    def find(self, name: str) -> Deflection | None:
        """The deflection called `name`, None where there is none."""
        return next((d for d in self.deflections if d.name == name), None)

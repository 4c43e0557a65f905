"""Where P, QRS and T begin and end, over all leads and lead by lead."""

from collections.abc import Mapping
from dataclasses import dataclass

from measure.quantity import Quantity


@dataclass(frozen=True)
class Edges:
    """Boundaries of one lead or of all leads together, in ms after the fiducial point."""

    p_on_ms: Quantity
    p_off_ms: Quantity
    qrs_on_ms: Quantity
    qrs_off_ms: Quantity
    t_off_ms: Quantity


@dataclass(frozen=True)
class Boundaries:
    """Boundaries of the dominant beat: `overall` over all leads, `by_lead` for each lead.

    `paced_spike_ms` is the time of a pacing spike before the QRS, None where there is none.
    """

    overall: Edges
    by_lead: Mapping[str, Edges]
    paced_spike_ms: float | None = None

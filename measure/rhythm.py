"""Rate and rhythm, limited to what the tracing shows."""

from dataclasses import dataclass

from measure.quantity import Quantity


@dataclass(frozen=True)
class Rhythm:
    """Rate, regularity and a statement in plain words.

    `statement` is one of: "sinus P waves", "no P wave found, irregular", "no P wave found,
    regular", "paced spikes seen", "undecided"; `why` gives the evidence. `premature` counts beats
    set aside as early, `odd` those set aside for their shape.
    """

    rate_bpm: Quantity
    rr_ms: Quantity
    regular: bool | None
    statement: str
    why: tuple[str, ...]
    premature: int
    odd: int
    paced: bool

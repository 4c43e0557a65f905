"""Rate and rhythm, limited to what the tracing shows."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from measure.beats import Beats
from measure.boundaries import Boundaries
from measure.quantity import Quantity, missing
from measure.waves import LeadWaves

_REGULAR = 0.08  # mean change from one interval to the next (common practice: about 10 %)
_IRREGULAR = 0.12


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


def describe_rhythm(beats: Beats, boundaries: Boundaries, waves: Mapping[str, LeadWaves]) -> Rhythm:
    """Return rate, regularity and what the P waves show.

    A P wave counts as sinus when it is upright in I and aVF and keeps step with the QRS; that it
    keeps step is what makes it stand out of the average.
    """
    rr_ms = _rr(beats)
    regular = _regular(beats)
    paced = bool(beats.paced.any())
    premature = sum(kind.startswith("early") for kind in beats.kind)
    odd = sum(kind in ("aberrant", "paced") for kind in beats.kind)
    statement, why = _statement(beats, boundaries, waves, regular)
    return Rhythm(_rate(rr_ms), rr_ms, regular, statement, why, premature, odd, paced)


def _rr(beats: Beats) -> Quantity:
    rr_ms = 1000 * beats.rr_s
    if len(rr_ms) == 0:
        return missing("ms", "a single beat shows no interval")
    # The mean hardly depends on where within each QRS its middle is put: 2 ms at either end.
    scatter = rr_ms.std(ddof=1) / np.sqrt(len(rr_ms)) if len(rr_ms) > 1 else 0.05 * rr_ms[0]
    se = float(np.hypot(scatter, 3.0 / len(rr_ms)))
    return Quantity(float(rr_ms.mean()), se, "ms", beats=len(beats.time_s))


def _rate(rr_ms: Quantity) -> Quantity:
    if not rr_ms.known:
        return missing("1/min", rr_ms.reason or "no interval")
    rate = 60000 / rr_ms.value
    return Quantity(rate, rate * rr_ms.se / rr_ms.value, "1/min", beats=rr_ms.beats)


def _regular(beats: Beats) -> bool | None:
    """Whether the intervals between usual beats are steady; None where too few or in between."""
    if beats.unsteadiness < _REGULAR:
        return True
    return False if beats.unsteadiness > _IRREGULAR else None


def _statement(
    beats: Beats,
    boundaries: Boundaries,
    waves: Mapping[str, LeadWaves],
    regular: bool | None,
) -> tuple[str, tuple[str, ...]]:
    if beats.paced.any():
        share = f"{int(beats.paced.sum())} of {len(beats.paced)} beats follow a pacing spike"
        return "paced spikes seen", (share,)
    if not boundaries.overall.p_on_ms.known:
        reason = boundaries.overall.p_on_ms.reason or "no P wave"
        if regular is None:
            return "undecided", (reason, "the intervals neither steady nor clearly irregular")
        return f"no P wave found, {'regular' if regular else 'irregular'}", (reason,)
    step = "the P wave keeps step with the QRS"
    polarity = {lead: waves[lead].p_mv for lead in ("I", "aVF") if lead in waves}
    if len(polarity) < 2 or not all(p.known for p in polarity.values()):
        return "undecided", (step, "its polarity in I and aVF cannot be seen")
    shown = ", ".join(f"{p.value:+.2f} mV in {lead}" for lead, p in polarity.items())
    if all(p.value > p.se for p in polarity.values()):
        return "sinus P waves", (f"P is upright in I and aVF ({shown})", step)
    if any(p.value < -p.se for p in polarity.values()):
        return "undecided", (f"P is not upright in both I and aVF ({shown})", step)
    return "undecided", (f"P is too small in I or aVF to tell its direction ({shown})", step)

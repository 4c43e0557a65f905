"""When the beats of a model recording come: sinus, early beats, fibrillation, pacing."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from tests.drawn.heart import HeartSpec


@dataclass(frozen=True)
class Beat:
    """One beat: when it starts and, once it is drawn, where its waves begin and end (seconds)."""

    kind: str  # "usual", "atrial" (early, conducted), "ventricular" (early, wide)
    qrs_start_s: float
    p_start_s: float | None
    p_on_s: float | None = None
    p_off_s: float | None = None
    qrs_on_s: float = 0.0
    qrs_off_s: float = 0.0
    t_off_s: float = 0.0


def beat_times(spec: HeartSpec, rng: np.random.Generator) -> tuple[Beat, ...]:
    """Return the beats that touch the recording, one before its start and one after its end."""
    rr_s = 60 / spec.rate_bpm
    at_s = -rr_s * rng.uniform(0.3, 0.8)
    beats = []
    number = 0
    while at_s < spec.duration_s + rr_s:
        if number in spec.early_ventricular:
            early_s = at_s - 0.36 * rr_s
            beats.append(Beat("ventricular", early_s, None))
            # The sinus beat falls into the refractory time: a full compensatory pause follows.
            at_s = at_s + rr_s
        elif number in spec.early_atrial:
            early_s = at_s - 0.32 * rr_s
            beats.append(Beat("atrial", early_s, early_s - spec.pr_ms / 1e3))
            at_s = early_s + 1.12 * rr_s
        else:
            p_s = at_s - spec.pr_ms / 1e3 if spec.rhythm == "sinus" else None
            beats.append(Beat("usual", at_s, p_s))
            at_s += _interval_s(spec, rr_s, at_s, rng)
        number += 1
    return tuple(beats)


def _interval_s(spec: HeartSpec, rr_s: float, at_s: float, rng: np.random.Generator) -> float:
    """Time to the next beat: steady, breathing, or wholly irregular."""
    if spec.rhythm == "paced":
        return rr_s
    if spec.rhythm == "fibrillation":
        return float(np.clip(rr_s * rng.lognormal(0, 0.22), 0.33, 1.9))
    breathing = 0.025 * np.sin(2 * np.pi * 0.22 * at_s)
    return float(rr_s * (1 + breathing + 0.006 * rng.standard_normal()))

"""Heart-vector pulses of each conduction pattern: a table of what excites what, and when.

Axes: x to the left, y to the feet, z to the back; times in ms from a nominal QRS onset. The
numbers are made up so that each pattern shows what its published criteria ask for (AHA/ACCF/HRS
2009 part III, Circulation 119:e235, from memory); they are nobody's ECG.
"""

from dataclasses import dataclass, replace

import numpy as np


@dataclass(frozen=True)
class Pulse:
    """One Gaussian pulse of the heart vector, its flanks of different width where they differ."""

    xyz_mv: tuple[float, float, float]
    centre_ms: float
    rise_ms: float
    fall_ms: float

    def stretched(self, factor: float) -> "Pulse":
        """The same pulse in slower or faster time."""
        return replace(
            self,
            centre_ms=self.centre_ms * factor,
            rise_ms=self.rise_ms * factor,
            fall_ms=self.fall_ms * factor,
        )

    def moved(self, by_ms: float) -> "Pulse":
        """The same pulse, later."""
        return replace(self, centre_ms=self.centre_ms + by_ms)


def _pulse(
    x: float, y: float, z: float, at: float, rise: float, fall: float | None = None
) -> Pulse:
    return Pulse((x, y, z), at, rise, rise if fall is None else fall)


P_WAVE = (_pulse(0.03, 0.07, -0.06, 38, 15, 16), _pulse(0.07, 0.09, 0.04, 66, 16, 15))

QRS = {
    "normal": (
        _pulse(-0.16, -0.02, -0.22, 16, 5),
        _pulse(0.95, 0.85, 0.25, 38, 8),
        _pulse(0.35, 0.25, 0.75, 52, 8),
        _pulse(-0.15, -0.15, 0.22, 68, 6),
    ),
    "lbbb": (
        _pulse(0.30, 0.15, -0.16, 20, 9),
        _pulse(0.74, 0.30, 0.75, 50, 15),
        _pulse(0.38, 0.12, 0.92, 76, 14),
        _pulse(0.95, 0.12, 0.70, 104, 14),
        _pulse(0.15, -0.08, 0.35, 128, 9),
    ),
    "rbbb": (
        _pulse(-0.16, -0.02, -0.26, 16, 5),
        _pulse(0.95, 0.75, 0.20, 38, 8),
        _pulse(0.25, 0.20, 0.60, 53, 7),
        _pulse(-0.24, -0.02, -0.70, 92, 15),
        _pulse(-0.16, -0.06, -0.46, 120, 11),
    ),
    "lafb": (
        _pulse(-0.17, 0.26, -0.20, 16, 6),
        _pulse(0.45, -0.10, 0.10, 38, 8),
        _pulse(0.85, -0.80, 0.35, 56, 9),
        _pulse(0.10, -0.45, 0.50, 74, 8),
    ),
    "lpfb": (
        _pulse(0.26, -0.28, -0.22, 16, 6),
        _pulse(0.20, 0.45, 0.10, 38, 8),
        _pulse(-0.30, 1.05, 0.35, 55, 9),
        _pulse(-0.25, 0.35, 0.45, 73, 8),
    ),
    "nonspecific": (
        _pulse(-0.18, -0.05, -0.24, 20, 7),
        _pulse(0.60, 0.50, 0.10, 46, 12),
        _pulse(0.65, 0.50, 0.55, 76, 14),
        _pulse(0.10, -0.12, 0.50, 108, 12),
    ),
    "paced": (
        _pulse(0.15, -0.15, 0.10, 22, 10),
        _pulse(0.35, -0.80, 0.75, 58, 17),
        _pulse(0.30, -0.75, 0.90, 96, 18),
        _pulse(0.10, -0.20, 0.40, 132, 13),
    ),
}

# T wave vectors, with the ST shift that precedes them; secondary T waves oppose a wide QRS.
T_VECTOR = {
    "normal": (0.28, 0.22, -0.20),
    "lbbb": (-0.32, -0.08, -0.55),
    "rbbb": (0.30, 0.18, 0.12),
    "lafb": (0.24, 0.20, -0.18),
    "lpfb": (0.18, 0.10, -0.18),
    "nonspecific": (0.10, 0.08, -0.22),
    "paced": (-0.18, 0.40, -0.50),
}
ST_SHARE = {"lbbb": 0.28, "paced": 0.25, "rbbb": 0.05, "nonspecific": 0.10}

# Name -> (pulses to use, usual QRS duration in ms).
PATTERNS: dict[str, tuple[str, float]] = {
    "normal": ("normal", 92.0),
    "lbbb": ("lbbb", 152.0),
    "incomplete lbbb": ("lbbb", 115.0),
    "rbbb": ("rbbb", 146.0),
    "incomplete rbbb": ("rbbb", 114.0),
    "lafb": ("lafb", 102.0),
    "lpfb": ("lpfb", 102.0),
    "nonspecific": ("nonspecific", 130.0),
    "paced": ("paced", 164.0),
}


def pattern(name: str, *, rate_bpm: float, qrs_ms: float) -> dict[str, tuple[Pulse, ...]]:
    """Return the pulses of P, QRS (not yet scaled) and T, T in ms from the QRS onset."""
    kind = PATTERNS[name][0]
    qt_ms = 395 * (60 / rate_bpm) ** (1 / 3) + 0.7 * max(qrs_ms - 90, 0)
    fall_ms = 27.0
    peak_ms = qt_ms - 2.6 * fall_ms
    rise_ms = min(48.0, (peak_ms - qrs_ms) / 2.2)
    x, y, z = T_VECTOR[kind]
    share = ST_SHARE.get(kind, 0.03)
    shift_ms = (0.6 * qrs_ms + 0.4 * peak_ms) - 20
    st = _pulse(share * x, share * y, share * z, shift_ms, 0.4 * (shift_ms - qrs_ms) + 12, 55)
    return {"p": P_WAVE, "qrs": QRS[kind], "t": (st, _pulse(x, y, z, peak_ms, rise_ms, fall_ms))}


def other_p(p_wave: tuple[Pulse, ...]) -> tuple[Pulse, ...]:
    """P wave of an early atrial beat: it starts elsewhere, so it points elsewhere."""
    return tuple(
        replace(pulse, xyz_mv=(0.9 * pulse.xyz_mv[0], 0.3 * pulse.xyz_mv[1], -pulse.xyz_mv[2]))
        for pulse in p_wave
    )


def ventricular_beat(rng: np.random.Generator) -> dict[str, tuple[Pulse, ...]]:
    """An early ventricular beat: wide, tall, no P wave, T opposite to QRS."""
    main = np.array([-0.7, rng.uniform(0.4, 1.0), rng.uniform(-0.9, 0.9)]) * rng.uniform(1.1, 1.5)
    x, y, z = (float(v) for v in main)
    qrs = (
        _pulse(0.3 * x, 0.2 * y, 0.4 * z, 30, 12),
        _pulse(x, y, z, 68, 18),
        _pulse(0.5 * x, 0.7 * y, 0.4 * z, 108, 17),
    )
    return {"p": (), "qrs": qrs, "t": (_pulse(-0.4 * x, -0.4 * y, -0.4 * z, 300, 60, 36),)}

"""A model ECG with exact truth: a heart vector made of Gaussians, seen through twelve leads.

Every wave is a sum of Gaussian pulses of the heart vector (x to the left, y to the feet, z to the
back). Dower's matrix takes the vector to I, II and V1-V6; III, aVR, aVL and aVF follow from them
by Einthoven's and Goldberger's relations, which therefore hold exactly, noise included.

The truth of a boundary is a definition: the first and last moment at which the noise-free vector
of that wave alone is longer than `LEVEL_MV`. On standard paper 0.02 mV is 0.2 mm, about half the
width of a pen line.

References
----------
Dower GE, Machado HB, Osborne JA. On deriving the electrocardiogram from vectorcardiographic
leads. Clin Cardiol 1980;3:87 (coefficients from memory).
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from digitize.tracing import LEADS
from tests.drawn import conduction
from tests.drawn.conduction import Pulse
from tests.drawn.rhythm import Beat, beat_times

FS_HZ = 500.0
LEVEL_MV: Mapping[str, float] = {"p": 0.01, "qrs": 0.02, "t": 0.02}

DOWER: Mapping[str, tuple[float, float, float]] = {
    "I": (0.632, -0.235, 0.059),
    "II": (0.235, 1.066, -0.132),
    "V1": (-0.515, 0.157, -0.917),
    "V2": (0.044, 0.164, -1.387),
    "V3": (0.882, 0.098, -1.277),
    "V4": (1.213, 0.127, -0.601),
    "V5": (1.125, 0.127, -0.086),
    "V6": (0.831, 0.076, 0.230),
}


@dataclass(frozen=True)
class HeartSpec:
    """What the model heart does. Everything random follows from `seed`."""

    conduction: str = "normal"  # a key of `conduction.PATTERNS`
    rhythm: str = "sinus"  # "sinus", "fibrillation", "paced"
    rate_bpm: float = 72.0
    early_atrial: tuple[int, ...] = ()  # numbers of the beats that come early
    early_ventricular: tuple[int, ...] = ()
    pr_ms: float = 160.0
    qrs_ms: float | None = None  # None: what is usual for the pattern
    size: float = 1.0  # factor on all QRS amplitudes
    turn_deg: float = 0.0  # frontal rotation of the heart, clockwise positive
    variation: float = 0.06  # relative scatter of the amplitudes of single pulses
    wander_mv: float = 0.0
    muscle_mv: float = 0.0
    duration_s: float = 10.0
    seed: int = 0


@dataclass(frozen=True)
class HeartTruth:
    """What the usual beat of a recording really measures, and where each beat stands."""

    label: str
    rate_bpm: float
    p_ms: float | None
    pr_ms: float | None
    qrs_ms: float
    qt_ms: float
    qrs_axis_deg: float
    beats: tuple[Beat, ...]


@dataclass(frozen=True, eq=False)
class Recording:
    """Twelve simultaneous leads, `mv` (12, n) in the order of `LEADS`, and what is known."""

    mv: np.ndarray
    fs_hz: float = FS_HZ
    name: str = "model"
    truth: HeartTruth | None = None
    about: Mapping[str, float | str] = field(default_factory=dict)

    def lead(self, name: str) -> np.ndarray:
        """Samples of one lead in mV; "-aVR" is aVR turned over."""
        if name.startswith("-"):
            return -self.mv[LEADS.index(name[1:])]
        return self.mv[LEADS.index(name)]


def twelve_leads(eight: Mapping[str, np.ndarray]) -> np.ndarray:
    """Return (12, n) in the order of `LEADS` from I, II and V1-V6."""
    one, two = eight["I"], eight["II"]
    three = two - one
    limb = {
        "I": one,
        "II": two,
        "III": three,
        "aVR": -(one + two) / 2,
        "aVL": (one - three) / 2,
        "aVF": (two + three) / 2,
    }
    return np.stack([limb[lead] if lead in limb else eight[lead] for lead in LEADS])


def record_model(spec: HeartSpec) -> Recording:
    """Return the recording of a model heart with its exact truth."""
    rng = np.random.default_rng([spec.seed, 1])
    usual = _usual_beat(spec, rng)
    extra = conduction.ventricular_beat(rng)
    beats = beat_times(spec, rng)
    n = round(spec.duration_s * FS_HZ)
    time_s = np.arange(n) / FS_HZ
    vector = np.zeros((3, n))
    placed = []
    for beat in beats:
        waves = _for_beat(usual, extra, beat)
        for wave, pulses in waves.items():
            start_s = beat.p_start_s if wave == "p" else beat.qrs_start_s
            if start_s is not None:
                vector += _sum(pulses, (time_s - start_s) * 1e3)
        placed.append(_with_boundaries(beat, waves))
    if spec.rhythm == "fibrillation":
        vector += _fibrillation(time_s, rng)
    eight = {lead: np.array(row) @ vector for lead, row in DOWER.items()}
    for lead in eight:
        eight[lead] = eight[lead] + _noise(spec, n, rng)
    if spec.rhythm == "paced":
        _add_spikes(eight, placed, time_s)
    return Recording(twelve_leads(eight), truth=_truth(spec, usual, placed))


def _usual_beat(spec: HeartSpec, rng: np.random.Generator) -> dict[str, tuple[Pulse, ...]]:
    """Pulses of P, QRS and T of the usual beat; P and QRS start at 0 ms by the truth's level."""
    qrs_ms = spec.qrs_ms or conduction.PATTERNS[spec.conduction][1]
    waves = conduction.pattern(spec.conduction, rate_bpm=spec.rate_bpm, qrs_ms=qrs_ms)
    shaken = {
        wave: tuple(_shake(pulse, spec, rng, wave) for pulse in pulses)
        for wave, pulses in waves.items()
    }
    # The level is fixed while the pulses stretch: a few rounds settle the asked duration.
    for _ in range(4):
        on_ms, off_ms = _span(shaken["qrs"], "qrs")
        factor = qrs_ms / (off_ms - on_ms)
        shaken["qrs"] = tuple(pulse.moved(-on_ms).stretched(factor) for pulse in shaken["qrs"])
    p_on_ms, _ = _span(shaken["p"], "p")
    shaken["p"] = tuple(pulse.moved(-p_on_ms) for pulse in shaken["p"])
    return shaken if spec.rhythm == "sinus" else {**shaken, "p": ()}


def _shake(pulse: Pulse, spec: HeartSpec, rng: np.random.Generator, wave: str) -> Pulse:
    """A pulse scaled, turned in the frontal plane, and varied a little."""
    scale = (spec.size if wave == "qrs" else spec.size**0.5) * (
        1 + spec.variation * rng.standard_normal()
    )
    turn = np.deg2rad(spec.turn_deg)
    x, y, z = np.array(pulse.xyz_mv) * scale
    turned = (
        x * np.cos(turn) - y * np.sin(turn),
        x * np.sin(turn) + y * np.cos(turn),
        z,
    )
    return replace(pulse, xyz_mv=turned)


def _sum(pulses: tuple[Pulse, ...], time_ms: np.ndarray) -> np.ndarray:
    """Heart vector (3, n) of some pulses at times in ms."""
    vector = np.zeros((3, len(time_ms)))
    for pulse in pulses:
        width_ms = np.where(time_ms < pulse.centre_ms, pulse.rise_ms, pulse.fall_ms)
        shape = np.exp(-0.5 * ((time_ms - pulse.centre_ms) / width_ms) ** 2)
        vector += np.array(pulse.xyz_mv)[:, None] * shape
    return vector


def _span(pulses: tuple[Pulse, ...], wave: str) -> tuple[float, float]:
    """First and last time in ms at which the vector of these pulses is over its level."""
    time_ms = np.arange(-400.0, 1200.0, 0.25)
    over = np.flatnonzero(np.linalg.norm(_sum(pulses, time_ms), axis=0) > LEVEL_MV[wave])
    return float(time_ms[over[0]]), float(time_ms[over[-1]])


def _for_beat(
    usual: dict[str, tuple[Pulse, ...]], extra: dict[str, tuple[Pulse, ...]], beat: Beat
) -> dict[str, tuple[Pulse, ...]]:
    """Waves of one beat: a ventricular beat has its own, an atrial one another P wave."""
    if beat.kind == "ventricular":
        return extra
    if beat.kind == "atrial":
        return {**usual, "p": conduction.other_p(usual["p"])}
    return usual


def _with_boundaries(beat: Beat, waves: dict[str, tuple[Pulse, ...]]) -> Beat:
    """The beat with the true ends of its waves in seconds."""
    qrs_on_ms, qrs_off_ms = _span(waves["qrs"], "qrs")
    _, t_off_ms = _span(waves["t"], "t")
    p_on_s = p_off_s = None
    if waves["p"] and beat.p_start_s is not None:
        p_on_ms, p_off_ms = _span(waves["p"], "p")
        p_on_s, p_off_s = beat.p_start_s + p_on_ms / 1e3, beat.p_start_s + p_off_ms / 1e3
    start_s = beat.qrs_start_s
    return replace(
        beat,
        p_on_s=p_on_s,
        p_off_s=p_off_s,
        qrs_on_s=start_s + qrs_on_ms / 1e3,
        qrs_off_s=start_s + qrs_off_ms / 1e3,
        t_off_s=start_s + t_off_ms / 1e3,
    )


def _fibrillation(time_s: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Fibrillatory waves: a few drifting tones of 4-8 Hz, largest towards V1."""
    direction = np.array([-0.4, 0.4, -0.8])[:, None]
    wave = np.zeros_like(time_s)
    for _ in range(4):
        drift = 0.6 * np.sin(2 * np.pi * rng.uniform(0.1, 0.4) * time_s + rng.uniform(0, 6.3))
        tone = 2 * np.pi * rng.uniform(4.5, 8.0) * time_s + rng.uniform(0, 6.3) + 2 * drift
        wave += rng.uniform(0.015, 0.035) * np.sin(tone)
    return direction * wave


def _noise(spec: HeartSpec, n: int, rng: np.random.Generator) -> np.ndarray:
    """Baseline wander (breathing) and muscle noise of one electrode pair."""
    time_s = np.arange(n) / FS_HZ
    wander = sum(
        rng.normal(0, 1 / k) * np.sin(2 * np.pi * f * time_s + rng.uniform(0, 6.3))
        for k, f in ((1, rng.uniform(0.15, 0.3)), (2, rng.uniform(0.3, 0.6)))
    )
    white = rng.standard_normal(n)
    muscle = white - 0.6 * np.roll(white, 1)
    return spec.wander_mv * wander + spec.muscle_mv * muscle / np.std(muscle)


def _add_spikes(eight: dict[str, np.ndarray], beats: list[Beat], time_s: np.ndarray) -> None:
    """Pacing spikes of 2 ms, just before each paced QRS, in place."""
    for beat in beats:
        at = int(np.searchsorted(time_s, beat.qrs_start_s - 0.012))
        if beat.kind == "usual" and 0 <= at < len(time_s):
            for lead, height_mv in zip(
                DOWER, (0.5, -0.9, -0.3, -0.5, -0.6, -0.7, -0.6, -0.4), strict=True
            ):
                eight[lead][at] += height_mv


def _truth(spec: HeartSpec, usual: dict[str, tuple[Pulse, ...]], beats: list[Beat]) -> HeartTruth:
    """Intervals of the usual beat, and its frontal QRS axis by area."""
    _, qrs_ms = _span(usual["qrs"], "qrs")
    _, t_off_ms = _span(usual["t"], "t")
    p_ms = _span(usual["p"], "p")[1] if usual["p"] else None
    area = _sum(usual["qrs"], np.arange(-100.0, 400.0, 0.5)).sum(axis=1)
    one, two = np.array(DOWER["I"]) @ area, np.array(DOWER["II"]) @ area
    foot = two - one / 2
    starts_s = [b.qrs_start_s for b in beats if 0 <= b.qrs_start_s < spec.duration_s]
    rr_s = np.diff(starts_s).mean()
    return HeartTruth(
        label=spec.conduction,
        rate_bpm=float(60 / rr_s),
        p_ms=p_ms,
        pr_ms=spec.pr_ms if usual["p"] else None,
        qrs_ms=float(qrs_ms),
        qt_ms=float(t_off_ms),
        qrs_axis_deg=float(np.rad2deg(np.arctan2(2 * foot / np.sqrt(3), one))),
        beats=tuple(beats),
    )

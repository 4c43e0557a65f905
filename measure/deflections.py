"""The waves of one QRS: its deflections in order, their conventional letters, notches and slurs.

A deflection lies on one side of the level at the QRS onset, is high and long enough to count, and
turns: it has two opposite slopes with a turning point between, so that an ST segment which leaves
the baseline is no wave. A notch is a turning point within a deflection; a slur is a limb that
slows down and speeds up again without turning.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy as sp

_SMALLEST_MV = 0.02  # CSE working party (from memory)
_NOISE_FACTOR = 3.0  # a deflection must also be this many standard errors high
_SHORTEST_MS = 6  # CSE working party (from memory)
_LARGE_MV = 0.5  # from here a wave is written with a capital letter (common practice)
_LEAST_NOTCH_MV = 0.02  # as for a deflection
_LEAST_NOTCH_SE = 2.0
_SLUR_RATIO = 0.6  # of the slower of the two steep parts beside it
_SLOPE_MS = 9


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


def find_deflections(
    time_ms: np.ndarray, mv: np.ndarray, se_mv: np.ndarray
) -> tuple[Deflection, ...]:
    """Return the waves of one QRS in order.

    Parameters
    ----------
    time_ms : ndarray, (n,)
        Time after the overall QRS onset, from the onset to the offset, in steps of 1 ms.
    mv : ndarray, (n,)
        The lead about its level at the QRS onset.
    se_mv : ndarray, (n,)
        Standard error of an amplitude at each place: beats differ more at the top of a tall R
        than where a small q begins.

    References
    ----------
    CSE working party: 20 uV and 6 ms; the turning point as in IEC 60601-2-51 annex GG (both from
    memory).
    """
    spans = [s for s in _one_sided(mv) if _counts(mv, s, smallest(se_mv))]
    spans = _joined(mv, spans)
    names = _names([float(mv[s][0] > 0) for s in _peaks(mv, spans)])
    return tuple(
        Deflection(
            name=name,
            amplitude_mv=float(mv[peak][0]),
            se_mv=float(se_mv[peak][0]),
            onset_ms=float(time_ms[start]),
            peak_ms=float(time_ms[peak][0]),
            offset_ms=float(time_ms[min(stop, len(time_ms) - 1)]),
            area_mv_ms=float(mv[start:stop].sum() * (time_ms[1] - time_ms[0])),
        )
        for name, (start, stop), peak in zip(names, spans, _peaks(mv, spans), strict=True)
    )


def smallest(se_mv: np.ndarray) -> np.ndarray:
    """Amplitude in mV from which a deflection counts: the published one, or clear of the noise."""
    return np.maximum(_SMALLEST_MV, _NOISE_FACTOR * se_mv)


def letters(deflections: Sequence[Deflection], notches: Sequence[Notch]) -> str:
    """Return the shape in conventional letters, such as "rSR'" or "R, notched"."""
    if not deflections:
        return "no wave"
    word = "".join(
        d.name if abs(d.amplitude_mv) >= _LARGE_MV else d.name.lower() for d in deflections
    )
    largest = max(deflections, key=lambda d: abs(d.amplitude_mv))
    bent = {n.kind for n in notches if largest.onset_ms <= n.peak_ms <= largest.offset_ms}
    if "notch" in bent:
        return f"{word}, {largest.name} notched"
    return f"{word}, {largest.name} slurred" if bent else word


def find_notches(
    time_ms: np.ndarray, mv: np.ndarray, se_mv: np.ndarray, deflections: Sequence[Deflection]
) -> tuple[Notch, ...]:
    """Return the notches and slurs within each deflection, in order of time."""
    if not np.isfinite(mv).all():
        return ()  # a gap within the QRS hides notches and makes others
    slope = sp.signal.savgol_filter(mv, min(_SLOPE_MS, len(mv) - 1 | 1), 2, deriv=1)
    found: list[Notch] = []
    for wave in deflections:
        start, stop = np.searchsorted(time_ms, [wave.onset_ms, wave.offset_ms])
        if stop - start > 2 * _SHORTEST_MS:
            sign = 1 if wave.amplitude_mv > 0 else -1
            part = slice(int(start), int(stop) + 1)
            found += _turns(time_ms[part], sign * mv[part], se_mv[part])
            found += _slurs(time_ms[part], sign * mv[part], sign * slope[part], se_mv[part])
    return tuple(sorted(found, key=lambda n: n.peak_ms))


def _one_sided(mv: np.ndarray) -> list[tuple[int, int]]:
    """Stretches (start, stop) on one side of the baseline."""
    ends = np.flatnonzero(np.diff(np.sign(mv)) != 0) + 1
    return list(zip([0, *ends.tolist()], [*ends.tolist(), len(mv)], strict=True))


def _counts(mv: np.ndarray, span: tuple[int, int], smallest_mv: np.ndarray) -> bool:
    """Whether a stretch is high and long enough, and turns before the QRS is over."""
    start, stop = span
    height = np.abs(mv[start:stop])
    peak = int(np.argmax(height))
    if stop - start < _SHORTEST_MS or height[peak] < smallest_mv[start + peak]:
        return False
    return stop < len(mv) or bool(height[peak] - height[peak:].min() >= smallest_mv[start + peak])


def _joined(mv: np.ndarray, spans: Sequence[tuple[int, int]]) -> list[tuple[int, int]]:
    """Neighbours on the same side, with nothing that counts between them, as one."""
    joined: list[tuple[int, int]] = []
    for start, stop in spans:
        if joined and np.sign(mv[joined[-1][1] - 1]) == np.sign(mv[start]):
            joined[-1] = (joined[-1][0], stop)
        else:
            joined.append((start, stop))
    return joined


def _peaks(mv: np.ndarray, spans: Sequence[tuple[int, int]]) -> list[np.ndarray]:
    return [np.array([start + int(np.argmax(np.abs(mv[start:stop])))]) for start, stop in spans]


def _names(upward: Sequence[float]) -> list[str]:
    """Q, R, S, R', S' ... of deflections that alternate; QS where none points upward."""
    if not any(upward):
        return ["QS"] * len(upward)
    names, primes = [], -1
    for up in upward:
        if up:
            primes += 1
            names.append("R" + "'" * primes)
        else:
            names.append("Q" if primes < 0 else "S" + "'" * primes)
    return names


def _turns(time_ms: np.ndarray, mv: np.ndarray, se_mv: np.ndarray) -> list[Notch]:
    """Valleys between two tops of a wave that points upward."""
    valleys, about = sp.signal.find_peaks(-mv, prominence=_LEAST_NOTCH_MV)
    notches = []
    for k, depth in zip(valleys, about["prominences"], strict=True):
        before = int(np.argmax(mv[: k + 1]))
        least_mv = max(_LEAST_NOTCH_MV, _LEAST_NOTCH_SE * float(se_mv[k]))
        # The nearer top before the valley is where the notch begins.
        tops, _ = sp.signal.find_peaks(mv[: k + 1], prominence=0.5 * least_mv)
        onset = int(tops[-1]) if len(tops) else before
        if depth >= least_mv:
            notches.append(
                Notch(
                    "notch",
                    float(time_ms[onset]),
                    float(time_ms[k]),
                    float(depth),
                    float(depth / se_mv[k]),
                )
            )
    return notches


def _slurs(
    time_ms: np.ndarray, mv: np.ndarray, slope: np.ndarray, se_mv: np.ndarray
) -> list[Notch]:
    """Places where a rising or falling limb slows down and speeds up again."""
    slurs = []
    for sign in (1, -1):
        speed = sign * slope
        slow, _ = sp.signal.find_peaks(-speed)
        for k in slow[speed[slow] > 0]:
            slur = _slur_at(int(k), time_ms, mv, speed, se_mv)
            if slur is not None:
                slurs.append(slur)
    return slurs


def _slur_at(
    k: int, time_ms: np.ndarray, mv: np.ndarray, speed: np.ndarray, se_mv: np.ndarray
) -> Notch | None:
    """The slur whose slowest place is `k`: its depth is the trace's way off the straight chord."""
    limb = speed > 0
    start = k - int(np.argmin(np.append(limb[: k + 1][::-1], False)))
    stop = k + int(np.argmin(np.append(limb[k:], False)))
    left = start + 1 + int(np.argmax(speed[start + 1 : k + 1]))
    right = k + int(np.argmax(speed[k:stop]))
    if not speed[k] <= _SLUR_RATIO * min(speed[left], speed[right]) or right - left < _SHORTEST_MS:
        return None
    chord = np.interp(np.arange(left, right + 1), [left, right], [mv[left], mv[right]])
    off = mv[left : right + 1] - chord
    depth = float(off.max() - off.min())
    if depth < max(_LEAST_NOTCH_MV, _LEAST_NOTCH_SE * float(se_mv[k])):
        return None
    return Notch("slur", float(time_ms[left]), float(time_ms[k]), depth, depth / float(se_mv[k]))

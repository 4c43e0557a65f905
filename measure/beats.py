"""Where the beats are, and which of them belong to the dominant rhythm.

At each moment every visible panel, short or strip, votes with its activity: the envelope of its
steep part, in units of that panel's own QRS. So neither amplitude, nor baseline, nor a change of
column matters. Beats are then told apart by shape (correlation over the leads that two beats share)
and by timing.
"""

import itertools
from dataclasses import dataclass
from functools import cache

import numpy as np
import scipy as sp

from digitize.errors import NoTrace
from digitize.tracing import FS_HZ, Tracing
from measure.spikes import bridge_spikes, find_spikes


def _samples(ms: float) -> int:
    return round(ms * FS_HZ / 1000)


_BAND_HZ = (6.0, 28.0)  # steep parts of a QRS, wide ones too, rather than of P and T
_SHARP_HZ = (15.0, 40.0)  # a T wave has hardly anything here, however tall
_ENVELOPE_MS = 100
_WINDOW_S = 2.0  # holds at least one beat from 30/min
_LEAST_SHARE = 0.30  # of the usual QRS activity
_LEAST_IN_GAP = 0.13  # where a beat is overdue
_OVERDUE = 1.55  # times the usual interval
_MOST = 2.0  # times a panel's usual QRS: what is larger is an artefact, or need not be louder
_REFRACTORY_MS = 220
_T_WITHIN_MS = 420  # a smaller, slower hump this soon after a QRS is its T wave
_P_WITHIN_MS = 320  # before the middle of its QRS
_WAVE_SHARE = 0.55  # of the activity of its QRS
_SHARP_SHARE = 0.25
_LEAST_PACED = 0.2  # share of the beats: ragged ink makes a jump look like a spike now and then
_SPIKE_BEFORE_MS = (180, -20)  # a pacing spike stands at most this far before the middle of its QRS
_SHAPE_MS = (110, 150)  # window around the beat in which shapes are compared
_LAGS = _samples(80)  # the middle of a wide QRS may be put at either of two humps
_ALIKE = 0.80  # correlation from which two shapes are one
_SIZE_RATIO = 0.5  # and their amplitudes must not differ by more than this
_EARLY = 0.85  # share of the usual interval below which a beat is early
_IRREGULAR = 0.10  # robust relative scatter of intervals from which no beat counts as early


@dataclass(frozen=True, eq=False)
class Beats:
    """All beats of a tracing.

    `time_s` is (n,), the middle of each QRS in seconds of the recording. `kind` names each beat:
    "usual", "early" (usual shape, before its time), "aberrant" (another shape), "early aberrant",
    "paced" (another shape than usual, after a pacing spike). `dominant` is True for the beats whose
    shape is the usual one and which are not early: those are averaged. `paced` is True after a
    spike; `spike_s` holds the times of all spikes.
    """

    time_s: np.ndarray
    kind: tuple[str, ...]
    dominant: np.ndarray
    paced: np.ndarray
    spike_s: np.ndarray

    @property
    def rr_s(self) -> np.ndarray:
        """Intervals between successive beats in seconds, (n - 1,)."""
        return np.diff(self.time_s)

    @property
    def unsteadiness(self) -> float:
        """Mean change from one interval of usual beats to the next, relative to their mean.

        Breathing is slow and changes it little; NaN with fewer than three such intervals.
        """
        usual = np.array([kind in ("usual", "paced") for kind in self.kind])
        rr_s = self.rr_s[usual[1:] & usual[:-1]]
        return float(np.abs(np.diff(rr_s)).mean() / rr_s.mean()) if len(rr_s) >= 3 else np.nan


def find_beats(tracing: Tracing) -> Beats:
    """Return the beats of a tracing with their classes.

    Raises
    ------
    NoTrace
        No beat stands out in any lead.
    """
    start_s, mv = _on_one_raster(tracing)
    spike_s = start_s + find_spikes(mv) / FS_HZ
    start_s, mv = _on_one_raster(tracing, spike_s)
    at = _peaks(_activity(mv, _BAND_HZ), _activity(mv, _SHARP_HZ))
    if len(at) == 0:
        raise NoTrace(f"{tracing.source.file_name}: no beat stands out in any lead.")
    time_s = start_s + at / FS_HZ
    paced, spike_s = _after_spikes(time_s, spike_s)
    alike, late = _same_shape(mv, at)
    time_s = time_s + late / FS_HZ
    early = _early(time_s, alike)
    return Beats(
        time_s=time_s,
        kind=tuple(map(_kind, alike, early, paced)),
        dominant=alike & ~early if (alike & ~early).any() else alike,
        paced=paced,
        spike_s=spike_s,
    )


def _on_one_raster(tracing: Tracing, spike_s: np.ndarray | None = None) -> tuple[float, np.ndarray]:
    """Start of the recording and all its panels, (panels, n), spikes bridged where given."""
    start_s = min(panel.start_s for panel in tracing.panels)
    offsets = [round((panel.start_s - start_s) * FS_HZ) for panel in tracing.panels]
    n = max(k + len(panel.mv) for k, panel in zip(offsets, tracing.panels, strict=True))
    mv = np.full((len(offsets), n), np.nan)
    for row, k, panel in zip(mv, offsets, tracing.panels, strict=True):
        row[k : k + len(panel.mv)] = panel.mv if spike_s is None else bridge_spikes(panel, spike_s)
    return start_s, mv


def _activity(mv: np.ndarray, band_hz: tuple[float, float]) -> np.ndarray:
    """Activity at each moment, (n,): 1 at a usual QRS, whichever panels are visible.

    Energies add, so that leads with a large QRS lead where another shows P waves as steep as its
    QRS; each moment is then measured by the usual QRS of the panels visible there.
    """
    total = np.zeros(mv.shape[1])
    usual = np.full(mv.shape[1], 1e-9)
    for (first, stop), rows in _by_extent(mv).items():
        panels = mv[rows, first:stop]
        for envelope, seen in zip(_envelopes(panels, band_hz), np.isfinite(panels), strict=True):
            scale, contrast = _scale_and_contrast(envelope)
            if scale > 0:
                height = np.minimum(envelope, _MOST * scale)
                total[first:stop] += np.where(seen, contrast * height**2, 0)
                usual[first:stop] += np.where(seen, contrast * scale**2, 0)
    return np.sqrt(total / usual)


def _by_extent(mv: np.ndarray) -> dict[tuple[int, int], list[int]]:
    """Rows by where they begin and end; those too short to show a beat are left out."""
    rows: dict[tuple[int, int], list[int]] = {}
    for number, seen in enumerate(np.isfinite(mv)):
        if seen.sum() >= 0.4 * FS_HZ:
            first, last = np.flatnonzero(seen)[[0, -1]]
            rows.setdefault((int(first), int(last) + 1), []).append(number)
    return rows


def _envelopes(panels: np.ndarray, band_hz: tuple[float, float]) -> np.ndarray:
    """Smoothed size of each panel within a band of frequencies, (panels, n)."""
    index = np.arange(panels.shape[1])
    known = np.isfinite(panels)
    bridged = [np.interp(index, index[k], row[k]) for row, k in zip(panels, known, strict=True)]
    pad = min(panels.shape[1] - 1, 100)
    steep = sp.signal.sosfiltfilt(_band(band_hz), np.array(bridged), padtype="even", padlen=pad)
    window = sp.signal.windows.hann(_samples(2 * _ENVELOPE_MS))[None]
    energy = sp.signal.fftconvolve(steep**2, window / window.sum(), "same", axes=1)
    return np.sqrt(np.maximum(energy, 0))


@cache
def _band(band_hz: tuple[float, float]) -> np.ndarray:
    """Second-order sections of the filter that lets a band pass."""
    return sp.signal.butter(2, band_hz, "bandpass", fs=FS_HZ, output="sos")


def _scale_and_contrast(envelope: np.ndarray) -> tuple[float, float]:
    """Usual height of the envelope at a QRS, and how far it stands out of the rest."""
    size = _samples(1000 * _WINDOW_S)
    starts = range(0, max(len(envelope) - size // 2, 1), size // 2)
    scale = float(np.median([envelope[k : k + size].max() for k in starts]))
    rest = float(np.median(envelope))
    return scale, min(scale / (rest + 1e-6), 50.0) ** 2


def _peaks(activity: np.ndarray, sharp: np.ndarray) -> np.ndarray:
    """Sample numbers of the QRS complexes within the activity."""
    at, _ = sp.signal.find_peaks(activity, height=_LEAST_IN_GAP, distance=_samples(80))
    at = _without_refractory(activity, at)
    strong = at[activity[at] >= _LEAST_SHARE]
    strong = _without_p_and_t(activity, sharp, strong)
    return _with_overdue(activity, strong, at)


def _without_refractory(activity: np.ndarray, at: np.ndarray) -> np.ndarray:
    """Peaks of which none has a higher one nearer than the refractory time."""
    kept: list[int] = []
    for k in at[np.argsort(-activity[at], kind="stable")]:
        if all(abs(k - other) >= _samples(_REFRACTORY_MS) for other in kept):
            kept.append(int(k))
    return np.array(sorted(kept), dtype=int)


def _without_p_and_t(activity: np.ndarray, sharp: np.ndarray, at: np.ndarray) -> np.ndarray:
    """Peaks without the lower ones that stand to a QRS as its P or T wave does."""
    kept: list[int] = []
    for k in at[np.argsort(-activity[at], kind="stable")]:
        is_wave = any(
            -_samples(_P_WITHIN_MS) <= k - qrs <= _samples(_T_WITHIN_MS)
            and (activity[k] < _WAVE_SHARE * activity[qrs] or sharp[k] < _SHARP_SHARE * sharp[qrs])
            for qrs in kept
        )
        if not is_wave:
            kept.append(int(k))
    return np.array(sorted(kept), dtype=int)


def _with_overdue(activity: np.ndarray, strong: np.ndarray, weak: np.ndarray) -> np.ndarray:
    """Strong peaks and the highest weak one within each gap that is too long."""
    if len(strong) < 3:
        return strong
    usual = np.median(np.diff(strong))
    added: list[int] = []
    for left, right in itertools.pairwise(strong):
        between = weak[
            (weak > left + _samples(_T_WITHIN_MS)) & (weak < right - _samples(_REFRACTORY_MS))
        ]
        if right - left > _OVERDUE * usual and len(between):
            added.append(int(between[np.argmax(activity[between])]))
    return np.array(sorted([*strong, *added]), dtype=int)


def _after_spikes(time_s: np.ndarray, spike_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Which beats follow a spike, and the spikes; a paced beat here or there is not believed."""
    lag_ms = 1000 * (time_s[:, None] - spike_s[None, :])
    paced = ((lag_ms <= _SPIKE_BEFORE_MS[0]) & (lag_ms >= _SPIKE_BEFORE_MS[1])).any(axis=1)
    if paced.sum() < max(2, _LEAST_PACED * len(time_s)):
        return np.zeros(len(time_s), bool), np.array([])
    return paced, spike_s


def _same_shape(mv: np.ndarray, at: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """True for the beats of the commonest shape, and how many samples each beat lies late.

    Columns that share no lead cannot be compared: each has its own commonest shape.
    """
    similarity, lag = _similarity(mv, at)
    _, group = sp.sparse.csgraph.connected_components(np.isfinite(similarity), directed=False)
    usual, late = np.zeros(len(at), bool), np.zeros(len(at), int)
    for number in range(group.max() + 1):
        members = np.flatnonzero(group == number)
        leader, alike = _commonest(similarity[np.ix_(members, members)])
        usual[members] = alike
        late[members] = np.where(alike, lag[members, members[leader]], 0)
    return usual, late


def _similarity(mv: np.ndarray, at: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Correlation of each pair of beats over shared leads at its best lag, and that lag, (n, n).

    NaN where two beats share no lead, 0 where their sizes differ much.
    """
    before, after = (_samples(ms) + _LAGS for ms in _SHAPE_MS)
    padded = np.pad(mv, ((0, 0), (before, after)), constant_values=np.nan)
    cut = np.stack([padded[:, k : k + before + after] for k in at])
    inner = slice(_LAGS, before + after - _LAGS)
    seen = np.isfinite(cut).all(axis=2)
    slope = np.gradient(sp.ndimage.gaussian_filter1d(np.nan_to_num(cut), 4, axis=2), axis=2)
    slope[~seen] = 0
    fixed = slope[:, :, inner]
    fixed_energy = seen.astype(float) @ (fixed**2).sum(axis=2).T
    best = np.where(seen.astype(int) @ seen.T.astype(int) > 0, 0.0, np.nan)
    lag = np.zeros(best.shape, int)
    for shift in range(-_LAGS, _LAGS + 1, 2):
        moved = slope[:, :, inner.start + shift : inner.stop + shift]
        energy = (moved**2).sum(axis=2) @ seen.T.astype(float)
        dot = moved.reshape(len(at), -1) @ fixed.reshape(len(at), -1).T
        alike = dot / np.sqrt(np.maximum(energy * fixed_energy, 1e-12))
        alike[energy < _SIZE_RATIO**2 * fixed_energy] = 0
        alike[fixed_energy < _SIZE_RATIO**2 * energy] = 0
        better = alike > best
        best[better], lag[better] = alike[better], shift
    return best, lag


def _commonest(similarity: np.ndarray) -> tuple[int, np.ndarray]:
    """The beat that most others are like, and True for those."""
    alike = np.nan_to_num(similarity) >= _ALIKE
    np.fill_diagonal(alike, True)
    leader = int(np.argmax(alike.sum(axis=1) + 1e-3 * np.nan_to_num(similarity).sum(axis=1)))
    return leader, alike[leader]


def _early(time_s: np.ndarray, alike: np.ndarray) -> np.ndarray:
    """True for beats that come before their time in an otherwise regular rhythm."""
    early = np.zeros(len(time_s), bool)
    rr_s = np.diff(time_s)
    if len(rr_s) < 3:
        return early
    both = alike[1:] & alike[:-1]
    usual_s = np.median(rr_s[both]) if both.sum() >= 3 else np.median(rr_s)
    scatter = np.median(np.abs(rr_s - usual_s)) / 0.6745 / usual_s
    if scatter < _IRREGULAR:
        early[1:] = rr_s < _EARLY * usual_s
        # Of two short intervals in a row the second may only follow an early beat in time.
        early[2:] &= ~(early[1:-1] & (time_s[2:] - time_s[:-2] > 2 * _EARLY * usual_s))
    return early


def _kind(alike: bool, early: bool, paced: bool) -> str:
    if alike:
        return "early" if early else "usual"
    if paced:
        return "paced"
    return "early aberrant" if early else "aberrant"

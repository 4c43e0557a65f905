"""What the traces themselves say about the page: which lead a strip repeats, and whether the
columns follow one another in time.

A rhythm strip shows one of the leads above it; where the columns are consecutive it agrees with
that lead's short panel sample by sample. And heartbeats fall at the same instant in all leads, so
the beats of each column stand either where the strip has them at that place, or where the first
column has them.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from digitize.tracing import FS_HZ, Known, Panel

SAME_DB, CLEAR_DB = 8.0, 3.0  # agreement of a repeated lead, and its lead over the next best
LAG_S = 0.02
BEAT_S = 0.03  # width of a beat's activity
APART = 0.25  # difference of correlation that settles the timing


def name_strips(panels: Sequence[Panel]) -> tuple[Panel, ...]:
    """Return the panels with each strip named after the short panel that it repeats.

    A name that was read or given stays. Another is overruled by clear agreement with another lead,
    but not while the lead that it names is on the page and too little of it was read to compare.
    """
    short = [panel for panel in panels if not panel.strip]
    return tuple(_named(panel, short) if panel.strip and short else panel for panel in panels)


def _named(strip: Panel, short: Sequence[Panel]) -> Panel:
    """One strip under the name of the lead it repeats, where that is beyond doubt."""
    if strip.lead_source in ("given", "printed"):
        return strip  # a self-check tells where the traces contradict it
    agreement = sorted(((_agreement_db(strip, s), s.lead) for s in short), reverse=True)
    best, lead = agreement[0]
    second = next((db for db, other in agreement[1:] if other != lead), -np.inf)
    own = next((db for db, other in agreement if other == strip.lead), None)
    if own == -np.inf:
        return strip  # hardly anything of its own lead was read: another may look like it
    own = -np.inf if own is None else own
    if lead == strip.lead or best < SAME_DB or best - max(second, own) < CLEAR_DB:
        return strip
    gain = next(s.gain_mm_mv for s in short if s.lead == lead)
    return replace(
        strip,
        lead=lead,
        lead_source="found",
        mv=strip.mv * strip.gain_mm_mv / gain,
        sigma_mv=strip.sigma_mv * strip.gain_mm_mv / gain,
        gain_mm_mv=gain,
        notes=(*strip.notes, f"named {lead} because it repeats that lead ({best:.0f} dB)"),
    )


def settle_timing(panels: Sequence[Panel], known: Known) -> tuple[tuple[Panel, ...], Known]:
    """Return the panels at their true start times, and how the columns relate in time.

    Parameters
    ----------
    panels : sequence of Panel
        With start times as for consecutive columns.
    known : Known
        What the layout says; a value that a person gave stays.
    """
    if known.source == "given":
        return tuple(panels), known
    starts = sorted({panel.start_s for panel in panels if not panel.strip})
    if len(starts) < 2:
        return tuple(panels), known
    columns = [_activity([p for p in panels if not p.strip and p.start_s == s]) for s in starts]
    strips = [p for p in panels if p.strip]
    strip = _activity(strips) if strips else None
    follow: list[float] = []
    repeat: list[float] = []
    for start, column in zip(starts[1:], columns[1:], strict=True):
        repeat.append(_correlation(column, columns[0] if strip is None else strip))
        if strip is not None:
            follow.append(_correlation(column, strip[round(start * FS_HZ) :]))
    if strip is None:
        simultaneous = min(repeat) > 0.7
        decided = simultaneous or float(np.mean(repeat)) < 0.4
    else:
        difference = float(np.mean(follow) - np.mean(repeat))
        simultaneous = difference < 0
        decided = abs(difference) > APART
    if not decided:
        return tuple(panels), known
    if simultaneous:
        return tuple(replace(p, start_s=0.0) for p in panels), Known("simultaneous", "found")
    return tuple(panels), Known("consecutive", "found")


def _agreement_db(strip: Panel, short: Panel) -> float:
    """Power of a short panel over that of its difference from the strip at the same time.

    Both as heights on the paper: the strip's gain hangs on its name.
    """
    first = round((short.start_s - strip.start_s) * FS_HZ)
    best = -np.inf
    for lag in range(-round(LAG_S * FS_HZ), round(LAG_S * FS_HZ) + 1):
        low = max(first + lag, 0)
        other = strip.gain_mm_mv * strip.mv[low : first + lag + len(short.mv)]
        own = short.gain_mm_mv * short.mv[low - first - lag :][: len(other)]
        both = np.isfinite(own) & np.isfinite(other)
        if both.sum() < 0.5 * len(short.mv) or np.std(own[both]) == 0:
            continue
        error = max(float(np.var(own[both] - other[both])), 1e-9)
        best = max(best, float(10 * np.log10(np.var(own[both]) / error)))
    return best


def _activity(panels: Sequence[Panel]) -> np.ndarray:
    """How fast the leads of one column move, summed and smoothed: high at each beat."""
    length = min(len(panel.mv) for panel in panels)
    total = np.zeros(length)
    for panel in panels:
        mv = panel.mv[:length]
        step = np.abs(np.diff(mv, prepend=mv[:1]))
        step[~np.isfinite(step)] = 0.0
        total += step / max(float(np.quantile(step, 0.98)), 1e-6)
    width = round(BEAT_S * FS_HZ)
    return np.convolve(np.minimum(total, 2 * len(panels)), np.hanning(2 * width + 1), mode="same")


def _correlation(a: np.ndarray, b: np.ndarray) -> float:
    """Largest correlation of two activities within a small lag."""
    length = min(len(a), len(b))
    lag = round(2 * LAG_S * FS_HZ)
    if length < 4 * lag:
        return 0.0
    a, b = a[:length], b[:length]
    centre = a[lag : length - lag]
    shifted = (b[lag + k : length - lag + k] for k in range(-lag, lag + 1, 2))
    return float(max(np.corrcoef(centre, other)[0, 1] for other in shifted))

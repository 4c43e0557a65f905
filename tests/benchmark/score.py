"""Comparing a tracing with the truth of its drawn page.

The signal-to-noise ratio of a lead is 10 log10 of signal power over error power in dB. Each lead's
mean is removed (paper has no absolute zero) and one shift in time of at most 0.2 s is allowed; a
sample that was not read counts as if it had been read as zero after removal of the mean, so a
lead that is missing altogether scores 0 dB.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from digitize.tracing import Panel, Tracing
from tests.drawn.composition import PanelTruth
from tests.drawn.page import PageTruth

MOST_SHIFT_S = 0.2
_COARSE_S, _FINE_S = 0.002, 0.00025
_SCALE_TOLERANCE = 0.03  # a speed or gain further off than this is another one


@dataclass(frozen=True)
class LeadScore:
    """How one printed panel was read; `snr_db` is 0 and the rest NaN where it is missing."""

    lead: str
    strip: bool
    snr_db: float
    gain_error: float  # relative
    shift_s: float
    read_share: float
    amplitudes_right: bool  # largest and smallest sample within 25 uV, or 5 % above 0.5 mV


@dataclass(frozen=True)
class PageScore:
    """How one page was read."""

    leads: tuple[LeadScore, ...]
    names_right: bool
    unflagged: tuple[str, ...]  # "speed", "gain", "layout", "leads": wrong, and nobody was told


def snr_db(truth_mv: np.ndarray, read_mv: np.ndarray) -> float:
    """Ratio of signal to error power of two aligned series, NaN in `read_mv` where not read.

    Returns
    -------
    float
        dB; 0 where nothing was read, at most 99.
    """
    read = np.isfinite(read_mv)
    if not read.any():
        return 0.0
    signal = truth_mv - truth_mv.mean()
    error = signal.copy()
    difference = truth_mv[read] - read_mv[read]
    error[read] = difference - difference.mean()
    power, error_power = float(np.sum(signal**2)), float(np.sum(error**2))
    if error_power <= power * 10**-9.9:
        return 99.0
    return 10 * float(np.log10(power / error_power)) if power > 0 else 0.0


def score_panel(truth: PanelTruth, panel: Panel | None) -> LeadScore:
    """Return how well one panel was read, at the best shift within the limit."""
    if panel is None or not np.isfinite(panel.mv).any():
        return LeadScore(truth.lead, truth.strip, 0.0, np.nan, np.nan, 0.0, False)
    sign = -1.0 if truth.lead.startswith("-") and not panel.lead.startswith("-") else 1.0
    steps = round(MOST_SHIFT_S / _COARSE_S)
    best_s = _best_shift(truth, panel, sign, np.arange(-steps, steps + 1) * _COARSE_S)
    near = best_s + np.arange(-8, 9) * _FINE_S
    best_s = _best_shift(truth, panel, sign, near[np.abs(near) <= MOST_SHIFT_S + 1e-9])
    read_mv = sign * _shifted(truth, panel, best_s)
    read = np.isfinite(read_mv)
    want, got = truth.mv[read] - truth.mv[read].mean(), read_mv[read] - read_mv[read].mean()
    return LeadScore(
        lead=truth.lead,
        strip=truth.strip,
        snr_db=snr_db(truth.mv, read_mv),
        gain_error=float(want @ got / (want @ want) - 1) if want.any() else np.nan,
        shift_s=best_s,
        read_share=float(read.mean()),
        amplitudes_right=all(
            abs(edge(got) - edge(want)) <= max(0.025, 0.05 * abs(edge(want)))
            for edge in (np.max, np.min)
        ),
    )


def score_page(truth: PageTruth, tracing: Tracing | None) -> PageScore:
    """Return how well a page was read; None where no tracing came out."""
    if tracing is None:
        return PageScore(tuple(score_panel(t, None) for t in truth.panels), False, ())
    scores = tuple(score_panel(t, _partner(t, tracing.panels)) for t in truth.panels)
    names_right = _in_order(truth.panels) == _in_order(tracing.panels)
    return PageScore(scores, names_right, _unflagged(truth, tracing, names_right))


def _best_shift(truth: PanelTruth, panel: Panel, sign: float, shifts_s: np.ndarray) -> float:
    scores = [snr_db(truth.mv, sign * _shifted(truth, panel, s)) for s in shifts_s]
    return float(shifts_s[int(np.argmax(scores))])


def _shifted(truth: PanelTruth, panel: Panel, shift_s: float) -> np.ndarray:
    """The panel's samples at the times of the truth, both counted from their own left edge."""
    wanted_s = np.arange(len(truth.mv)) / truth.fs_hz + shift_s
    own_s = np.arange(len(panel.mv)) / panel.fs_hz
    return np.interp(wanted_s, own_s, panel.mv, left=np.nan, right=np.nan)


def _partner(truth: PanelTruth, panels: Sequence[Panel]) -> Panel | None:
    """The panel that claims to be this one: same lead, same sort."""
    names = (truth.lead, truth.lead.removeprefix("-"))
    fitting = [p for p in panels if p.lead in names and p.strip == truth.strip]
    return min(fitting, key=lambda p: abs(p.row - truth.row), default=None)


def _in_order(panels: Sequence[Panel | PanelTruth]) -> list[tuple[str, bool]]:
    """Names from the top left to the bottom right; a name turned over counts as its lead."""
    placed = sorted(panels, key=lambda p: (p.row, p.box_mm[0]))
    return [(p.lead.removeprefix("-"), p.strip) for p in placed]


def _unflagged(truth: PageTruth, tracing: Tracing, names_right: bool) -> tuple[str, ...]:
    """What is wrong although neither its origin nor any check asks a person to look."""
    if any(check.passed is False for check in tracing.checks):
        return ()
    by_name = {(p.lead.removeprefix("-"), p.strip): p for p in tracing.panels}
    pairs = [(t, by_name.get((t.lead.removeprefix("-"), t.strip))) for t in truth.panels]
    wrong = []
    if tracing.speed_mm_s.source != "assumed" and _off(tracing.speed_mm_s.value, truth.speed_mm_s):
        wrong.append("speed")
    if tracing.gain_mm_mv.source != "assumed" and any(
        p is not None and _off(p.gain_mm_mv, t.gain_mm_mv) for t, p in pairs
    ):
        wrong.append("gain")
    if tracing.layout.source != "assumed" and tracing.layout.value != truth.layout:
        wrong.append("layout")
    if not names_right and all(p.lead_source != "assumed" for p in tracing.panels):
        wrong.append("leads")
    return tuple(wrong)


def _off(value: float, true_value: float) -> bool:
    return abs(value / true_value - 1) > _SCALE_TOLERANCE

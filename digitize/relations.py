"""Do the limb leads agree with one another?

The six limb leads are six views of two voltages: II = I + III (Einthoven) and aVR = -(I + II)/2,
aVL = (I - III)/2, aVF = (II + III)/2 (Goldberger). Any three or more of them that were recorded at
one moment therefore check each other, and where they contradict, it can be tried which single
mistake (a lead upside down, at the wrong gain, two names exchanged) would explain it.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
import scipy as sp

from digitize.tracing import Check, Panel, Tracing

# Each limb lead as (part of I, part of II).
LIMB = {
    "I": (1.0, 0.0),
    "II": (0.0, 1.0),
    "III": (-1.0, 1.0),
    "aVR": (-0.5, -0.5),
    "aVL": (1.0, -0.5),
    "aVF": (-0.5, 1.0),
}
LIMIT = 0.20  # of the usual voltage: leads read at 14 dB still pass (rule of thumb)
NOISE_FACTOR = 2.0  # what the samples' own errors explain is no contradiction
NOISE_LIMIT = 0.35  # with more of it than this nothing can be judged
SHORTEST_S = 0.6  # of common time: about one beat

_GAINS = {0.5: "at half the gain", 2.0: "at twice the gain"}


@dataclass(frozen=True, eq=False)
class _Moment:
    """Limb leads over one stretch of time: (leads, samples) of mV and of their errors."""

    leads: tuple[str, ...]
    mv: np.ndarray
    sigma_mv: np.ndarray


def check_relations(tracing: Tracing) -> tuple[Check, ...]:
    """One check per group of limb leads that were recorded at one moment."""
    checks = tuple(_check(moment) for moment in _moments(tracing.panels))
    if checks:
        return checks
    return (
        Check(
            "lead_relations",
            None,
            "No three limb leads can be read at one moment: "
            "whether they agree with one another cannot be checked.",
        ),
    )


def leftover(leads: tuple[str, ...], mv: np.ndarray) -> float:
    """Return how much of the voltage contradicts the lead relations.

    Parameters
    ----------
    leads : tuple of str
        Three or more different limb leads.
    mv : ndarray, (len(leads), n)
        Simultaneous samples; each lead's mean is taken off, baselines are not comparable.

    Returns
    -------
    float
        Root mean square of the part that no pair of voltages I and II can produce, over that of
        the leads themselves: 0 for leads that agree, about 1 for unrelated ones.
    """
    centred = mv - mv.mean(axis=1, keepdims=True)
    odd = _contradiction(leads) @ centred
    usual = np.sqrt(np.mean(centred**2))
    return float(np.sqrt(np.mean(odd**2)) / usual) if usual > 0 else 0.0


def _contradiction(leads: tuple[str, ...]) -> np.ndarray:
    """Orthonormal (len(leads) - 2, len(leads)): what must be zero when the leads agree."""
    return sp.linalg.null_space(np.array([LIMB[lead] for lead in leads]).T).T


def _moments(panels: tuple[Panel, ...]) -> Iterator[_Moment]:
    """Groups of three or more limb leads over a common stretch, from left to right."""
    limb = [panel for panel in panels if panel.lead in LIMB]
    short = [panel for panel in limb if not panel.strip] or limb
    for start_s in sorted({panel.start_s for panel in short}):
        group = {panel.lead: panel for panel in short if panel.start_s == start_s}
        end_s = min(panel.start_s + len(panel.mv) / panel.fs_hz for panel in group.values())
        for panel in limb:
            covers = panel.start_s <= start_s and len(panel.mv) / panel.fs_hz >= end_s - start_s
            if panel.strip and covers:
                group.setdefault(panel.lead, panel)
        moment = _together(tuple(group.values()), start_s, end_s)
        if moment is not None:
            yield moment


def _together(panels: tuple[Panel, ...], start_s: float, end_s: float) -> _Moment | None:
    """The samples that all panels have between two times; None where that is too little."""
    if len(panels) < 3:
        return None
    fs_hz = panels[0].fs_hz
    count = round((end_s - start_s) * fs_hz)
    cuts = []
    for panel in panels:
        first = round((start_s - panel.start_s) * fs_hz)
        cuts.append(slice(first, first + count))
    count = min(len(panel.mv[cut]) for panel, cut in zip(panels, cuts, strict=True))
    mv = np.array([panel.mv[cut][:count] for panel, cut in zip(panels, cuts, strict=True)])
    sigma = np.array([panel.sigma_mv[cut][:count] for panel, cut in zip(panels, cuts, strict=True)])
    read = np.isfinite(mv).all(axis=0)
    if read.sum() < SHORTEST_S * fs_hz:
        return None
    return _Moment(tuple(panel.lead for panel in panels), mv[:, read], sigma[:, read])


def _check(moment: _Moment) -> Check:
    """Whether one group of leads agrees, and if not, what would explain it."""
    value = leftover(moment.leads, moment.mv)
    noise = _expected_leftover(moment)
    limit = max(LIMIT, NOISE_FACTOR * noise)
    names = _spoken(moment.leads)
    if noise > NOISE_LIMIT:
        return Check(
            "lead_relations",
            None,
            f"Leads {names} are too small against their reading errors to check each other.",
            value,
            limit,
            moment.leads,
        )
    if value <= limit:
        return Check(
            "lead_relations",
            True,
            f"Leads {names} agree with one another: {value:.0%} is left over.",
            value,
            limit,
            moment.leads,
        )
    reasons = _explanations(moment, value, limit)
    advice = (
        f"They would agree if {', or if '.join(reasons)}."
        if reasons
        else "No single lead upside down, exchanged or at another gain explains it."
    )
    return Check(
        "lead_relations",
        False,
        f"Leads {names} contradict one another: {value:.0%} is left over, at most {limit:.0%} "
        f"is expected. {advice} Compare their names and gain with the page.",
        value,
        limit,
        moment.leads,
    )


def _expected_leftover(moment: _Moment) -> float:
    """What the errors of the samples alone would leave over."""
    variance = (_contradiction(moment.leads) ** 2) @ np.nan_to_num(moment.sigma_mv) ** 2
    centred = moment.mv - moment.mv.mean(axis=1, keepdims=True)
    usual = np.sqrt(np.mean(centred**2))
    return float(np.sqrt(np.mean(variance)) / usual) if usual > 0 else np.inf


def _explanations(moment: _Moment, value: float, limit: float) -> list[str]:
    """Single mistakes that would make the leads agree, the best first, in words."""
    leads, mv = moment.leads, moment.mv
    tried: list[tuple[float, str]] = []
    for k, lead in enumerate(leads):
        for factor, words in ((-1.0, "upside down"), *_GAINS.items()):
            changed = mv.copy()
            changed[k] /= factor
            tried.append((leftover(leads, changed), f"lead {lead} were {words}"))
        if len(leads) > 3:
            rest = tuple(name for name in leads if name != lead)
            tried.append((leftover(rest, np.delete(mv, k, axis=0)), f"lead {lead} were another"))
    for i, j in combinations(range(len(leads)), 2):
        changed = mv.copy()
        changed[[i, j]] = changed[[j, i]]
        tried.append((leftover(leads, changed), f"{leads[i]} and {leads[j]} were exchanged"))
    good = sorted(item for item in tried if item[0] <= min(limit, value / 2))
    # Explanations that fit nearly as well as the best cannot be told apart by this relation.
    return [words for left, words in good if left <= good[0][0] + LIMIT / 4][:3]


def _spoken(leads: tuple[str, ...]) -> str:
    """The leads as words: "I, II and III"."""
    return f"{', '.join(leads[:-1])} and {leads[-1]}"

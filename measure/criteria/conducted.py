"""Whether the QRS is conducted at all: paced and pre-excited beats imitate every block.

The definitions of block describe beats that reach the ventricles through the His bundle alone.
"""

import numpy as np

from measure.criteria.case import Case
from measure.criteria.decide import OVERALL, Limit, Look, at_least, clause, finding, look_at, unseen
from measure.criteria.finding import Clause, Finding
from measure.criteria.shape import described
from measure.quantity import Quantity
from measure.waves import LeadWaves

DELTA_MS = 30.0  # the slow part lasts this long or more (common practice)
DELTA_MV = 0.05  # and is visible on paper
STEEP_SHARE = 0.5  # of the steepest slope: from here the limb is no longer slow
DELTA_LEADS = 3


def judge(case: Case) -> tuple[Finding, ...]:
    """Short PR with a slurred QRS onset."""
    short = case.interval("pr_ms", Limit("<", 120, "ms"), what="PR")
    wide = case.interval("qrs_ms", Limit(">", 110, "ms"), what="QRS duration")
    slow = at_least(DELTA_LEADS, case.in_leads(tuple(case.waves), lambda w: _slow_onset(case, w)))
    return (
        finding(
            "short_pr_slurred_onset",
            "short PR with slurred QRS onset",
            "common practice",
            [
                clause("PR < 120 ms", short),
                clause("QRS > 110 ms", wide),
                clause("QRS begins slowly, for 30 ms or more, in three leads or more", slow),
            ],
            ["Fits pre-excitation, which imitates bundle branch block and infarction."],
        ),
    )


def _slow_onset(case: Case, waves: LeadWaves) -> Look:
    """The first limb of the QRS leads straight to its largest wave and begins slowly.

    Looked at is the stretch from the lead's own onset to where the limb reaches half its steepest
    slope. A limb that turns before, as after a septal q or r, is no delta wave.
    """
    limit = Limit(">=", DELTA_MS, "ms")
    largest = max(waves.deflections, key=lambda d: abs(d.amplitude_mv), default=None)
    if largest is None or largest is not waves.deflections[0]:
        return described("not met", waves, "a slow first limb")
    time_ms, mv, _ = case.samples(waves.lead)
    limb = np.flatnonzero((time_ms >= largest.onset_ms) & (time_ms <= largest.peak_ms))
    slope = np.gradient(mv[limb] * np.sign(largest.amplitude_mv)) if limb.size > 1 else np.zeros(0)
    if slope.size == 0 or not np.isfinite(slope).all():
        return unseen(waves.lead, "the first limb of the QRS is not visible")
    steep = limb[int(np.argmax(slope >= STEEP_SHARE * slope.max()))]
    if abs(mv[steep] - mv[limb[0]]) < DELTA_MV:
        return described("not met", waves, "a slow first limb")
    slow = Quantity(float(time_ms[steep]) - largest.onset_ms, case.edge_se_ms(waves.lead), "ms")
    return look_at(slow, limit, lead=waves.lead, what="slow onset", time_ms=float(time_ms[steep]))


def precondition(case: Case, pre_excited: Finding) -> Clause:
    """The beat is neither paced nor looks pre-excited; else a block stays undecided."""
    if case.rhythm.paced:
        look = unseen(OVERALL, "pacing spikes are seen; an ECG without pacing would settle it")
    elif pre_excited.result == "met":
        look = unseen(OVERALL, f"a {pre_excited.definition} is seen, which imitates block")
    else:
        look = Look("met")
    return clause("(precondition) neither a paced nor a pre-excited beat", look)

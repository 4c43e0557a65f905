"""Whether the QRS is conducted at all: paced and pre-excited beats imitate every block.

The definitions of block describe beats that reach the ventricles through the His bundle alone.
"""

from measure.criteria.case import Case
from measure.criteria.decide import OVERALL, Limit, Look, at_least, clause, finding, unseen
from measure.criteria.finding import Clause, Finding
from measure.criteria.shape import notched_or_slurred
from measure.waves import LeadWaves

DELTA_END_MS = 50.0  # a delta wave slurs the first 40 ms or so of the QRS (common practice)
DELTA_LEADS = 2


def judge(case: Case) -> tuple[Finding, ...]:
    """Short PR with a slurred QRS onset."""

    def slurred_onset(waves: LeadWaves) -> Look:
        return notched_or_slurred(waves, from_ms=0.0, to_ms=DELTA_END_MS, at="onset_ms")

    short = case.interval("pr_ms", Limit("<", 120, "ms"), what="PR")
    wide = case.interval("qrs_ms", Limit(">", 110, "ms"), what="QRS duration")
    slur = at_least(DELTA_LEADS, case.in_leads(tuple(case.waves), slurred_onset))
    return (
        finding(
            "short_pr_slurred_onset",
            "short PR with slurred QRS onset",
            "common practice",
            [
                clause("PR < 120 ms", short),
                clause("QRS > 110 ms", wide),
                clause("slurred first 50 ms of the QRS in two leads or more", slur),
            ],
            ["Fits pre-excitation, which imitates bundle branch block and infarction."],
        ),
    )


def precondition(case: Case, pre_excited: Finding) -> Clause:
    """The beat is neither paced nor looks pre-excited; else a block stays undecided."""
    if case.rhythm.paced:
        look = unseen(OVERALL, "pacing spikes are seen; an ECG without pacing would settle it")
    elif pre_excited.result == "met":
        look = unseen(OVERALL, f"a {pre_excited.definition} is seen, which imitates block")
    else:
        look = Look("met")
    return clause("(precondition) neither a paced nor a pre-excited beat", look)


def not_paced(case: Case) -> Look:
    """The same for definitions that a short PR does not touch."""
    if case.rhythm.paced:
        return unseen(OVERALL, "pacing spikes are seen")
    return Look("met")

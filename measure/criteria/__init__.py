"""Published definitions, one file per family, each clause with its evidence."""

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

from measure.average import DominantBeat
from measure.boundaries import Boundaries
from measure.criteria import (
    axis,
    conducted,
    delay,
    fascicular,
    ischaemia_in_lbbb,
    lbbb,
    pr,
    qrs_bands,
    qt,
    rbbb,
    voltage,
)
from measure.criteria.case import Case
from measure.criteria.decide import OVERALL, as_look, some, unseen
from measure.criteria.finding import Finding
from measure.quantity import Quantity
from measure.rhythm import Rhythm
from measure.waves import LeadWaves

if TYPE_CHECKING:
    from measure.reading import Person

ADULT_YEARS = 16.0  # the statement gives children narrower limits (memory)
CHILD = "The definition is for adults; children's limits are narrower."


def judge(
    waves: Mapping[str, LeadWaves],
    boundaries: Boundaries,
    intervals: Mapping[str, Quantity],
    rhythm: Rhythm,
    beat: DominantBeat,
    person: "Person",
) -> tuple[Finding, ...]:
    """Hold every definition against one measured ECG.

    Parameters
    ----------
    waves, boundaries, intervals, rhythm, beat
        The measurements of the dominant beat; see their modules.
    person
        Sex and age, where known: a threshold that depends on sex is shown for both where it is
        not given and the outcome differs.

    Returns
    -------
    tuple of Finding
        The same keys for every ECG, the blocks first. A definition that asks for left bundle
        branch block and does not find it is not met.
    """
    case = Case(waves, boundaries, intervals, rhythm, beat, person)
    pre_excited = conducted.judge(case)
    precondition = conducted.precondition(case, pre_excited[0])
    left = lbbb.judge(case, precondition)
    definitions = tuple(f for f in left if f.key != "lbbb_bedside")
    complete = [f for f in definitions if f.key != "lbbb_aha_incomplete"]
    right = rbbb.judge(case, precondition)
    left_block = some(as_look(f) for f in complete)
    if left_block.result == "undecided":
        left_block = unseen(OVERALL, "whether left bundle branch block is there")
    findings = (
        *left,
        *right,
        *fascicular.judge(case, precondition, right[0]),
        delay.judge(case, precondition, definitions, right),
        *qrs_bands.judge(case, left_block),
        *ischaemia_in_lbbb.judge(case, left_block),
        *voltage.judge(case, left_block),
        *pr.judge(case),
        *pre_excited,
        *axis.judge(case),
        *qt.judge(case),
    )
    if person.age_years is not None and person.age_years < ADULT_YEARS:
        return tuple(replace(f, cautions=(*f.cautions, CHILD)) for f in findings)
    return findings

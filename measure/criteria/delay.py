"""Nonspecific intraventricular conduction delay: wide, with the pattern of neither block."""

from collections.abc import Iterable

from measure.criteria.case import Case
from measure.criteria.decide import (
    OVERALL,
    Limit,
    Look,
    as_look,
    clause,
    finding,
    reverse,
    some,
    unseen,
)
from measure.criteria.finding import Clause, Finding
from measure.criteria.lbbb import AHA


def judge(
    case: Case, precondition: Clause, left: Iterable[Finding], right: Iterable[Finding]
) -> Finding:
    """Wide QRS where no definition of left or right bundle branch block is met.

    The statement says "neither pattern"; a block by any of the definitions held against this ECG
    counts as a pattern, so that one page never shows both a block and a nonspecific delay.
    """
    wide = case.interval("qrs_ms", Limit(">", 110, "ms"), what="QRS duration")
    return finding(
        "nonspecific_delay",
        "nonspecific intraventricular conduction delay",
        AHA,
        [
            precondition,
            clause("QRS > 110 ms", wide),
            clause(
                "left bundle branch block by none of the definitions",
                _none_of(left, "a left block"),
            ),
            clause("right bundle branch block not there", _none_of(right, "a right block")),
        ],
    )


def _none_of(blocks: Iterable[Finding], name: str) -> Look:
    found = reverse(some(as_look(block) for block in blocks))
    return unseen(OVERALL, f"whether {name} is there") if found.result == "undecided" else found

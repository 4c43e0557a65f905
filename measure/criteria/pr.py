"""PR interval: first-degree block and a short PR."""

from measure.criteria.case import Case
from measure.criteria.decide import Limit, clause, finding
from measure.criteria.finding import Finding

COMMON = "common practice"


def judge(case: Case) -> tuple[Finding, ...]:
    """PR above 200 ms and below 120 ms."""
    return (
        finding(
            "pr_long",
            "long PR (first-degree atrioventricular block)",
            COMMON,
            [clause("PR > 200 ms", case.interval("pr_ms", Limit(">", 200, "ms"), what="PR"))],
        ),
        finding(
            "pr_short",
            "short PR",
            COMMON,
            [clause("PR < 120 ms", case.interval("pr_ms", Limit("<", 120, "ms"), what="PR"))],
        ),
    )

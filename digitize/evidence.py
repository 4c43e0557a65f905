"""Is this an ECG at all? Lines on a ruled page are not enough.

A chart says what it is: it names its leads or prints its run. Where neither was read, only traces
that run on without a break, and whose ink is all accounted for, are believed; what is then assumed
is flagged by the self-checks. A calibration mark is no such sign: letters can look like one.
"""

import numpy as np

from digitize.errors import NoTrace
from digitize.tracing import Tracing

NAMED = 0.25  # share of the lead names that must have been read: chance reads one
FOLLOWED = 0.5  # half of the traces must have been read at least so far
UNBROKEN = 0.9  # share of a trace's samples that were read
ACCOUNTED = 0.25  # share of a panel's ink that its redrawn trace may leave over (rules of thumb)


def require_ecg(tracing: Tracing) -> None:
    """Raise where nothing on the page says that what was traced is an ECG.

    Parameters
    ----------
    tracing : Tracing
        With the geometry of its page.

    Raises
    ------
    NoTrace
        Most traces could not be followed; or hardly a lead name and no run was read or given, and
        some trace is broken or leaves ink over.
    """
    read = [np.isfinite(panel.mv).mean() if len(panel.mv) else 0.0 for panel in tracing.panels]
    if not read or np.median(read) < FOLLOWED:
        raise NoTrace(
            "no ECG could be followed on this page; give the page that holds it, at 200 dpi or "
            "more, or what you know of it (--layout, --leads, --turn)"
        )
    if _says_so(tracing) or _runs_clean(tracing):
        return
    raise NoTrace(
        "no ECG was recognised on this page: no lead name, paper speed or gain was read, "
        "and its lines break off; if it is one, give --layout, --leads, --speed, --gain"
    )


def _says_so(tracing: Tracing) -> bool:
    """Whether a lead name or a run was read or given."""
    named = np.mean([panel.lead_source != "assumed" for panel in tracing.panels]) >= NAMED
    run = {tracing.speed_mm_s.source, tracing.gain_mm_mv.source} & {"printed", "given"}
    return bool(named or run)


def _runs_clean(tracing: Tracing) -> bool:
    """Whether every trace is unbroken and accounts for the ink around it."""
    facts = tracing.geometry.get("panels", [{}] * len(tracing.panels))
    return all(
        np.isfinite(panel.mv).mean() >= UNBROKEN and (fact.get("unexplained") or 0.0) <= ACCOUNTED
        for panel, fact in zip(tracing.panels, facts, strict=True)
    )

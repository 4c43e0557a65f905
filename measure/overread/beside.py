"""An earlier ECG beside the one that is read, in the words of the comparison."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from measure.compare import compare, headline, side, verdict_text
from measure.plain import plain
from measure.reference import usual
from measure.wording import nice, number

_DECIMALS = 4  # of mV


def beside(
    old: Mapping[str, Any], old_name: str, new: Mapping[str, Any], new_name: str
) -> dict[str, Any]:
    """Return what the page shows of an earlier ECG, as plain content for JSON.

    Parameters
    ----------
    old, new : mapping
        Readings in the form of their files; times of their beats count from the QRS onset.
    old_name, new_name : str
        What they are called.
    """
    before, now = side(old, old_name), side(new, new_name)
    comparison = compare([before, now])
    labels = usual(None)
    return plain(
        {
            "name": old_name,
            "headline": headline(comparison),
            "cautions": comparison.cautions,
            "changes": [
                {
                    "label": labels[change.key].label,
                    "old": number(change.old),
                    "new": number(change.new),
                    "difference": number(change.difference),
                    "verdict": verdict_text(change),
                    "sure": change.verdict in ("larger", "smaller"),
                }
                for change in comparison.changes
            ],
            "blocks": [
                {"definition": nice(b.definition), "old": b.old, "new": b.new, "verdict": b.verdict}
                for b in comparison.blocks
                if b.verdict != "in neither"
            ],
            "beat": {
                "start_ms": before.time_ms[0] if len(before.time_ms) else None,
                "step_ms": 1000.0 / old["beat"]["fs_hz"],
                "mv": {lead: np.round(mv, _DECIMALS) for lead, mv in before.mv.items()},
            },
            "beat_change_mv": comparison.beat_change_mv,
        }
    )

"""What lies between two places in a panel, on the panel's own scale."""

from collections.abc import Sequence

from digitize.tracing import Panel


def measure_between(panel: Panel, points: Sequence[Sequence[float]]) -> dict[str, float | str]:
    """Return time, voltage and rate between two places (x_mm, y_mm) of the paper.

    `rate_bpm` is NaN where both stand at the same time.
    """
    (x0, y0), (x1, y1) = points
    ms = abs(x1 - x0) / panel.speed_mm_s * 1000.0
    return {
        "lead": panel.lead,
        "ms": ms,
        "mv": (y0 - y1) / panel.gain_mm_mv,  # y runs down the page, voltage up
        "rate_bpm": 60_000.0 / ms if ms else float("nan"),
    }

"""What a person may know better than the page: one record that every caller builds.

The command line, the archive and the over-read page all hand this same record down; it is saved
with the result.
"""

from dataclasses import dataclass


@dataclass(frozen=True)
class Options:
    """Everything a person can give before a page is read; None means: find it on the page."""

    speed_mm_s: float | None = None
    gain_mm_mv: float | None = None
    layout: str | None = None  # "3x4", "3x4+1", "3x4+3", "6x2", "12x1", "4x3", "6x1", "1x1", ...
    lead_order: tuple[str, ...] | None = None  # lead names, row by row from the top left
    turn_deg: int | None = None  # clockwise turn that makes the page upright: 0, 90, 180, 270
    timing: str | None = None  # "consecutive" or "simultaneous"
    px_per_mm: tuple[float, float] | None = None  # across, down; where the page has no grid
    max_megapixels: float = 120.0

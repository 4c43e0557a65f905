"""The record that passes from `digitize` to `measure`: calibrated leads of one page.

A `Tracing` holds every printed panel as millivolts against seconds, with the standard error of
each sample and with the origin of everything that scales it. It imports numpy alone, so that
`measure` on a digital ECG loads no image library. Positive millivolts are upward.
"""

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

LEADS = ("I", "II", "III", "aVR", "aVL", "aVF", "V1", "V2", "V3", "V4", "V5", "V6")
FS_HZ = 500.0  # every panel is sampled at this rate, on the same 2 ms raster

Origin = Literal["found", "printed", "given", "assumed"]
Timing = Literal["consecutive", "simultaneous"]


@dataclass(frozen=True)
class Known:
    """A value that scales or names something, with where it came from.

    `se` is the standard error in the unit of the value, None where none can be given (a word, a
    value that a person gave).
    """

    value: Any
    source: Origin
    se: float | None = None


@dataclass(frozen=True)
class PageSource:
    """Which page of which file this is."""

    file_name: str
    sha256: str
    page: int  # from 1
    width_px: int
    height_px: int
    dpi: tuple[float, float] | None  # across, down


@dataclass(frozen=True, eq=False)
class Panel:
    """One printed stretch of one lead.

    `mv` and `sigma_mv` are (n,) float64, NaN where nothing was printed or could be read. Sample k
    stands at `start_s + k / fs_hz`, seconds from the beginning of the printed recording.
    """

    lead: str
    strip: bool  # a rhythm strip: it repeats a lead over the whole width
    row: int  # from 0, top to bottom
    start_s: float
    fs_hz: float
    mv: np.ndarray
    sigma_mv: np.ndarray
    box_mm: tuple[float, float, float, float]  # left, top, right, bottom on the paper
    speed_mm_s: float
    gain_mm_mv: float
    lead_source: Origin = "found"
    notes: tuple[str, ...] = ()  # reasons for missing or doubtful stretches, in words

    @property
    def time_s(self) -> np.ndarray:
        """Time of each sample in seconds from the beginning of the recording, (n,)."""
        return self.start_s + np.arange(len(self.mv)) / self.fs_hz


@dataclass(frozen=True)
class Check:
    """One self-check: what was compared, what came out, whether a person must look."""

    name: str
    passed: bool | None  # None: could not be judged
    message: str
    value: float | None = None
    limit: float | None = None
    leads: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class Tracing:
    """All panels of one page or of one digital recording.

    `timing` says whether the columns of the page follow one another in time or all show the same
    instant. `geometry` is a plain dictionary for the JSON (map, pixels per mm, how found), empty
    for an ECG that was digital all along.
    """

    source: PageSource
    panels: tuple[Panel, ...]
    speed_mm_s: Known
    gain_mm_mv: Known
    layout: Known
    timing: Known
    geometry: dict[str, Any] = field(default_factory=dict)
    checks: tuple[Check, ...] = ()
    corrections: tuple[dict[str, Any], ...] = ()
    options: dict[str, Any] = field(default_factory=dict)

    @property
    def leads(self) -> tuple[str, ...]:
        """Names of the leads present, the twelve first, in the usual order."""
        present = {panel.lead for panel in self.panels}
        usual = tuple(lead for lead in LEADS if lead in present)
        return usual + tuple(sorted(present - set(LEADS)))

    def lead(self, name: str) -> Panel:
        """The longest panel of lead `name`; KeyError where it is not on the page."""
        panels = [panel for panel in self.panels if panel.lead == name]
        if not panels:
            raise KeyError(name)
        return max(panels, key=lambda panel: (panel.strip, len(panel.mv)))

"""Which lead stands where, at what speed and gain."""

from dataclasses import dataclass

from digitize.sheet import Box
from digitize.tracing import Known, Origin


@dataclass(frozen=True)
class PanelPlace:
    """One printed stretch of one lead, before it is traced.

    The trace runs from `left_mm` to `right_mm`; `baseline_mm` is the place of 0 mV where it is
    known from a calibration mark, else the usual height of the trace (the level of its flat
    stretches). A trace may leave `box` up or down: the box is what belongs to the row.
    """

    lead: str
    lead_source: Origin
    lead_score: float  # 0..1, how sure the name is
    strip: bool
    row: int  # from 0, top to bottom
    column: int  # from 0, left to right
    box: Box
    baseline_mm: float
    start_s: float
    speed_mm_s: float
    gain_mm_mv: float


@dataclass(frozen=True)
class Layout:
    """The panels of one page and what scales them."""

    name: Known  # "3x4+1"
    speed_mm_s: Known
    gain_mm_mv: Known  # of most panels; each panel has its own
    timing: Known  # "consecutive" or "simultaneous" columns
    panels: tuple[PanelPlace, ...]
    marks: tuple[Box, ...]  # calibration marks: not part of any trace
    words: tuple[Box, ...]  # printing on or near the traces: not part of any trace
    notes: tuple[str, ...] = ()

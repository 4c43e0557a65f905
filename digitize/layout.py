"""Which lead stands where, at what speed and gain.

Every usual arrangement that fits the number of rows is held, as a whole, against all the
evidence: lead names read, breaks between columns, length of the panels. The best one wins; the
margin to the runner-up says how sure that is. Scale comes from what is printed and from the
calibration marks; what neither says is assumed, and said so.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from digitize.columns import (
    Span,
    beyond_cuts,
    column_spans,
    cut_notes,
    marks_of_row,
    possible_extents,
    row_breaks,
    trace_extent,
    within,
    without_marks,
)
from digitize.errors import NoTrace
from digitize.ink import Ink
from digitize.labels import LabelFit, Slot, fit_labels, look_again
from digitize.likeness import names_by_likeness
from digitize.marks import Mark, mark_box
from digitize.options import Options
from digitize.rows import Rows, row_choices
from digitize.scale import Scale, find_scale
from digitize.sheet import Box
from digitize.templates import TEMPLATES, Template
from digitize.tracing import Known, Origin
from digitize.words import Printing

MOST_STRIPS = 3
STRIP_LEAD = "II"  # common practice, where a strip's name cannot be read
SURE = 3.0  # log odds to the runner-up below which the layout is called doubtful
UNREAD_STRIP = 1.0  # log odds against a strip without a name where other names were read
READ = 0.6  # probability from which a name counts as read
IN_LINE_MM = 1.0  # the calibration marks of all rows begin at one place
SAME = 0.9  # likeness to another name on the page from which that counts for more


@dataclass(frozen=True)
class PanelPlace:
    """One printed stretch of one lead, before it is traced.

    The trace runs from `box.left_mm` to `box.right_mm`; `baseline_mm` is the place of 0 mV where
    it is known from a calibration mark, else the usual height of the trace. A trace may leave
    `box` up or down: the box is what belongs to the row.
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
    names: tuple[Box, ...] = ()  # lead names that touch a trace
    notes: tuple[str, ...] = ()
    considered: tuple[tuple[str, float], ...] = ()  # layouts with top row, log odds; best first


@dataclass(frozen=True)
class _Hypothesis:
    """One arrangement laid over the page."""

    template: Template
    strips: int
    rows: Rows
    spans: tuple[Span, ...]
    slots: tuple[Slot, ...]
    labels: LabelFit
    other: float  # evidence apart from the names

    @property
    def score(self) -> float:
        return self.labels.score + self.other

    @property
    def name(self) -> str:
        return _full_name(self.template, self.strips)

    @property
    def described(self) -> str:
        """Its name, and the leads of its first row to tell it from others of that name."""
        return f"{self.name} ({', '.join(self.template.leads[0])})"


def find_layout(
    ink: Ink,
    printing: Printing,
    rows: Rows,
    marks: Sequence[Mark],
    options: Options | None = None,
) -> Layout:
    """Return the panels of a page.

    Parameters
    ----------
    ink : Ink
        Looked at again where a lead name must be but was not read.
    printing : Printing
        Words with their likelihood under each lead name, and lines of text.
    rows : Rows
        The rows of trace.
    marks : sequence of Mark
        Calibration marks.
    options : Options
        Speed, gain, layout, lead order and timing that a person gave.

    Raises
    ------
    NoTrace
        There is no row of trace, or no arrangement has its number of rows.
    """
    options = options or Options()
    if not rows.rows:
        raise NoTrace("no ECG trace found on this page; give the page that holds the tracing")
    marks_by_row = [marks_of_row(row, marks, rows.pitch_mm) for row in rows.rows]
    lonely = _without_row(marks, marks_by_row)
    marks = [mark for own in marks_by_row for mark in own]
    rows = _at_zero_line(rows, marks_by_row)
    scale = find_scale(printing, rows, marks, options)
    with_marks = trace_extent(rows)
    rows = without_marks(rows, marks)
    extent = trace_extent(rows)
    aside_mm = extent.left_mm - with_marks.left_mm
    room = beyond_cuts(extent, ink)
    marked = [bool(own) for own in marks_by_row]
    hypotheses = _weigh(printing, rows, marked, extent, room, scale, options)
    if not hypotheses:
        raise NoTrace(
            f"{len(rows.rows)} rows of trace fit no usual layout; "
            "give --layout, or crop the page to the tracing"
        )
    hypotheses = [
        replace(h, labels=look_again(ink, h.labels, h.slots, aside_mm)) for h in hypotheses[:3]
    ] + hypotheses[3:]
    hypotheses.sort(key=lambda h: -h.score)
    best = hypotheses[0]
    margin = best.score - next((h.score for h in hypotheses[1:]), best.score - 20)
    alike = names_by_likeness(ink, best.labels, best.slots)
    panels = _panels(best, scale, options, alike)
    return Layout(
        name=_known_name(best, margin, bool(lonely), options),
        speed_mm_s=scale.speed_mm_s,
        gain_mm_mv=scale.gain_mm_mv,
        timing=_timing(options),
        panels=panels,
        marks=tuple(mark_box(m, 1.0) for m in marks),
        words=printing.letters,
        names=_touching(best.labels, printing),
        notes=(
            *scale.notes,
            *cut_notes(extent, room),
            *lonely,
            *_notes(best, margin, panels, hypotheses),
        ),
        considered=tuple((h.described, round(h.score, 2)) for h in hypotheses),
    )


def _touching(labels: LabelFit, printing: Printing) -> tuple[Box, ...]:
    """Places of names that are no words of their own, where the others are sure: traces touch."""
    if labels.score < 2 * SURE:
        return ()
    apart = {word.box for word in printing.words}
    return tuple(box for box in labels.places.values() if box not in apart)


def _at_zero_line(rows: Rows, marks_by_row: Sequence[Sequence[Mark]]) -> Rows:
    """The rows at their calibration marks' zero line, where they have one: traces wander."""
    moved = (
        replace(row, y_mm=float(np.median([mark.foot_mm for mark in own]))) if own else row
        for row, own in zip(rows.rows, marks_by_row, strict=True)
    )
    return replace(rows, rows=tuple(moved))


def _weigh(
    printing: Printing,
    rows: Rows,
    marked: Sequence[bool],
    extent: Span,
    room: Span,
    scale: Scale,
    options: Options,
) -> list[_Hypothesis]:
    """All arrangements with the page's number of rows, the likeliest first."""
    found = []
    breaks = row_breaks(rows)
    ticks = [box for box in (*printing.letters, *rows.uprights) if _upright(box)]
    for first, part, doubt in row_choices(rows, marked):
        for template in TEMPLATES:
            strips = len(part.rows) - template.rows
            if not 0 <= strips <= MOST_STRIPS or (strips and template.name == "1x1"):
                continue
            if options.layout not in (None, _full_name(template, strips)):
                continue
            short = breaks.of(first, first + template.rows)
            laid = [
                _laid(template, part, within(spans, extent), shared, printing, scale)
                for whole in possible_extents(extent, room if template.columns > 1 else extent)
                for spans, shared in [column_spans(short, whole, template.columns, ticks)]
            ]
            best = max(laid, key=lambda h: h.score)
            found.append(replace(best, other=best.other - doubt))
    return sorted(found, key=lambda h: -h.score)


def _laid(
    template: Template,
    rows: Rows,
    spans: tuple[Span, ...],
    shared: float,
    printing: Printing,
    scale: Scale,
) -> _Hypothesis:
    """One arrangement laid over the page, with the evidence for it."""
    strips = len(rows.rows) - template.rows
    slots = tuple(_slots(template, strips, spans, rows))
    labels = fit_labels(printing.words, slots, rows.pitch_mm)
    widest_mm = max(span.right_mm - span.left_mm for span in spans)
    seconds = widest_mm / float(scale.speed_mm_s.value)
    length = -min(2.0 * abs(np.log(seconds / template.panel_s)), 4.0)
    evidence = 6.0 * (shared - 0.4) if template.columns > 1 else 0.0
    unread = sum((slot.row, 0) not in labels.names for slot in slots if slot.name is None)
    strips_cost = 0.3 * strips + (UNREAD_STRIP * unread if labels.score > SURE else 0.0)
    other = template.prior - strips_cost + length + evidence
    return _Hypothesis(template, strips, rows, spans, slots, labels, other)


def _upright(box: Box) -> bool:
    """Whether a piece of ink is a plain upright stroke, as separators are."""
    return box.right_mm - box.left_mm < 0.35 * (box.bottom_mm - box.top_mm)


def _full_name(template: Template, strips: int) -> str:
    return template.name + (f"+{strips}" if strips else "")


def _slots(template: Template, strips: int, spans: tuple[Span, ...], rows: Rows) -> list[Slot]:
    slots = [
        Slot(r, c, spans[c].left_mm, rows.rows[r].y_mm, lead)
        for r, leads in enumerate(template.leads)
        for c, lead in enumerate(leads)
    ]
    if template.name == "1x1":
        slots = [replace(slots[0], name=None)]
    return slots + [
        Slot(template.rows + k, 0, spans[0].left_mm, rows.rows[template.rows + k].y_mm, None)
        for k in range(strips)
    ]


def _panels(
    best: _Hypothesis,
    scale: Scale,
    options: Options,
    alike: Mapping[tuple[int, int], tuple[str, float]],
) -> tuple[PanelPlace, ...]:
    start_mm = best.spans[0].left_mm
    speed, rows = float(scale.speed_mm_s.value), best.rows
    panels = []
    for number, slot in enumerate(best.slots):
        strip = slot.row >= best.template.rows or best.template.name == "1x1"
        lead, source, sure = _lead(slot, number, best, options, alike)
        left = best.spans[slot.column].left_mm
        right = best.spans[-1].right_mm if strip else best.spans[slot.column].right_mm
        row = rows.rows[slot.row]
        half = rows.pitch_mm / 2
        consecutive = options.timing != "simultaneous"
        panels.append(
            PanelPlace(
                lead=lead,
                lead_source=source,
                lead_score=sure,
                strip=strip,
                row=slot.row,
                column=slot.column,
                box=Box(left, row.y_mm - half, right, row.y_mm + half),
                baseline_mm=row.y_mm,
                start_s=(left - start_mm) / speed if consecutive else 0.0,
                speed_mm_s=speed,
                gain_mm_mv=scale.gain_of(row.y_mm, lead),
            )
        )
    return tuple(panels)


def _lead(
    slot: Slot,
    number: int,
    best: _Hypothesis,
    options: Options,
    alike: Mapping[tuple[int, int], tuple[str, float]],
) -> tuple[str, Origin, float]:
    """Name of a panel: given, read, or as the arrangement has it."""
    if options.lead_order is not None and number < len(options.lead_order):
        return options.lead_order[number], "given", 1.0
    read = best.labels.names.get((slot.row, slot.column))
    if slot.name is None:
        name, like = alike.get((slot.row, slot.column), (STRIP_LEAD, 0.0))
        if read is not None and read[1] > READ and like < SAME:
            return read[0], "printed", read[1]
        if like > 0:
            return name, "printed", like
        return STRIP_LEAD, "assumed", 0.5
    if read is not None and read[0] in (slot.name, slot.name.removeprefix("-")):
        return slot.name, "printed" if read[1] > 0.3 else "found", read[1]
    if read is not None and read[1] > 0.95 and read[0] not in ("I", "II", "III"):
        return read[0], "printed", read[1]
    return slot.name, "found" if best.labels.score > 2 * SURE else "assumed", 0.7


def _without_row(marks: Sequence[Mark], marks_by_row: Sequence[Sequence[Mark]]) -> tuple[str, ...]:
    """What is said of a calibration mark that stands in line with the others, but in no row."""
    own = [mark for found in marks_by_row for mark in found]
    for mark in marks:
        beside = [other for other in own if abs(other.left_mm - mark.left_mm) < IN_LINE_MM]
        if mark not in own and len(beside) > 1:
            return ("a calibration mark stands where no trace was found: a row may be missing",)
    return ()


def _known_name(best: _Hypothesis, margin: float, doubted: bool, options: Options) -> Known:
    if options.layout is not None:
        return Known(best.name, "given")
    read = best.labels.score > SURE
    if doubted:
        return Known(best.name, "assumed")
    return Known(best.name, "found" if read or margin > SURE else "assumed")


def _timing(options: Options) -> Known:
    if options.timing is not None:
        return Known(options.timing, "given")
    return Known("consecutive", "assumed")


def _notes(
    best: _Hypothesis,
    margin: float,
    panels: Sequence[PanelPlace],
    hypotheses: Sequence[_Hypothesis],
) -> list[str]:
    notes = []
    if margin < SURE and len(hypotheses) > 1:
        notes.append(
            f"layout {best.described} is little likelier than {hypotheses[1].described}; "
            "look at the lead names, or give --layout"
        )
    assumed = [p.lead for p in panels if p.lead_source == "assumed"]
    if assumed:
        notes.append("lead names not read, assumed from the layout: " + ", ".join(assumed))
    odd = [
        f"{p.lead} where {s.name} is usual"
        for p, s in zip(panels, best.slots, strict=True)
        if s.name is not None and p.lead != s.name and p.lead_source != "given"
    ]
    if odd:
        notes.append("unusual lead names read: " + ", ".join(odd))
    return notes

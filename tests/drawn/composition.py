"""Where everything stands on the sheet: traces, marks, separators, lead names, and their truth."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from digitize.tracing import LEADS
from tests.drawn.heart import Recording
from tests.drawn.lettering import width_mm
from tests.drawn.spec import LayoutSpec, LetterSpec, PageSpec

CABRERA = ("aVL", "I", "-aVR", "II", "aVF", "III", *LEADS[6:])
MARK_S = 0.2  # the calibration pulse is 1 mV for 200 ms
MARK_ROOM_MM = 1.5  # between calibration mark and trace


@dataclass(frozen=True, eq=False)
class Stroke:
    """A line of the pen, through points in mm."""

    x_mm: np.ndarray
    y_mm: np.ndarray
    width_mm: float
    trace: bool  # a lead's trace rather than a mark or separator


@dataclass(frozen=True)
class Word:
    """A text whose base line starts at (x_mm, y_mm)."""

    text: str
    x_mm: float
    y_mm: float
    height_mm: float
    font: str


@dataclass(frozen=True, eq=False)
class PanelTruth:
    """One printed stretch of one lead: exactly what the pen drew."""

    lead: str
    strip: bool
    row: int
    column: int
    start_s: float
    fs_hz: float
    mv: np.ndarray
    left_mm: float
    baseline_mm: float
    box_mm: tuple[float, float, float, float]  # left, top, right, bottom
    speed_mm_s: float
    gain_mm_mv: float

    @property
    def x_mm(self) -> np.ndarray:
        """Place of each sample across the paper."""
        return self.left_mm + np.arange(len(self.mv)) / self.fs_hz * self.speed_mm_s

    @property
    def y_mm(self) -> np.ndarray:
        """Place of each sample down the paper."""
        return self.baseline_mm - self.mv * self.gain_mm_mv


@dataclass(frozen=True, eq=False)
class Composition:
    """All that is to be drawn on one sheet, and the truth of it."""

    strokes: tuple[Stroke, ...]
    words: tuple[Word, ...]
    panels: tuple[PanelTruth, ...]
    marks: tuple[tuple[float, float, float, float], ...]  # left, top, right, bottom in mm


def compose(recording: Recording, spec: PageSpec) -> Composition:
    """Return everything on the sheet, in mm."""
    layout = spec.layout
    panels = tuple(_panels(recording, layout))
    marks = tuple(_marks(layout, panels))
    strokes = [Stroke(p.x_mm, p.y_mm, spec.pen.width_mm, trace=True) for p in panels]
    strokes += [Stroke(x, y, spec.pen.width_mm, trace=False) for x, y in marks]
    strokes += _separators(layout, panels, spec.pen.width_mm)
    words = [*_labels(spec.letters, layout, panels), *_header(spec)]
    boxes = tuple((x.min(), y.min(), x.max(), y.max()) for x, y in marks)
    return Composition(tuple(strokes), tuple(words), panels, boxes)


def lead_grid(layout: LayoutSpec) -> tuple[tuple[str, ...], ...]:
    """Lead names row by row; columns are filled from top to bottom."""
    order = {
        "usual": LEADS,
        "cabrera": CABRERA,
        "limb": LEADS[:6],
        "chest": LEADS[6:],
    }[layout.order]
    if layout.rows == layout.columns == 1:
        order = layout.strips[:1]
    return tuple(
        tuple(order[column * layout.rows + row] for column in range(layout.columns))
        for row in range(layout.rows)
    )


def _panels(recording: Recording, layout: LayoutSpec) -> Iterator[PanelTruth]:
    """Short panels row by row, then the strips."""
    short_mm = layout.panel_s * layout.speed_mm_s
    full_mm = layout.columns * short_mm + (layout.columns - 1) * layout.gap_mm
    single = layout.rows == layout.columns == 1
    for row, leads in enumerate(lead_grid(layout)):
        for column, lead in enumerate(leads):
            offset_mm = column * (short_mm + layout.gap_mm)
            start_s = offset_mm / layout.speed_mm_s if layout.timing == "consecutive" else 0.0
            yield _panel(recording, layout, lead, single, row, column, offset_mm, start_s, short_mm)
    if not single:
        for row, lead in enumerate(layout.strips, start=layout.rows):
            yield _panel(recording, layout, lead, True, row, 0, 0.0, 0.0, full_mm)


def _panel(
    recording: Recording,
    layout: LayoutSpec,
    lead: str,
    strip: bool,
    row: int,
    column: int,
    offset_mm: float,
    start_s: float,
    length_mm: float,
) -> PanelTruth:
    fs_hz = recording.fs_hz
    first = round(start_s * fs_hz)
    last = min(first + round(length_mm / layout.speed_mm_s * fs_hz), recording.mv.shape[1])
    chest = lead.startswith("V")
    gain = layout.chest_gain_mm_mv if chest and layout.chest_gain_mm_mv else layout.gain_mm_mv
    baseline_mm = layout.top_mm + row * layout.pitch_mm
    left_mm = layout.left_mm + offset_mm + (first / fs_hz - start_s) * layout.speed_mm_s
    half_mm = layout.pitch_mm / 2
    return PanelTruth(
        lead=lead,
        strip=strip,
        row=row,
        column=column,
        start_s=first / fs_hz,
        fs_hz=fs_hz,
        mv=recording.lead(lead)[first:last],
        left_mm=left_mm,
        baseline_mm=baseline_mm,
        box_mm=(left_mm, baseline_mm - half_mm, left_mm + length_mm, baseline_mm + half_mm),
        speed_mm_s=layout.speed_mm_s,
        gain_mm_mv=gain,
    )


def _marks(
    layout: LayoutSpec, panels: tuple[PanelTruth, ...]
) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Calibration pulse of each row (at either end where it holds two gains)."""
    tail_mm, pulse_mm = layout.mark_tail_mm, MARK_S * layout.speed_mm_s
    long_mm = pulse_mm + 2 * tail_mm
    steps_mm = np.array([0, tail_mm, tail_mm, long_mm - tail_mm, long_mm - tail_mm, long_mm])
    for row in sorted({panel.row for panel in panels}):
        inside = [panel for panel in panels if panel.row == row]
        starts = []
        if layout.mark in ("left", "both"):
            starts.append((inside[0], inside[0].left_mm - MARK_ROOM_MM - long_mm))
        if layout.mark in ("right", "both"):
            starts.append((inside[-1], inside[-1].box_mm[2] + MARK_ROOM_MM))
        if layout.mark == "middle":  # in the gap before the middle column
            panel = inside[len(inside) // 2]
            starts.append((panel, panel.left_mm - 0.5 - long_mm))
        for panel, start_mm in starts:
            height_mm = np.array([0, 0, 1, 1, 0, 0]) * panel.gain_mm_mv
            yield start_mm + steps_mm, panel.baseline_mm - height_mm


def _separators(layout: LayoutSpec, panels: tuple[PanelTruth, ...], pen_mm: float) -> list[Stroke]:
    """What divides the columns."""
    edges = [panel for panel in panels if panel.column > 0]
    if not edges or layout.separator == "none":
        return []
    if layout.separator == "line":
        top_mm = panels[0].baseline_mm - layout.pitch_mm / 2
        bottom_mm = edges[-1].baseline_mm + layout.pitch_mm / 2
        lefts_mm = sorted({panel.left_mm - layout.gap_mm / 2 for panel in edges})
        return [_upright(x_mm, top_mm, bottom_mm, 0.2) for x_mm in lefts_mm]
    spans = {
        "ticks": ((-6.0, -3.0), (3.0, 6.0)),
        "notch": ((-1.5, 1.5),),
        "dashes": tuple((k - 0.8, k + 0.8) for k in np.arange(-10.0, 11.0, 4.0)),
    }[layout.separator]
    return [
        _upright(
            panel.left_mm - layout.gap_mm / 2, panel.baseline_mm + a, panel.baseline_mm + b, pen_mm
        )
        for panel in edges
        for a, b in spans
    ]


def _upright(x_mm: float, top_mm: float, bottom_mm: float, width_mm: float) -> Stroke:
    return Stroke(np.array([x_mm, x_mm]), np.array([top_mm, bottom_mm]), width_mm, trace=False)


def _labels(
    letters: LetterSpec, layout: LayoutSpec, panels: tuple[PanelTruth, ...]
) -> Iterator[Word]:
    """The lead names."""
    if letters.label_place == "none":
        return
    high_mm = letters.label_mm
    for panel in panels:
        wide_mm = width_mm(panel.lead, letters.font, high_mm)
        x_mm, y_mm = {
            "above": (panel.left_mm + 1.0, panel.baseline_mm - 0.3 * layout.pitch_mm),
            "below": (panel.left_mm + 1.0, panel.baseline_mm + 0.22 * layout.pitch_mm + high_mm),
            "left": (panel.left_mm - wide_mm - 1.0, panel.baseline_mm - 2.0),
            "start": (panel.left_mm + 0.5, panel.baseline_mm - 1.2),
        }[letters.label_place]
        if letters.label_place == "left" and layout.mark == "left" and panel.column == 0:
            x_mm -= MARK_S * layout.speed_mm_s + 2 * layout.mark_tail_mm + MARK_ROOM_MM
        yield Word(panel.lead, x_mm, y_mm, high_mm, letters.font)


def _header(spec: PageSpec) -> Iterator[Word]:
    """Lines of text at the head and the foot of the sheet, from its margins."""
    letters, paper = spec.letters, spec.paper
    left_mm = 10.0 - paper.offset_mm[0]
    top_mm = 8.0 - paper.offset_mm[1]
    bottom_mm = paper.size_mm[1] - paper.offset_mm[1] - 5.0
    step_mm = 1.9 * letters.header_mm
    for number, text in enumerate(letters.header):
        y_mm = top_mm + letters.header_mm + number * step_mm
        yield Word(text, left_mm, y_mm, letters.header_mm, letters.header_font)
    for number, text in enumerate(letters.aside):
        x_mm = left_mm + 0.52 * paper.size_mm[0]
        y_mm = top_mm + letters.header_mm + number * step_mm
        yield Word(text, x_mm, y_mm, letters.header_mm, letters.header_font)
    for number, text in enumerate(reversed(letters.footer)):
        yield Word(
            text, left_mm, bottom_mm - number * step_mm, letters.header_mm, letters.header_font
        )

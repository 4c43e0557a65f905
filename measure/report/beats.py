"""The dominant beat of every lead on millimetre paper, with boundaries and evidence marked.

The leads stand in groups by what they look at (left side, septum and front, below), all at one
scale, 50 mm/s, in true millimetres when printed. Marks differ in shape, so that they can be told
apart in black and white.
"""

import math
from collections.abc import Iterable
from html import escape

import numpy as np

from measure.criteria.finding import Evidence
from measure.criteria.shape import LEVEL_MS
from measure.reading import Reading
from measure.report.paper import drawing, ruled
from measure.report.svg import line, polygon, polyline, rect, text

GROUPS = (
    ("left side", ("I", "aVL", "V5", "V6")),
    ("septum and front", ("V1", "V2", "V3", "V4")),
    ("below and right", ("II", "III", "aVF", "aVR")),
)
SPEED_MM_S = 50.0
CELL_MM = 44.0
GAP_MM = 2.0
LABEL_MM = 4.5
BEFORE_QRS_MS = 260.0
BEFORE_QRS_WITHOUT_P_MS = 120.0
MIN_HALF_MV = 0.5

INK, GRID, GRID_5, EDGE, MARK = "#16212b", "#e3e0d3", "#c5c0ab", "#1d5f8a", "#8a3b00"


def draw_beats(reading: Reading) -> str:
    """Return an SVG of all leads of the dominant beat."""
    gain, spans = _scale(reading)
    rows: list[str] = []
    top = 0.0
    for name, leads in _groups(reading):
        high, low = _row_range(leads, spans)
        height = max(math.ceil((high - low) * gain), 8)
        rows.append(text(0, top + 3.2, f"{name}", size=2.9, colour="#46545d"))
        for column, lead in enumerate(leads):
            left = column * (CELL_MM + GAP_MM)
            zero = top + LABEL_MM + high * gain
            box = (left, top + LABEL_MM, CELL_MM, float(height))
            rows.append(_cell(reading, lead, box, zero, gain))
        top += LABEL_MM + height + 1.5
    width = 4 * CELL_MM + 3 * GAP_MM
    label = f"Dominant beat of each lead at {SPEED_MM_S:g} mm/s and {gain:g} mm/mV"
    return drawing(width, top, label, "".join(rows))


def beats_caption(reading: Reading) -> str:
    """What the drawing shows and how to read its marks."""
    return (
        f"Dominant beat of each lead, {SPEED_MM_S:g} mm/s, {_scale(reading)[0]:g} mm/mV, all at "
        "one scale; the grey band is one standard error. Full lines and shading: overall QRS; "
        "broken lines: P and the end of T. ▼ notch, ◇ slur. Bar at the foot: QRS onset to "
        "the last R peak, in ms. Dashed bar at the onset: depth from which a q counts."
    )


def _groups(reading: Reading) -> list[tuple[str, tuple[str, ...]]]:
    known = {lead for _, leads in GROUPS for lead in leads}
    extra = tuple(lead for lead in reading.beat.leads if lead not in known)
    rows = [("other leads", extra[i : i + 4]) for i in range(0, len(extra), 4)]
    return [*GROUPS, *rows]


def _scale(reading: Reading) -> tuple[float, dict[str, tuple[float, float]]]:
    """One gain for all leads, 10 mm/mV where that fits the sheet, and each lead's extent in mV."""
    spans = {}
    for lead, mv in zip(reading.beat.leads, reading.beat.mv, strict=True):
        shown = mv[_visible(reading)]
        if np.isfinite(shown).any():
            spans[lead] = (float(np.nanmax(shown)), float(np.nanmin(shown)))
    heights = [high - low for _, g in GROUPS for high, low in [_row_range(g, spans)]]
    gain = next((g for g in (10.0, 5.0, 2.5) if sum(heights) * g <= 125.0), 1.0)
    return gain, spans


def _row_range(leads: Iterable[str], spans: dict[str, tuple[float, float]]) -> tuple[float, float]:
    """Top and bottom of a row of cells in mV, on whole half-millivolts."""
    found = [spans[lead] for lead in leads if lead in spans]
    high = max([MIN_HALF_MV, *(s[0] for s in found)])
    low = min([-MIN_HALF_MV, *(s[1] for s in found)])
    return math.ceil(high / 0.5 + 0.2) * 0.5, math.floor(low / 0.5 - 0.2) * 0.5


def _onset_ms(reading: Reading) -> float:
    onset = reading.boundaries.overall.qrs_on_ms.value
    return onset if math.isfinite(onset) else 0.0


def _start_ms(reading: Reading) -> float:
    """Where the drawing begins, after the QRS onset: just before the P wave where there is one."""
    p_on = reading.boundaries.overall.p_on_ms
    if p_on.known:
        return max(p_on.value - _onset_ms(reading) - 40.0, -BEFORE_QRS_MS - 80.0)
    return -BEFORE_QRS_WITHOUT_P_MS


def _visible(reading: Reading) -> np.ndarray:
    after_ms = reading.beat.time_ms - _onset_ms(reading)
    start = _start_ms(reading)
    return (after_ms >= start) & (after_ms <= start + CELL_MM / SPEED_MM_S * 1000.0)


def _cell(
    reading: Reading,
    lead: str,
    box: tuple[float, float, float, float],
    zero_mm: float,
    gain: float,
) -> str:
    """Paper, trace, boundaries and evidence of one lead."""
    left, top, width, height = box
    parts = [ruled(left, top, width, height, zero_mm, GRID, GRID_5)]
    if lead in reading.beat.leads:
        parts.append(_edges(reading, box))
        parts.append(_trace(reading, lead, left, zero_mm, gain))
        parts.append(_marks(reading, lead, box, zero_mm, gain))
    waves = reading.waves.get(lead)
    measured = waves is not None and waves.beats > 0
    label = lead if measured else f"{lead}: not measured"
    parts.append(text(left + 0.8, top + 3.4, label, size=3.4, bold=True))
    if waves is not None and measured:
        shape = waves.shape if waves.qrs_complete else "QRS cut by the panel edge"
        parts.append(text(left + width - 0.8, top + 3.2, shape, size=2.7, anchor="end"))
    return "".join(parts)


def _x_mm(reading: Reading, left: float, after_qrs_ms: float) -> float:
    return left + (after_qrs_ms - _start_ms(reading)) * SPEED_MM_S / 1000.0


def _edges(reading: Reading, box: tuple[float, float, float, float]) -> str:
    """Overall boundaries: QRS by full lines, P and T by broken ones; the QRS lightly shaded."""
    left, top, width, height = box
    overall, onset = reading.boundaries.overall, _onset_ms(reading)
    parts = []
    if overall.qrs_on_ms.known and overall.qrs_off_ms.known:
        x0 = _x_mm(reading, left, 0.0)
        x1 = _x_mm(reading, left, overall.qrs_off_ms.value - onset)
        parts.append(rect(x0, top, x1 - x0, height, fill=EDGE, opacity=0.08))
    for edge, dash in (
        (overall.p_on_ms, "1 0.7"),
        (overall.p_off_ms, "1 0.7"),
        (overall.qrs_on_ms, ""),
        (overall.qrs_off_ms, ""),
        (overall.t_off_ms, "0.4 0.7"),
    ):
        x = _x_mm(reading, left, edge.value - onset) if edge.known else math.nan
        if left <= x <= left + width:
            parts.append(line(x, top, x, top + height, colour=EDGE, width_mm=0.22, dash=dash))
    spike = reading.boundaries.paced_spike_ms
    if spike is not None:
        x = _x_mm(reading, left, spike - onset)
        parts.append(line(x, top, x, top + height, colour=MARK, width_mm=0.2, dash="0.3 0.5"))
    return "".join(parts)


def _trace(reading: Reading, lead: str, left: float, zero_mm: float, gain: float) -> str:
    """The averaged beat with a band of one standard error; gaps stay gaps."""
    row = reading.beat.leads.index(lead)
    visible = np.flatnonzero(_visible(reading))[::2]  # 0.1 mm of paper at 1000 samples/s
    x = _x_mm(reading, left, 0.0) + (
        (reading.beat.time_ms[visible] - _onset_ms(reading)) * SPEED_MM_S / 1000.0
    )
    y = zero_mm - reading.beat.mv[row][visible] * gain
    error = reading.beat.se_mv[row][visible] * gain
    parts = []
    for run in np.ma.clump_unmasked(np.ma.masked_invalid(y)):
        band = np.nan_to_num(error[run])
        outline = np.concatenate([y[run] - band, (y[run] + band)[::-1]])
        parts.append(polygon(np.concatenate([x[run], x[run][::-1]]), outline, INK, opacity=0.25))
        parts.append(polyline(x[run], y[run], INK, width_mm=0.3))
    return "".join(parts)


def _marks(
    reading: Reading,
    lead: str,
    box: tuple[float, float, float, float],
    zero_mm: float,
    gain: float,
) -> str:
    """Evidence where it was found: notch, slur, R peak time, q against its threshold."""
    seen = {
        e.what: e
        for f in reading.findings
        if f.result != "not met"
        for c in f.clauses
        for e in c.evidence
        if e.lead == lead and e.time_ms is not None and math.isfinite(e.time_ms)
    }
    parts = [
        _bend(reading, lead, n.kind, n.peak_ms, box, zero_mm, gain) for n in _bends(reading, lead)
    ]
    if "R peak time" in seen:
        parts.append(_r_peak(reading, seen["R peak time"], box))
    if "q depth" in seen:
        parts.append(_q(reading, lead, seen["q depth"], box, zero_mm, gain))
    return "".join(parts)


def _bends(reading: Reading, lead: str) -> tuple:
    waves = reading.waves.get(lead)
    return waves.notches if waves is not None else ()


def _bend(
    reading: Reading,
    lead: str,
    kind: str,
    peak_ms: float,
    box: tuple[float, float, float, float],
    zero_mm: float,
    gain: float,
) -> str:
    """A filled triangle over a notch, an open diamond over a slur."""
    x = _x_mm(reading, box[0], peak_ms)
    after_ms = reading.beat.time_ms - _onset_ms(reading)
    at = int(np.argmin(np.abs(after_ms - peak_ms)))
    mv = reading.beat.mv[reading.beat.leads.index(lead)][at]
    if not math.isfinite(mv):
        return ""
    y = zero_mm - mv * gain
    y += -1.2 if mv >= 0 else 1.2
    turn = -1.0 if mv >= 0 else 1.0
    if kind == "notch":
        return polygon(
            np.array([x, x - 0.9, x + 0.9]), np.array([y, y + 1.7 * turn, y + 1.7 * turn]), MARK
        )
    xs = np.array([x, x - 0.8, x, x + 0.8])
    ys = np.array([y, y + 0.9 * turn, y + 1.8 * turn, y + 0.9 * turn])
    return polygon(xs, ys, "#ffffff", edge=MARK)


def _r_peak(reading: Reading, seen: Evidence, box: tuple[float, float, float, float]) -> str:
    """A bar from the onset to the last R peak at the foot of the cell, with its length."""
    left, top, _, height = box
    peak = seen.time_ms if seen.time_ms is not None else seen.value
    x1 = _x_mm(reading, left, peak)
    x0 = x1 - seen.value * SPEED_MM_S / 1000.0
    y = top + height - 1.4
    bar = line(x0, y, x1, y, colour=MARK, width_mm=0.35)
    ends = "".join(line(x, y - 0.8, x, y + 0.8, colour=MARK, width_mm=0.35) for x in (x0, x1))
    return bar + ends + text(x1 + 0.8, y + 0.8, f"{seen.value:.0f}", size=2.5, colour=MARK)


def _q(
    reading: Reading,
    lead: str,
    seen: Evidence,
    box: tuple[float, float, float, float],
    zero_mm: float,
    gain: float,
) -> str:
    """The depth from which a q counts, as a short bar before the R; and whether it is reached."""
    waves = reading.waves[lead]
    y = zero_mm - (_level_mv(reading, lead) - waves.smallest_mv) * gain
    x = _x_mm(reading, box[0], 0.0)
    present = seen.value >= waves.smallest_mv
    word = "q" if present else "no q"
    return line(x - 2.5, y, x + 2.0, y, colour=MARK, width_mm=0.25, dash="0.6 0.4") + text(
        x - 2.7, y + 1.9, escape(word), size=2.5, anchor="end", colour=MARK
    )


def _level_mv(reading: Reading, lead: str) -> float:
    """The level just before the QRS, from which deflections are measured."""
    after_ms = reading.beat.time_ms - _onset_ms(reading)
    before = reading.beat.lead(lead)[(after_ms >= -LEVEL_MS) & (after_ms <= 0)]
    known = before[np.isfinite(before)]
    return float(known.mean()) if known.size else 0.0

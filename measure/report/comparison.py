"""NAME.compare.html: old against new, and the trend of three readings or more."""

import math
from collections.abc import Iterable
from datetime import date
from html import escape

import numpy as np

from measure.compare import BlockChange, Change, Comparison, Side, headline, verdict_text
from measure.quantity import Quantity
from measure.reference import usual
from measure.report.beats import CELL_MM, GAP_MM, GRID, GRID_5, GROUPS, INK, LABEL_MM, SPEED_MM_S
from measure.report.html import bullets, document, section, table
from measure.report.paper import drawing, ruled
from measure.report.svg import line, polyline, text
from measure.wording import ONE_SE, nice, number

OLD_COLOUR = "#8a3b00"
SPAN_MS = CELL_MM / SPEED_MM_S * 1000.0
BEFORE_MS = 240.0
GAIN_MM_MV = 10.0
TREND_KEYS = ("qrs_ms", "pr_ms", "qtc_fridericia_ms")
TREND_MM = (180.0, 34.0)


def comparison_page(comparison: Comparison) -> str:
    """Return the page of a comparison as a complete HTML document."""
    first, last = comparison.sides[0], comparison.sides[-1]
    sections = [
        section("1 Is a block new?", _blocks(comparison.blocks)),
        section("2 What has changed, beyond the joint error?", _changes(comparison.changes)),
        section("3 The beats over each other", _beats(comparison, first, last)),
        section("4 What to check by eye", bullets(comparison.cautions)),
    ]
    if len(comparison.sides) > 2:
        sections.insert(2, section("Course over all readings", _course(comparison.sides)))
    sources = " ".join(
        f"{_when(s)}: {s.source['file_name']}, page {s.source['page']}, SHA-256 "
        f"{s.source['sha256']}."
        for s in comparison.sides
    )
    title = f"ECGs compared: {_when(first)} and {_when(last)}"
    footer = f"<footer>{escape(sources)} {escape(ONE_SE)}</footer>"
    return document(title, headline(comparison), "".join(sections) + footer)


def _when(side: Side) -> str:
    return f"{side.name} ({side.date})" if side.date else side.name


def _blocks(blocks: Iterable[BlockChange]) -> str:
    rows = [
        f"<tr><td>{escape(nice(b.definition))}</td><td>{escape(b.old)}</td>"
        f'<td>{escape(b.new)}</td><td class="{"off" if b.verdict in ("new", "gone") else ""}">'
        f"{escape(b.verdict)}</td></tr>"
        for b in blocks
    ]
    return table(("definition", "before", "now", ""), rows)


def _changes(changes: Iterable[Change]) -> str:
    labels = usual(None)
    rows = []
    for change in changes:
        sure = change.verdict in ("larger", "smaller")
        cells = (labels[change.key].label, number(change.old), number(change.new))
        rows.append(
            "<tr>"
            + "".join(f"<td>{escape(cell)}</td>" for cell in cells)
            + f"<td>{escape(_signed(change.difference))}</td>"
            + f'<td class="{"off" if sure else ""}">{escape(verdict_text(change))}</td></tr>'
        )
    note = '<p class="small">A change counts beyond twice the joint standard error.</p>'
    return table(("", "before", "now", "difference", ""), rows) + note


def _signed(difference: Quantity) -> str:
    plus = "+" if difference.known and difference.value > 0 else ""
    return plus + number(difference)


def _course(sides: tuple[Side, ...]) -> str:
    """A table and a plot of QRS, PR and QTc over the readings."""
    labels = usual(None)
    rows = [
        f"<tr><td>{escape(_when(s))}</td>"
        + "".join(f"<td>{escape(number(s.intervals[key]))}</td>" for key in TREND_KEYS)
        + "</tr>"
        for s in sides
    ]
    headings = ("reading", *(labels[key].label for key in TREND_KEYS))
    plots = "".join(_plot(sides, key, labels[key].label) for key in TREND_KEYS)
    return table(headings, rows) + f"<figure>{plots}</figure>"


def _places(sides: tuple[Side, ...]) -> list[float]:
    """Where each reading stands from 0 to 1: by its date, or evenly where dates are missing."""
    if all(s.date for s in sides):
        days = [date.fromisoformat(s.date or "").toordinal() for s in sides]
        if days[-1] > days[0]:
            return [(day - days[0]) / (days[-1] - days[0]) for day in days]
    return [k / (len(sides) - 1) for k in range(len(sides))]


def _plot(sides: tuple[Side, ...], key: str, label: str) -> str:
    """Points with bars of one standard error, joined in order of time."""
    width, height = TREND_MM
    values = [s.intervals[key] for s in sides]
    known = [(p, q) for p, q in zip(_places(sides), values, strict=True) if q.known]
    if not known:
        return ""
    low = min(q.value - q.se for _, q in known) - 10.0
    high = max(q.value + q.se for _, q in known) + 10.0

    def x(place: float) -> float:
        return 22.0 + place * (width - 40.0)

    def y(value: float) -> float:
        return height - 5.0 - (value - low) / (high - low) * (height - 10.0)

    parts = [text(0, 5, label, size=3.2, bold=True)]
    parts.append(
        polyline(
            np.array([x(p) for p, _ in known]),
            np.array([y(q.value) for _, q in known]),
            INK,
            width_mm=0.3,
        )
    )
    for place, q in known:
        at = x(place)
        parts.append(line(at, y(q.value - q.se), at, y(q.value + q.se), colour=INK, width_mm=0.8))
        parts.append(text(at + 1.5, y(q.value) - 1, f"{q.value:.0f} ms", size=2.8))
    return drawing(width, height, f"{label} over the readings", "".join(parts))


def _beats(comparison: Comparison, old: Side, new: Side) -> str:
    """Both dominant beats of each lead at one scale, aligned on the QRS onset."""
    spans = {lead: _extent(lead, old, new) for _, leads in GROUPS for lead in leads}
    rows, top = [], 0.0
    for name, leads in GROUPS:
        high = max(spans[lead][0] for lead in leads)
        low = min(spans[lead][1] for lead in leads)
        height = math.ceil((high - low) * GAIN_MM_MV)
        zero = top + LABEL_MM + high * GAIN_MM_MV
        rows.append(text(0, top + 3.2, name, size=2.9, colour="#46545d"))
        for column, lead in enumerate(leads):
            left = column * (CELL_MM + GAP_MM)
            rows.append(ruled(left, top + LABEL_MM, CELL_MM, height, zero, GRID, GRID_5))
            rows.append(
                line(
                    _x(left, 0),
                    top + LABEL_MM,
                    _x(left, 0),
                    top + LABEL_MM + height,
                    colour=GRID_5,
                    width_mm=0.3,
                )
            )
            rows.append(_beat(old, lead, left, zero, OLD_COLOUR, "1 0.6"))
            rows.append(_beat(new, lead, left, zero, INK, ""))
            rows.append(text(left + 0.8, top + LABEL_MM + 3.4, lead, size=3.4, bold=True))
            change = comparison.beat_change_mv.get(lead, math.nan)
            words = f"{change:.2f} mV" if math.isfinite(change) else "not in both"
            right = left + CELL_MM - 0.8
            rows.append(text(right, top + LABEL_MM + 3.2, words, size=2.6, anchor="end"))
        top += LABEL_MM + height + 1.5
    picture = drawing(
        4 * CELL_MM + 3 * GAP_MM, top, "Dominant beats over each other", "".join(rows)
    )
    caption = (
        f"Full line: {_when(new)}; broken line: {_when(old)}. {SPEED_MM_S:g} mm/s, "
        f"{GAIN_MM_MV:g} mm/mV, aligned on the QRS onset. In each corner: the largest difference "
        "within the QRS."
    )
    return f"<figure>{picture}<figcaption>{escape(caption)}</figcaption></figure>"


def _x(left: float, after_ms: float) -> float:
    return left + (after_ms + BEFORE_MS) * SPEED_MM_S / 1000.0


def _shown(side: Side, lead: str) -> tuple[np.ndarray, np.ndarray]:
    inside = (side.time_ms >= -BEFORE_MS) & (side.time_ms <= SPAN_MS - BEFORE_MS)
    places = np.flatnonzero(inside)[::2]
    mv = side.mv.get(lead)
    return side.time_ms[places], np.full(len(places), np.nan) if mv is None else mv[places]


def _extent(lead: str, *sides: Side) -> tuple[float, float]:
    """Top and bottom of a cell in mV, with a margin."""
    values = np.concatenate([_shown(side, lead)[1] for side in sides])
    values = values[np.isfinite(values)]
    high = max(0.5, float(values.max(initial=0.0)))
    low = min(-0.5, float(values.min(initial=0.0)))
    return math.ceil(high / 0.5 + 0.2) * 0.5, math.floor(low / 0.5 - 0.2) * 0.5


def _beat(side: Side, lead: str, left: float, zero: float, colour: str, dash: str) -> str:
    time_ms, mv = _shown(side, lead)
    x, y = _x(left, 0) + time_ms * SPEED_MM_S / 1000.0, zero - mv * GAIN_MM_MV
    runs = np.ma.clump_unmasked(np.ma.masked_invalid(y))
    return "".join(polyline(x[r], y[r], colour, width_mm=0.3, dash=dash) for r in runs)

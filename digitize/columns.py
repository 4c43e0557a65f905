"""Where the columns of a page begin and end: the breaks that all rows share."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from digitize.marks import Mark
from digitize.rows import STEP_MM, Row, Rows, Runs

SEARCH_MM = 4.0  # a column edge lies this near to an even division of the row
TOUCH_MM = 0.25  # runs on neighbouring columns that come this near belong together


@dataclass(frozen=True)
class Span:
    """One column, from the first to the last ink of its traces."""

    left_mm: float
    right_mm: float


def trace_extent(rows: Rows, marks: Sequence[Mark]) -> Span:
    """Where the traces begin and end across the page, calibration marks taken off."""
    lefts, rights = [], []
    for row in rows.rows:
        left, right = row.left_mm, row.right_mm
        for mark in marks_of_row(row, marks, rows.pitch_mm):
            if mark.left_mm - left < 12:
                left = _after(rows.runs, row, mark, left)
            elif right - mark.right_mm < 12:
                right = _before(rows.runs, row, mark, right)
        lefts.append(left)
        rights.append(right)
    return Span(float(np.median(lefts)), float(np.median(rights)))


def marks_of_row(row: Row, marks: Sequence[Mark], pitch_mm: float) -> list[Mark]:
    """Calibration marks whose foot stands at a row's height."""
    reach = min(6.0, 0.3 * pitch_mm)
    return [mark for mark in marks if abs(mark.foot_mm - row.y_mm) < reach]


def _after(runs: Runs, row: Row, mark: Mark, left_mm: float) -> float:
    """First ink of the trace after a mark at its left: behind a gap, else behind a tail."""
    x = _inked(runs, row)
    tail = max(mark.left_mm - left_mm, 0.5)
    behind = x[(x > mark.right_mm + 0.3) & (x < mark.right_mm + 8)]
    gaps = np.nonzero(np.diff(behind) > 0.45)[0]
    if len(gaps):
        return float(behind[gaps[0] + 1])
    if len(behind) and behind[0] > mark.right_mm + 0.9:
        return float(behind[0])
    return mark.right_mm + tail


def _before(runs: Runs, row: Row, mark: Mark, right_mm: float) -> float:
    """Last ink of the trace before a mark at its right."""
    x = _inked(runs, row)
    tail = max(right_mm - mark.right_mm, 0.5)
    ahead = x[(x < mark.left_mm - 0.3) & (x > mark.left_mm - 8)]
    gaps = np.nonzero(np.diff(ahead) > 0.45)[0]
    if len(gaps):
        return float(ahead[gaps[-1]])
    if len(ahead) and ahead[-1] < mark.left_mm - 0.9:
        return float(ahead[-1])
    return mark.left_mm - tail


def _inked(runs: Runs, row: Row) -> np.ndarray:
    near = (runs.top_mm < row.y_mm + 12) & (runs.bottom_mm > row.y_mm - 12)
    return np.unique(runs.x_mm[near])


def column_spans(
    rows: Rows, short_rows: int, extent: Span, count: int
) -> tuple[tuple[Span, ...], float]:
    """Divide the extent evenly into columns, then move to the breaks that the rows share.

    Returns
    -------
    spans : tuple of Span
        Left to right.
    evidence : float
        Mean share of rows that break at the edges between columns, 0..1; 0 for one column.
    """
    if count == 1:
        return (extent,), 0.0
    x, broken, inked = _breaks(rows, short_rows)
    width = (extent.right_mm - extent.left_mm) / count
    edges, shares = [], []
    for k in range(1, count):
        expected = extent.left_mm + k * width
        near = np.abs(x - expected) < SEARCH_MM
        if not near.any():
            edges.append((expected, expected))
            shares.append(0.0)
            continue
        pull = np.where(near, broken - 0.05 * np.abs(x - expected), -np.inf)
        at = int(np.argmax(pull))
        shares.append(float(broken[at]))
        if broken[at] < 0.5:
            edges.append((expected, expected))
            continue
        first = last = at
        while first > 0 and inked[first - 1] < 0.34:
            first -= 1
        while last < len(x) - 1 and inked[last] < 0.34:
            last += 1
        edges.append((float(x[first]), float(x[last])))
    lefts = [extent.left_mm, *(edge[1] for edge in edges)]
    rights = [*(edge[0] for edge in edges), extent.right_mm]
    spans = tuple(Span(a, b) for a, b in zip(lefts, rights, strict=True))
    return _even(spans, extent, shares), float(np.mean(shares))


def _even(spans: tuple[Span, ...], extent: Span, shares: list[float]) -> tuple[Span, ...]:
    """An edge that no break shows, or out of step with the others, follows their even spacing."""
    count = len(spans)
    order = np.arange(1, count)
    middle = np.array(
        [(a.right_mm + b.left_mm) / 2 for a, b in pairwise(spans)]
    )
    gap = float(np.median([b.left_mm - a.right_mm for a, b in pairwise(spans)]))
    good = np.array(shares) >= 0.5
    if good.sum() >= 2:
        step, start = np.polyfit(order[good], middle[good], 1)
    else:
        step = (extent.right_mm - extent.left_mm) / count
        start = float(np.median((middle - order * step)[good])) if good.any() else extent.left_mm
    expected = start + order * step
    middle = np.where(good & (np.abs(middle - expected) < 1.0), middle, expected)
    lefts = [extent.left_mm, *(middle + gap / 2)]
    rights = [*(middle - gap / 2), extent.right_mm]
    return tuple(Span(float(a), float(b)) for a, b in zip(lefts, rights, strict=True))


def _breaks(rows: Rows, short_rows: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """At each sampled column: x, share of rows broken just before it, share of rows with ink."""
    runs = rows.runs
    first, last = runs.x_mm.min(), runs.x_mm.max()
    steps = round((last - first) / STEP_MM) + 1
    column = np.round((runs.x_mm - first) / STEP_MM).astype(int)
    reach = 0.5 * rows.pitch_mm if len(rows.rows) > 1 else 15.0
    broken, inked = np.zeros(steps), np.zeros(steps)
    for row in rows.rows[:short_rows]:
        near = (runs.top_mm < row.y_mm + reach) & (runs.bottom_mm > row.y_mm - reach)
        top = [[] for _ in range(steps)]  # type: list[list[float]]
        bottom = [[] for _ in range(steps)]  # type: list[list[float]]
        for c, a, b in zip(column[near], runs.top_mm[near], runs.bottom_mm[near], strict=True):
            top[c].append(a)
            bottom[c].append(b)
        for c in range(1, steps):
            inked[c] += bool(top[c])
            broken[c] += not _touch(top[c - 1], bottom[c - 1], top[c], bottom[c])
    count = max(short_rows, 1)
    return first + np.arange(steps) * STEP_MM, broken / count, inked / count


def _touch(
    top_a: list[float], bottom_a: list[float], top_b: list[float], bottom_b: list[float]
) -> bool:
    return any(
        a0 < b1 + TOUCH_MM and b0 < a1 + TOUCH_MM
        for a0, a1 in zip(top_a, bottom_a, strict=True)
        for b0, b1 in zip(top_b, bottom_b, strict=True)
    )

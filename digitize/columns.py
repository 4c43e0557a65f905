"""Where the columns of a page begin and end: the breaks that all rows share."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
import scipy as sp

from digitize.ink import Ink
from digitize.marks import Mark
from digitize.rows import FADED_GAPS, STEP_MM, Row, Rows, Runs, row_extent, runs_of_row
from digitize.sheet import Box

SEARCH_MM = 4.0  # a column edge lies this near to an even division of the row
FAINT_MM = 5.0  # gap in a faint trace where most rows go on behind it
CUT_MM = 2.0  # ink this near to the edge of the picture is cut off there
CUT_STEP_MM = 1.5  # names tell a column's place to about so much, breaks do the rest
TICKS_APART_MM = 0.5  # ticks of one edge stand upright above one another
GAP_MM = 3.0  # rows that all stop for longer stand to both sides of a calibration mark
BARE = 0.6  # share of the gaps between columns that is bare, from which they are believed
ISLAND_MM, BESIDE_MM = 4.0, 1.5  # ink with so much bare paper to both sides is print, no trace
TAIL_MM = 6.0  # zero line drawn beside a mark is no longer than this
TOUCH_MM = 0.25  # runs on neighbouring columns that come this near belong together


@dataclass(frozen=True)
class Span:
    """One column, from the first to the last ink of its traces."""

    left_mm: float
    right_mm: float


@dataclass(frozen=True, eq=False)
class Breaks:
    """At each sampled column, (rows, columns): whether a row broke just before it, and has ink."""

    x_mm: np.ndarray
    broken: np.ndarray
    inked: np.ndarray

    def of(self, first: int, last: int) -> "Breaks":
        """Those of some rows alone."""
        return Breaks(self.x_mm, self.broken[first:last], self.inked[first:last])


def trace_extent(rows: Rows) -> Span:
    """Where the traces begin and end across the page.

    A faint trace may end early in many rows, but not at the same place: what most rows together
    show beyond their usual ends belongs to them.
    """
    middle = len(rows.rows) // 2
    left = sorted(row.left_mm for row in rows.rows)[middle]
    right = sorted(row.right_mm for row in rows.rows)[-1 - middle]
    first = rows.runs.x_mm.min()
    column = np.round((rows.runs.x_mm - first) / STEP_MM).astype(int)
    inked = np.zeros((len(rows.rows), column.max() + 1), bool)
    for number, row in enumerate(rows.rows):
        inked[number, column[runs_of_row(rows.runs, row.y_mm, rows.pitch_mm)]] = True
    near = sp.ndimage.maximum_filter1d(inked, 2 * round(0.3 * FAINT_MM / STEP_MM) + 1, axis=1)
    shared = (near.mean(axis=0) > 0.6) & (inked.mean(axis=0) > 0.25)
    shared_mm = np.flatnonzero(shared) * STEP_MM + first
    for x in shared_mm[shared_mm > right]:
        if x - right < FAINT_MM:
            right = float(x)
    for x in shared_mm[shared_mm < left][::-1]:
        if left - x < FAINT_MM:
            left = float(x)
    return Span(left, right)


def marks_of_row(row: Row, marks: Sequence[Mark], pitch_mm: float) -> list[Mark]:
    """Calibration marks whose foot stands at a row's height."""
    reach = min(6.0, 0.3 * pitch_mm)
    return [mark for mark in marks if abs(mark.foot_mm - row.y_mm) < reach]


def without_marks(rows: Rows, marks: Sequence[Mark]) -> Rows:
    """Return the rows with their calibration marks, and the zero line beside these, taken off."""
    keep = np.ones(len(rows.runs.x_mm), bool)
    for row in rows.rows:
        for mark in marks_of_row(row, marks, rows.pitch_mm):
            keep &= ~_part_of(rows.runs, mark)
    runs = Runs(*(a[keep] for a in (rows.runs.x_mm, rows.runs.top_mm, rows.runs.bottom_mm)))
    narrowed = (row_extent(runs, row.y_mm, rows.pitch_mm) or row for row in rows.rows)
    return replace(rows, runs=runs, rows=tuple(narrowed))


def _part_of(runs: Runs, mark: Mark) -> np.ndarray:
    """Which runs belong to a mark: its box, and its tails as far as the next gap."""
    x = runs.x_mm
    at_foot = (runs.top_mm < mark.foot_mm + 0.6) & (runs.bottom_mm > mark.foot_mm - 0.6)
    near = np.unique(x[at_foot & (x > mark.left_mm - TAIL_MM) & (x < mark.right_mm + TAIL_MM)])
    before = mark.left_mm - near[near < mark.left_mm - 0.3][::-1]
    after = near[near > mark.right_mm + 0.3] - mark.right_mm
    left, right = _tail(before), _tail(after)
    left, right = left or right or 1.0, right or left or 1.0
    zone = (x > mark.left_mm - left - 0.1) & (x < mark.right_mm + right + 0.1)
    over = (runs.top_mm < mark.foot_mm + 0.8) & (runs.bottom_mm > mark.top_mm - 0.5)
    box = (x > mark.left_mm - 0.4) & (x < mark.right_mm + 0.4) & over
    return box | (zone & at_foot)


def _tail(away_mm: np.ndarray) -> float | None:
    """Length of the line that goes away from a mark, None where it does not end within reach."""
    gaps = np.nonzero(np.diff(away_mm, prepend=0.3) > 0.45)[0]
    if len(gaps):
        return float(away_mm[gaps[0] - 1]) if gaps[0] > 0 else 0.3
    if len(away_mm) == 0 or away_mm[-1] < TAIL_MM - 2 * STEP_MM:
        return float(away_mm[-1]) if len(away_mm) else 0.3
    return None


def column_spans(
    breaks: Breaks, extent: Span, count: int, ticks: Sequence[Box] = ()
) -> tuple[tuple[Span, ...], float]:
    """Divide the extent evenly into columns, then move to the breaks that the rows share.

    Parameters
    ----------
    breaks : Breaks
        Of the rows of short panels.
    extent : Span
        From the first to the last ink of the traces.
    count : int
        Number of columns.
    ticks : sequence of Box
        Upright strokes that may separate columns.

    Returns
    -------
    spans : tuple of Span
        Left to right.
    evidence : float
        Mean share of rows that break at the edges between columns, 0..1; 0 for one column.
    """
    if count == 1:
        return (extent,), 0.0
    x, broken, bare = breaks.x_mm, breaks.broken.mean(axis=0), _bare(breaks)
    edges, shares = [], []
    for expected in _evenly(breaks, extent, count):
        near = np.abs(x - expected) < SEARCH_MM
        if not near.any():
            edges.append((expected, expected))
            shares.append(0.0)
            continue
        gap = _bare_about(bare, int(np.argmin(np.abs(x - expected))))
        if gap is not None and x[gap[1]] - x[gap[0]] > GAP_MM:
            shares.append(1.0)
            edges.append((float(x[gap[0]]), float(x[gap[1]])))
            continue
        away_mm = np.abs(x - expected)
        # simultaneous steep complexes break all rows as well, wherever they happen to stand
        pull = np.where(near, broken - 0.03 * away_mm - 0.04 * away_mm**2, -np.inf)
        at = int(np.argmax(pull))
        ticked, tick_mm = _ticked(ticks, expected, len(breaks.broken))
        if ticked > 0.8 and pull[at] < 0.5:
            shares.append(ticked)
            edges.append((tick_mm, tick_mm))
            continue
        shares.append(float(broken[at]) if pull[at] >= 0.5 else 0.0)
        if pull[at] < 0.5:
            edges.append((expected, expected))
            continue
        first, last = _bare_about(bare, at) or (at, at)
        edges.append((float(x[first]), float(x[last])))
    lefts = [extent.left_mm, *(edge[1] for edge in edges)]
    rights = [*(edge[0] for edge in edges), extent.right_mm]
    spans = tuple(Span(a, b) for a, b in zip(lefts, rights, strict=True))
    return _even(spans, extent, shares), float(np.mean(shares))


def _bare(breaks: Breaks) -> np.ndarray:
    """Where hardly a row has ink, a name or tick that stands between columns left out."""
    bare = breaks.inked.mean(axis=0) < 0.34
    turns = np.flatnonzero(np.diff(np.pad(bare.astype(np.int8), 1)))
    gaps = list(zip(turns[::2], turns[1::2], strict=True))
    for (a, b), (c, d) in pairwise(gaps):
        beside = min(b - a, d - c) * STEP_MM
        if (c - b) * STEP_MM < ISLAND_MM and beside > BESIDE_MM:
            bare[b:c] = True
    return bare


def _bare_about(bare: np.ndarray, at: int) -> tuple[int, int] | None:
    """First column of the gap about `at`, and the first after it; None where rows have ink."""
    first = last = at
    while first > 0 and bare[first - 1]:
        first -= 1
    while last < len(bare) - 1 and bare[last]:
        last += 1
    return (first, last) if last > first else None


def _evenly(breaks: Breaks, extent: Span, count: int) -> list[float]:
    """Middles of the gaps between so many columns that all are as long, and as far apart."""
    x, bare = breaks.x_mm, _bare(breaks)
    turns = np.flatnonzero(np.diff(np.pad(bare.astype(np.int8), 1)))
    gaps = [
        float(x[b - 1] - x[a]) + STEP_MM
        for a, b in zip(turns[::2], turns[1::2], strict=True)
        if x[a] > extent.left_mm and x[b - 1] < extent.right_mm and x[b - 1] - x[a] > GAP_MM
    ]

    def starts(gap_mm: float) -> np.ndarray:
        """Where the second column and those after it begin."""
        pitch_mm = (extent.right_mm - extent.left_mm + gap_mm) / count
        return extent.left_mm + pitch_mm * np.arange(1, count)

    def bare_share(gap_mm: float) -> float:
        """Share of the gaps that is bare."""
        inside = [(x > start - gap_mm) & (x < start) for start in starts(gap_mm)]
        return float(np.mean([bare[part].mean() for part in inside]))

    likeliest = max(gaps, key=bare_share, default=0.0)
    gap_mm = likeliest if gaps and bare_share(likeliest) > BARE else 0.0
    return [float(start) - gap_mm / 2 for start in starts(gap_mm)]


def possible_extents(extent: Span, room: Span) -> list[Span]:
    """The extent as it is seen, and as it may have been before the picture cut off a part."""
    lefts = np.arange(extent.left_mm - CUT_STEP_MM, room.left_mm, -CUT_STEP_MM)
    rights = np.arange(extent.right_mm + CUT_STEP_MM, room.right_mm, CUT_STEP_MM)
    wholes = [Span(extent.left_mm, float(right)) for right in rights]
    return [extent, *wholes, *(Span(float(left), extent.right_mm) for left in lefts)]


def within(spans: tuple[Span, ...], extent: Span) -> tuple[Span, ...]:
    """The columns as far as they are seen."""
    return tuple(
        Span(max(span.left_mm, extent.left_mm), min(span.right_mm, extent.right_mm))
        for span in spans
    )


def beyond_cuts(extent: Span, ink: Ink) -> Span:
    """How far traces may go on beyond the picture: a fifth, where they run up to its edge."""
    raster, fifth = ink.raster, (extent.right_mm - extent.left_mm) / 5
    right_mm = raster.x_mm(ink.density.shape[1] - 1)
    return Span(
        extent.left_mm - (fifth if extent.left_mm - raster.left_mm < CUT_MM else 0.0),
        extent.right_mm + (fifth if right_mm - extent.right_mm < CUT_MM else 0.0),
    )


def cut_notes(extent: Span, room: Span) -> list[str]:
    """What is said where traces run up to an edge of the picture."""
    sides = [("left", extent.left_mm > room.left_mm), ("right", extent.right_mm < room.right_mm)]
    return [
        f"the traces run up to the {side} edge of the picture: what stood beyond it is missing"
        for side, cut in sides
        if cut
    ]


def _ticked(ticks: Sequence[Box], expected_mm: float, rows: int) -> tuple[float, float]:
    """Share of rows, at most 1, that have a tick at one place near an edge, and that place."""
    places = [((t.left_mm + t.right_mm) / 2, t.top_mm) for t in ticks]
    places = sorted(p for p in places if abs(p[0] - expected_mm) < SEARCH_MM)
    best, best_mm = 0, expected_mm
    for x, _ in places:
        column = [p for p in places if abs(p[0] - x) < TICKS_APART_MM]
        heights = np.sort([y for _, y in column])
        count = 1 + int(np.sum(np.diff(heights) > 3.0))  # strokes of one letter stand level
        if count > best:
            best, best_mm = count, float(np.median([x for x, _ in column]))
    return min(best / max(rows, 2), 1.0), best_mm


def _even(spans: tuple[Span, ...], extent: Span, shares: list[float]) -> tuple[Span, ...]:
    """An edge that no break shows, or out of step with the others, follows their even spacing."""
    count = len(spans)
    order = np.arange(1, count)
    middle = np.array([(a.right_mm + b.left_mm) / 2 for a, b in pairwise(spans)])
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


def row_breaks(rows: Rows) -> Breaks:
    """Return where each row's trace breaks off from one sampled column to the next."""
    runs = rows.runs
    first, last = runs.x_mm.min(), runs.x_mm.max()
    steps = round((last - first) / STEP_MM) + 1
    column = np.round((runs.x_mm - first) / STEP_MM).astype(int)
    reach = 0.5 * rows.pitch_mm if len(rows.rows) > 1 else 15.0
    broken = np.zeros((len(rows.rows), steps), bool)
    inked = np.zeros((len(rows.rows), steps), bool)
    for number, row in enumerate(rows.rows):
        near = (runs.top_mm < row.y_mm + reach) & (runs.bottom_mm > row.y_mm - reach)
        spans: list[list[tuple[float, float]]] = [[] for _ in range(steps)]
        for c, a, b in zip(column[near], runs.top_mm[near], runs.bottom_mm[near], strict=True):
            spans[c].append((a, b))
        spans = _unfaded(spans)
        inked[number] = [bool(span) for span in spans]
        broken[number, 1:] = [not _touch(a, b) for a, b in pairwise(spans)]
    return Breaks(first + np.arange(steps) * STEP_MM, broken, inked)


def _unfaded(spans: list[list[tuple[float, float]]]) -> list[list[tuple[float, float]]]:
    """Runs of a row by column; of a faint one that is broken everywhere, with its gaps bridged.

    Such gaps say nothing of where leads begin and end.
    """
    cols = [c for c, span in enumerate(spans) if span]
    gaps = [(a, b) for a, b in pairwise(cols) if b - a > 1]
    if len(gaps) <= FADED_GAPS:
        return spans
    whole = list(spans)
    for a, b in gaps:
        whole[a + 1 : b] = [spans[a]] * (b - a - 1)
    return whole


def _touch(before: list[tuple[float, float]], after: list[tuple[float, float]]) -> bool:
    return any(a0 < b1 + TOUCH_MM and b0 < a1 + TOUCH_MM for a0, a1 in before for b0, b1 in after)

"""The rows of trace on a sheet: height, extent, and where they break.

Each column of pixels crosses each row in one short run of ink, or a long one at a steep stroke. A
run counts as one, whatever its length, so the profile of runs over height peaks where the traces
spend their time: at their baselines.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import cv2
import numpy as np
import scipy as sp
import skimage as ski

from digitize.ink import Ink, solid_ink
from digitize.rules import straight_rules
from digitize.sheet import Box

STEP_MM = 0.25  # columns are looked at this far apart
BIN_MM = 0.25
LEAST_PITCH_MM = 6.0
THICKEST_PEN_MM = 1.3
GAP_MM = 0.6  # specks of paper within a line are shorter
FADED_GAPS = 12  # in a row: a trace that breaks off so often does not do so between leads alone
FADED_MM = 5.0  # and for so long at most
QRS_MM, PIECE_MM = 3.0, 1.0  # a trace is away from its row for no longer; a piece of it is longer
OUTSIDE_MM = 2.0  # the zero line of a trace lies on the ruling, or this near
DROPPED_ROW = 3.0  # log odds against a row found that is none
MARKED_ROW = 3.0  # the same if it begins with a calibration mark: what else has one?
SOLID_MM = 7  # ink along half of this length is trace or mark, no speck
SPECK_MM = 1.0  # ink smaller than this in both directions is halftone or dirt


@dataclass(frozen=True, eq=False)
class Runs:
    """Vertical runs of ink on sampled columns: place and both ends, in mm; sorted by x."""

    x_mm: np.ndarray
    top_mm: np.ndarray
    bottom_mm: np.ndarray


@dataclass(frozen=True)
class Row:
    """One row of trace: usual height, and its extent from first to last ink."""

    y_mm: float
    left_mm: float
    right_mm: float


@dataclass(frozen=True, eq=False)
class Rows:
    """All rows from top to bottom, their distance, and the runs they were found by.

    `uprights` are long straight vertical lines (frames, separators).
    """

    rows: tuple[Row, ...]
    pitch_mm: float
    runs: Runs
    uprights: tuple[Box, ...]


def find_rows(ink: Ink, letters: tuple[Box, ...]) -> Rows:
    """Return the rows of trace on a sheet.

    Parameters
    ----------
    ink : Ink
        Traces, printing and dirt.
    letters : tuple of Box
        Separate letters: not part of any trace.
    """
    mask = without_specks(solid_ink(ink), SPECK_MM * ink.raster.px_per_mm)
    for box in letters:
        mask[_window(ink, box)] = 0
    rules, uprights = straight_rules(mask, ink)
    mask[rules] = 0
    runs = _find_runs(mask, ink)
    heights = _row_heights(runs, ink.ruled_mm)
    if not heights:
        return Rows((), 0.0, runs, uprights)
    pitch = float(np.median(np.diff(heights))) if len(heights) > 1 else 40.0
    found = (row_extent(runs, y, pitch) for y in heights)
    rows = tuple(row for row in found if row is not None)
    widest = max((row.right_mm - row.left_mm for row in rows), default=0.0)
    rows = tuple(row for row in rows if row.right_mm - row.left_mm > 0.25 * widest)
    return Rows(rows, pitch, runs, uprights)


def _window(ink: Ink, box: Box) -> tuple[slice, slice]:
    r = ink.raster
    return (
        slice(max(int(r.row(box.top_mm)), 0), int(np.ceil(r.row(box.bottom_mm))) + 1),
        slice(max(int(r.col(box.left_mm)), 0), int(np.ceil(r.col(box.right_mm))) + 1),
    )


def without_specks(mask: np.ndarray, size_px: float) -> np.ndarray:
    """The ink of a mask without pieces that are smaller than a size both ways."""
    _, labels, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=8)
    large = np.maximum(stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT]) >= size_px
    large[0] = False
    return large[labels].astype(np.uint8)


def _find_runs(mask: np.ndarray, ink: Ink) -> Runs:
    step = max(1, round(STEP_MM * ink.raster.px_per_mm))
    columns = np.ascontiguousarray(mask[:, ::step].T)
    edges = np.diff(np.pad(columns, ((0, 0), (1, 1))).astype(np.int8), axis=1)
    at, start = np.nonzero(edges == 1)
    _, end = np.nonzero(edges == -1)
    return Runs(
        x_mm=ink.raster.x_mm(at * step),
        top_mm=ink.raster.y_mm(start - 0.5),
        bottom_mm=ink.raster.y_mm(end - 0.5),
    )


def _row_heights(runs: Runs, ruled_mm: tuple[float, float, float, float]) -> list[float]:
    """Heights of the rows, top to bottom: peaks of the run profile that are far enough apart."""
    length = runs.bottom_mm - runs.top_mm
    middle = (runs.bottom_mm + runs.top_mm) / 2
    low, high = middle.min(initial=0.0) - 5, middle.max(initial=0.0) + 5
    bins = np.arange(low, high + BIN_MM, BIN_MM)
    profile, _ = np.histogram(middle, bins, weights=1 / (1 + length / 1.0))
    profile = sp.ndimage.gaussian_filter1d(profile.astype(float), 1.2 / BIN_MM)
    wide = sp.ndimage.gaussian_filter1d(profile, 2.0 / BIN_MM)
    peaks = _peaks(wide, LEAST_PITCH_MM / BIN_MM)
    strong = peaks[wide[peaks] > 0.1 * wide.max(initial=0.0)]
    y = bins[strong] + BIN_MM / 2
    share = np.array([coverage_mm(runs, height) for height in y])
    thin = np.array([_thin(runs, height) for height in y], bool)
    edge = np.array([_is_edge(runs, height, ruled_mm) for height in y], bool)
    if np.count_nonzero(thin & ~edge) > 2:
        thin &= ~edge
        share[edge] = 0.0
    clear = thin & (share > 0.35 * share.max(initial=0.0))
    heights = _spaced(y[clear], share[clear])
    faint = thin & ~clear & (share > 0.12 * share.max(initial=0.0))
    return _filled(heights, y[faint])


def coverage_mm(runs: Runs, y_mm: float) -> float:
    """Length in mm over which a run of ink lies within 3 mm of a height."""
    near = (runs.top_mm < y_mm + 3) & (runs.bottom_mm > y_mm - 3)
    return float(len(np.unique(runs.x_mm[near]))) * STEP_MM


def _peaks(profile: np.ndarray, distance: float) -> np.ndarray:
    """Places of the peaks of a profile, of two that are too near the higher one."""
    kept: list[int] = []
    # the highest come first
    for place in ski.feature.peak_local_max(profile, exclude_border=False)[:, 0]:
        if all(abs(place - other) >= distance for other in kept):
            kept.append(int(place))
    return np.sort(np.array(kept, int))


def _thin(runs: Runs, y_mm: float) -> bool:
    """Whether the ink at a height is a pen's line; the shaded edge of a sheet is a broad band."""
    near = (runs.top_mm < y_mm + 3) & (runs.bottom_mm > y_mm - 3)
    return bool(np.quantile((runs.bottom_mm - runs.top_mm)[near], 0.3) < THICKEST_PEN_MM)


def _is_edge(runs: Runs, y_mm: float, ruled_mm: tuple[float, float, float, float]) -> bool:
    """Whether ink at a height is the shaded edge of a sheet: outside the ruling, as wide."""
    left, top, right, bottom = ruled_mm
    if top - OUTSIDE_MM < y_mm < bottom + OUTSIDE_MM:
        return False
    near = (runs.top_mm < y_mm + 3) & (runs.bottom_mm > y_mm - 3)
    first, last = np.quantile(runs.x_mm[near], (0.02, 0.98)) if near.any() else (right, left)
    return bool(last - first > 0.9 * (right - left))


def _spaced(y: np.ndarray, share: np.ndarray) -> list[float]:
    """Drop the weaker of neighbours that are much closer than rows usually are."""
    while len(y) > 2:
        gaps = np.diff(y)
        strong = y[share > 0.6 * share.max()]
        usual = np.median(np.diff(strong)) if len(strong) > 1 else np.median(gaps)
        close = int(np.argmin(gaps))
        if gaps[close] > 0.6 * usual:
            break
        weaker = close if share[close] < share[close + 1] else close + 1
        y, share = np.delete(y, weaker), np.delete(share, weaker)
    return [float(v) for v in y]


def _filled(heights: list[float], faint: np.ndarray) -> list[float]:
    """The rows with faint ones where the even distance of the others leaves room for one."""
    if len(heights) < 3:
        return heights
    pitch = float(np.median(np.diff(heights)))
    found = list(heights)
    for above, below in pairwise(heights):
        middle = (above + below) / 2
        near = [y for y in faint if abs(y - middle) < 0.2 * pitch]
        if abs((below - above) / pitch - 2) < 0.25 and near:
            found.append(float(min(near, key=lambda y: abs(y - middle))))
    return sorted(found)


def row_extent(runs: Runs, y_mm: float, pitch_mm: float) -> Row | None:
    """Return the row at a height, from its first to its last solid stretch of ink.

    Specks do not count; None where there is no solid stretch at all.
    """
    x = np.unique(runs.x_mm[runs_of_row(runs, y_mm, pitch_mm)])
    if len(x) < 20:
        return None
    x = _bridged(x)
    first = np.floor(x[0])
    inked = np.minimum(np.bincount((x - first).astype(int)) * STEP_MM, 1.0)
    # Half of a stretch is enough: a faint trace is broken everywhere.
    solid = np.flatnonzero(sp.ndimage.uniform_filter1d(inked, SOLID_MM, mode="constant") > 0.5)
    if len(solid) == 0:
        return None
    low, high = first + solid[0], first + solid[-1] + 1
    parts = np.split(x, np.flatnonzero(np.diff(x) > GAP_MM) + 1)
    within = [part for part in parts if part[-1] > low and part[0] < high and _is_piece(part)]
    if not within:
        return None
    left, right = within[0][0], within[-1][-1]
    # A tall QRS leaves the row for a while.
    for part in parts:
        if part[-1] > right and part[0] - right < QRS_MM and _is_piece(part):
            right = part[-1]
    for part in reversed(parts):
        if part[0] < left and left - part[-1] < QRS_MM and _is_piece(part):
            left = part[0]
    return Row(y_mm, float(left), float(right))


def _bridged(x_mm: np.ndarray) -> np.ndarray:
    """Places of ink along a row; of a faint one that is broken everywhere, with its gaps."""
    gaps = np.diff(x_mm)
    if np.count_nonzero(gaps > GAP_MM) <= FADED_GAPS:
        return x_mm
    short = np.flatnonzero((gaps > GAP_MM) & (gaps < FADED_MM))
    between = (np.arange(x_mm[k] + STEP_MM, x_mm[k + 1] - STEP_MM / 2, STEP_MM) for k in short)
    return np.sort(np.concatenate([x_mm, *between]))


def runs_of_row(runs: Runs, y_mm: float, pitch_mm: float) -> np.ndarray:
    """Which runs of ink stand at the height of a row."""
    reach = min(0.5 * pitch_mm, 12.0)
    return (runs.top_mm < y_mm + reach) & (runs.bottom_mm > y_mm - reach)


def _is_piece(part: np.ndarray) -> bool:
    """Whether an unbroken piece of ink is long enough for a trace."""
    return bool(part[-1] - part[0] > PIECE_MM)


def row_choices(rows: Rows, marked: Sequence[bool]) -> list[tuple[int, Rows, float]]:
    """The rows found, and without an outermost one that may be no trace: first, rows, cost.

    `marked` says of each row whether a calibration mark stands in it.
    """
    count = len(rows.rows)
    left = float(np.median([row.left_mm for row in rows.rows]))
    right = float(np.median([row.right_mm for row in rows.rows]))

    def cost(row: Row, has_mark: bool) -> float:
        both = min(right, row.right_mm) - max(left, row.left_mm)
        either = max(right, row.right_mm) - min(left, row.left_mm)
        alike = DROPPED_ROW if both > 0.93 * either else 0.3 * DROPPED_ROW
        return alike + MARKED_ROW * has_mark

    costs = [cost(row, has) for row, has in zip(rows.rows, marked, strict=True)]
    choices = []
    for top in (0, 1):
        for bottom in (0, 1):
            kept = rows.rows[top : count - bottom]
            if kept:
                doubt = sum((*costs[:top], *costs[count - bottom :]))
                choices.append((top, replace(rows, rows=kept), doubt))
    return choices

"""Where traces cross or break: which of them made the ink that the shortest paths leave over.

A path of least cost likes short cuts. Where the flank of an R wave is broken it crosses the gap at
the foot and leaves the peak alone; where a tall complex reaches into the next row, each path goes
straight on through the other's flank. A piece of ink is left over that touches several traces. Any
of them may have made it, so each is tried: led round by the upper or the lower end of the piece,
and so on with what is then still left over. The few best answers are kept; which of them is right
is for the pen to say, since only the right one can be redrawn.
"""

from dataclasses import dataclass, replace

import cv2
import numpy as np

from digitize.field import INKED, Field, Path, walk
from digitize.path import run_at

_WORTH_PER_MM = 0.8  # of stroke explained, in the path's price
_PEN_MM = 0.4  # common practice; only to count ink as length of stroke
_LEAST_MM = 1.0  # shorter pieces of stroke are left to the fit
_AROUND_MM = 2.5  # paper taken in to each side of a piece
_TOUCH_MM = 1.2  # a piece so near to a path may belong to it
_HALF_PEN_MM = 0.25  # ink about a path that is surely its own
_SHORT_MM = 1.5  # a run of ink that stands out so little from its path holds no peak of its own
_BEAM = 8
_DEPTH = 6
_ANSWERS = 8
_CLOSE = 12.0  # answers dearer than the best by more are not worth drawing
_OUTSIDE = 1e3


@dataclass(frozen=True, eq=False)
class Answer:
    """Paths of all traces through one place, by their numbers, and what they cost in all."""

    paths: dict[int, Path]
    prices: dict[int, float]
    total: float


@dataclass(frozen=True, eq=False)
class _Place:
    """A part of the page in which ink is left over."""

    cols: tuple[int, int]
    rows: tuple[int, int]
    anchors: dict[int, np.ndarray]
    edges: dict[int, tuple[bool, bool]]  # whether a trace begins or ends here


def find_answers(
    field: Field, paths: list[Path], anchors: list[np.ndarray]
) -> list[tuple[Answer, ...]]:
    """Possible ways of the traces through every place where ink is left over.

    Parameters
    ----------
    field : Field
    paths : list of Path
        Shortest ways, one per trace.
    anchors : list of (2, cols) int arrays
        Where each trace stands beyond doubt.

    Returns
    -------
    list of tuple of Answer
        For each place, from left to right, the best answers first.
    """
    whole = dict(enumerate(paths))
    left_over = _left_over(field, whole, (0, len(field.bare)), (0, field.bare.shape[1]))
    found = []
    for cols in _places(left_over, field.px_per_mm):
        here = {
            m: Path(max(p.left, cols[0]), p.cut(max(p.left, cols[0]), min(p.right, cols[1])))
            for m, p in whole.items()
            if min(p.right, cols[1]) - max(p.left, cols[0]) > 2
        }
        rows = np.flatnonzero(left_over[:, slice(*cols)].any(axis=1))
        reach = round(_AROUND_MM * field.px_per_mm)
        low, high = int(rows.min()) - reach, int(rows.max()) + reach
        near = {m: p for m, p in here.items() if p.span[0].min() < high and p.span[1].max() > low}
        if not near:
            continue
        low = min([low] + [int(p.span[0].min()) - reach for p in near.values()])
        high = max([high] + [int(p.span[1].max()) + reach for p in near.values()])
        place = _Place(
            cols,
            (max(low, 0), min(high, len(field.bare))),
            {m: anchors[m] for m in near},
            {m: (paths[m].left >= cols[0], paths[m].right <= cols[1]) for m in near},
        )
        found.append(_search(field, place, near))
    return found


def _places(left_over: np.ndarray, px_per_mm: float) -> list[tuple[int, int]]:
    """Ranges of columns about the pieces of left-over ink; pieces close together share one."""
    reach = round(_AROUND_MM * px_per_mm)
    wide = np.convolve(left_over.any(axis=0), np.ones(2 * reach + 1), "same") > 0.5
    edges = np.flatnonzero(np.diff(np.pad(wide.astype(np.int8), 1)))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]


def _left_over(
    field: Field, paths: dict[int, Path], rows: tuple[int, int], cols: tuple[int, int]
) -> np.ndarray:
    """Pieces of ink, labelled from 1, that the paths do not explain; 0 elsewhere."""
    part = field.bare[slice(*rows), slice(*cols)]
    density, half = 1 - part, _HALF_PEN_MM * field.px_per_mm
    claimed = np.zeros(part.shape, bool)
    row = np.arange(*rows)[:, None]
    for path in paths.values():
        at = slice(path.left - cols[0], path.right - cols[0])
        run = run_at(np.ascontiguousarray(density[:, at]), path.span - rows[0], 0.1, 1) + rows[0]
        beyond = np.diff(run - path.span, axis=0)[0]
        short = (run[0] >= rows[0]) & (beyond < _SHORT_MM * field.px_per_mm)
        low = np.where(short, run[0], path.span[0] - half)
        high = np.where(short, run[1], path.span[1] + half)
        claimed[:, at] |= (row >= low - 1) & (row <= high + 1)
    unclaimed = ((part < INKED) & ~claimed).astype(np.uint8)
    left = cv2.morphologyEx(unclaimed, cv2.MORPH_OPEN, np.ones((2, 2), np.uint8))
    _, labels, stats, _ = cv2.connectedComponentsWithStats(left, connectivity=8)
    size = np.maximum(stats[:, cv2.CC_STAT_HEIGHT], stats[:, cv2.CC_STAT_WIDTH])
    large = size >= _LEAST_MM * field.px_per_mm
    large[0] = False
    return np.where(large[labels], labels, 0)


def _search(field: Field, place: _Place, paths: dict[int, Path]) -> tuple[Answer, ...]:
    """The best answers found by leading one path after another round what is left over."""
    prices = {m: _led(field, place, paths, m, None)[1] for m in paths}
    first = _answer(field, place, paths, prices)
    beam, seen = [first], {_key(first)}
    for _ in range(_DEPTH):
        new = []
        for answer in beam:
            for changed in _changes(field, place, answer):
                if changed.total < answer.total - 0.1 and _key(changed) not in seen:
                    seen.add(_key(changed))
                    new.append(changed)
        if not new:
            break
        beam = sorted([*beam, *new], key=lambda a: a.total)[:_BEAM]
    best = min(a.total for a in beam)
    return tuple(a for a in sorted(beam, key=lambda a: a.total) if a.total < best + _CLOSE)[
        :_ANSWERS
    ]


def _key(answer: Answer) -> bytes:
    return b"".join(path.span.astype(np.int32).tobytes() for path in answer.paths.values())


def _answer(
    field: Field, place: _Place, paths: dict[int, Path], prices: dict[int, float]
) -> Answer:
    """What these paths cost, ink left over included."""
    left = np.count_nonzero(_left_over(field, paths, place.rows, place.cols))
    left_mm = left / field.px_per_mm**2 / _PEN_MM
    return Answer(paths, prices, sum(prices.values()) + _WORTH_PER_MM * left_mm)


def _changes(field: Field, place: _Place, answer: Answer) -> list[Answer]:
    """Answers in which one path more goes round the largest piece of ink that is left over."""
    labels = _left_over(field, answer.paths, place.rows, place.cols)
    if not labels.any():
        return []
    largest = int(np.argmax(np.bincount(labels.ravel())[1:])) + 1
    rows, cols = np.nonzero(labels == largest)
    rows, cols = rows + place.rows[0], cols + place.cols[0]
    changed = []
    for m, path in answer.paths.items():
        inside = (cols >= path.left) & (cols < path.right)
        if not inside.any():
            continue
        span = path.span[:, cols[inside] - path.left]
        away = np.maximum(span[0] - rows[inside], rows[inside] - span[1])
        if away.min() > _TOUCH_MM * field.px_per_mm:
            continue
        for end in (np.argmin(rows[inside]), np.argmax(rows[inside])):
            if away[end] <= 0:
                continue
            via = int(rows[inside][end]), int(cols[inside][end])
            led, price = _led(field, place, answer.paths, m, via)
            paths, prices = answer.paths | {m: led}, answer.prices | {m: price}
            changed.append(_answer(field, place, paths, prices))
    return changed


def _led(
    field: Field,
    place: _Place,
    paths: dict[int, Path],
    m: int,
    via: tuple[int, int] | None,
) -> tuple[Path, float]:
    """Path m through a place, by a point if one is given, between the ends that it has."""
    own = paths[m]
    ends = []
    for side, free in zip((0, -1), place.edges[m], strict=True):
        end = np.full(place.rows[1] - place.rows[0], 0.0 if free else _OUTSIDE)
        low, high = own.span[:, side] - place.rows[0]
        end[max(low, 0) : high + 1] = 0
        ends.append(end)
    others = tuple(path for k, path in paths.items() if k != m)
    cols = (own.left, own.right)
    return walk(
        field, place.rows, cols, place.anchors[m], (ends[0], ends[1]), others=others, via=via
    )


def spliced(paths: list[Path], answer: Answer) -> list[Path]:
    """The paths of a page with those of one place put in."""
    new = list(paths)
    for m, part in answer.paths.items():
        span = new[m].span.copy()
        span[:, part.left - new[m].left : part.right - new[m].left] = part.span
        new[m] = replace(new[m], span=span)
    return new

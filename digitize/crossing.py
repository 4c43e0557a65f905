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
from digitize.path import paint, run_at

_WORTH_PER_MM = 0.8  # of stroke explained, in the path's price
_LEAST_MM = 1.0  # shorter pieces of stroke are left to the fit
_AROUND_MM = 2.5  # paper taken in to each side of a piece
_TOUCH_MM = 1.2  # a piece so near to a path may belong to it
_SHORT_MM = 1.5  # a run of ink that stands out so little from its path holds no peak of its own
_INK = 0.1  # of full ink, that still belongs to a run
_BEAM = 6
_DEPTH = 12
_ANSWERS = 5
_CLOSE = 5.0  # answers dearer than the best by more are not worth drawing
_OUTSIDE = 1e3


@dataclass(frozen=True, eq=False)
class Answer:
    """Paths of all traces through one place, by their numbers, and what they cost in all."""

    paths: dict[int, Path]
    prices: dict[int, float]
    via: dict[int, tuple[tuple[int, int], ...]]  # points round which they were led
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
    claimed = _claimed(1 - part, paths, rows[0], cols[0], field)
    tall = round(_LEAST_MM * field.px_per_mm)
    beside = cv2.dilate(claimed.astype(np.uint8), np.ones((2 * tall + 1, 1), np.uint8)) > 0
    unclaimed = (part < INKED) & ~claimed
    # slivers along a trace are its own thickness; flanks are tall, lost stretches lie apart
    left = _opened(unclaimed, (tall, 2)) | _opened(unclaimed & ~beside, (2, 2))
    _, labels, stats, _ = cv2.connectedComponentsWithStats(left.astype(np.uint8), connectivity=8)
    size = np.maximum(stats[:, cv2.CC_STAT_HEIGHT], stats[:, cv2.CC_STAT_WIDTH])
    large = size >= _LEAST_MM * field.px_per_mm
    touching = np.zeros(len(stats), bool)
    touching[np.unique(labels[cv2.dilate(claimed.astype(np.uint8), np.ones((5, 5))) > 0])] = True
    keep = large & touching
    keep[0] = False
    return np.where(keep[labels], labels, 0)


def _opened(mask: np.ndarray, size: tuple[int, int]) -> np.ndarray:
    """What of a mask holds a rectangle of so many rows and columns."""
    return cv2.morphologyEx(mask.astype(np.uint8), cv2.MORPH_OPEN, np.ones(size, np.uint8)) > 0


def _claimed(
    density: np.ndarray, paths: dict[int, Path], row0: int, col0: int, field: Field
) -> np.ndarray:
    """Ink that paths explain: under the pen all along, and whole runs that no other path enters."""
    visited = np.zeros(density.shape, bool)
    spans = {m: (path.left - col0, path.span - row0) for m, path in paths.items()}
    for left, span in spans.values():
        paint(visited, left, span)
    size = 2 * round(field.pen_mm / 2 * field.px_per_mm + 0.5) + 1
    pen = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size))
    claimed = cv2.dilate(visited.astype(np.uint8), pen) > 0
    for m, (left, span) in spans.items():
        part = slice(left, left + span.shape[1])
        run = run_at(np.ascontiguousarray(density[:, part]), span, _INK, 1)
        beyond = np.diff(run - span, axis=0)[0] if run.size else np.zeros(0)
        alone = (run[0] >= 0) & (beyond < _SHORT_MM * field.px_per_mm)
        for k, (start, other) in spans.items():
            a, b = max(left, start), min(part.stop, start + other.shape[1])
            if k != m and a < b:
                theirs, mine = other[:, a - start : b - start], run[:, a - left : b - left]
                alone[a - left : b - left] &= (theirs[1] < mine[0]) | (theirs[0] > mine[1])
        paint(claimed, left, np.where(alone, run + np.array([[-1], [1]]), [[0], [-1]]))
    return claimed


def _search(field: Field, place: _Place, paths: dict[int, Path]) -> tuple[Answer, ...]:
    """The best answers found by leading one path after another round what is left over."""
    prices = {m: _led(field, place, paths, m, ())[1] for m in paths}
    first = _answer(field, place, paths, prices, dict.fromkeys(paths, ()))
    beam, open_, seen = [first], [first], {_key(first)}
    for _ in range(_DEPTH):
        new = []
        for answer in open_:
            changes = [c for c in _changes(field, place, answer) if c.total < answer.total - 0.1]
            if len(changes) == 1:  # there is one way only: the answer without it is no answer
                beam = [a for a in beam if a is not answer]
            for changed in changes:
                key = _key(changed)
                if key not in seen:
                    seen.add(key)
                    new.append(changed)
        if not new:
            break
        beam = sorted([*beam, *new], key=lambda a: a.total)[:_BEAM]
        open_ = [a for a in new if a in beam]
    best = beam[0].total if beam else first.total
    return tuple(a for a in beam if a.total < best + _CLOSE)[:_ANSWERS] or (first,)


def _key(answer: Answer) -> bytes:
    return b"".join(path.span.astype(np.int32).tobytes() for path in answer.paths.values())


def _answer(
    field: Field,
    place: _Place,
    paths: dict[int, Path],
    prices: dict[int, float],
    via: dict[int, tuple[tuple[int, int], ...]],
) -> Answer:
    """What these paths cost, ink left over included."""
    left = np.count_nonzero(_left_over(field, paths, place.rows, place.cols))
    left_mm = left / field.px_per_mm**2 / field.pen_mm
    return Answer(paths, prices, via, sum(prices.values()) + _WORTH_PER_MM * left_mm)


def _changes(field: Field, place: _Place, answer: Answer) -> list[Answer]:
    """Answers in which one path more goes round the largest piece of ink that is left over."""
    labels = _left_over(field, answer.paths, place.rows, place.cols)
    sizes = np.bincount(labels.ravel())[1:]
    for label in np.argsort(-sizes, kind="stable") + 1:
        if not sizes[label - 1]:
            break
        changed = _round(field, place, answer, labels == label)
        if changed:
            return changed
    return []


def _round(field: Field, place: _Place, answer: Answer, piece: np.ndarray) -> list[Answer]:
    """Answers in which one path more goes round one piece of ink."""
    rows, cols = np.nonzero(piece)
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
        for end in {int(np.argmin(rows[inside])), int(np.argmax(rows[inside]))}:
            if away[end] <= _TOUCH_MM * field.px_per_mm:
                continue
            point = int(rows[inside][end]), int(cols[inside][end])
            via = (*(p for p in answer.via[m] if p[1] != point[1]), point)
            led, price = _led(field, place, answer.paths, m, via)
            paths, prices = answer.paths | {m: led}, answer.prices | {m: price}
            changed.append(_answer(field, place, paths, prices, answer.via | {m: via}))
    if len({next(m for m in c.paths if c.paths[m] is not answer.paths[m]) for c in changed}) == 1:
        return [min(changed, key=lambda a: a.total)]  # nobody else's
    return changed


def _led(
    field: Field,
    place: _Place,
    paths: dict[int, Path],
    m: int,
    via: tuple[tuple[int, int], ...],
) -> tuple[Path, float]:
    """Path m through a place, by the given points, between the ends that it has."""
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


def widened(field: Field, answer: Answer, m: int, side: int) -> Answer | None:
    """The answer with path m given the ink above (side 0) or below it, up to the next path.

    A path that must not follow another's ink turns back before a peak that ends inside that ink.
    """
    path = answer.paths[m]
    stop = path.right
    ink = np.ascontiguousarray(1 - field.bare[:, path.left : stop])
    run = run_at(ink, path.span, 1 - INKED, 1)
    edge = np.where(run[0] >= 0, run[side], path.span[side])
    for k, other in answer.paths.items():
        a, b = max(path.left, other.left), min(stop, other.right)
        if k == m or a >= b:
            continue
        here = slice(a - path.left, b - path.left)
        mine, theirs = path.span[:, here], other.cut(a, b)
        if side == 0:
            met = (theirs[0] < mine[0]) & (theirs[1] >= edge[here])
            edge[here] = np.where(met, np.minimum(theirs[1] + 1, mine[0]), edge[here])
        else:
            met = (theirs[1] > mine[1]) & (theirs[0] <= edge[here])
            edge[here] = np.where(met, np.maximum(theirs[0] - 1, mine[1]), edge[here])
    span = path.span.copy()
    span[side] = np.minimum(span[0], edge) if side == 0 else np.maximum(span[1], edge)
    if np.abs(span - path.span).max() < _LEAST_MM * field.px_per_mm:
        return None
    return replace(answer, paths=answer.paths | {m: Path(path.left, span)})


def spliced(paths: list[Path], answer: Answer) -> list[Path]:
    """The paths of a page with those of one place put in."""
    new = list(paths)
    for m, part in answer.paths.items():
        span = new[m].span.copy()
        span[:, part.left - new[m].left : part.right - new[m].left] = part.span
        new[m] = replace(new[m], span=span)
    return new

"""Lead names read on the page, held against where an arrangement expects them.

A recorder prints its lead names at one fixed place relative to the start of each trace. So the
place that most readings agree on is found first; names elsewhere do not count. Names that a
trace touches are then looked for at that place alone.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from digitize.ink import Ink
from digitize.rules import without_crossings
from digitize.sheet import Box
from digitize.words import NAMES, Word, read_boxes

REACH_LEFT_MM, REACH_RIGHT_MM = 18.0, 13.0  # a name stands this near the start of its trace
SAME_X_MM = 3.0
SAME_Y = 0.1  # of the distance between rows: traces wander about their zero line
# An upright stroke alone is easily read as I: such names weigh less.
WEIGHT: Mapping[str, float] = {"I": 0.35, "II": 0.6, "III": 0.8}
# Evidence against two places for the names, on one level and on two.
APART_LEVEL, APART = 1.0, 2.0
FAR = 1.5  # evidence against names that stand nearer to the neighbouring row
DOUBT = -5.0  # a crop that no name explains better than this says nothing


@dataclass(frozen=True)
class Slot:
    """Where one panel starts, and the name expected of it; None: any name."""

    row: int
    column: int
    x_mm: float
    y_mm: float
    name: str | None


@dataclass(frozen=True)
class LabelFit:
    """How the readings fit an arrangement: log evidence, and the reading of each slot.

    `names` is keyed by (row, column): name and probability among all names. `offset_mm` is the
    place of the names relative to the starts, None where no two agree.
    """

    score: float
    names: Mapping[tuple[int, int], tuple[str, float]]
    offset_mm: tuple[float, float] | None
    right_aligned: bool
    boxes: tuple[Box, ...]
    inner_offset_mm: tuple[float, float] | None = None
    places: Mapping[tuple[int, int], Box] = field(default_factory=dict)  # of the names, by slot


@dataclass(frozen=True)
class _Pair:
    """One reading held against one slot: its place relative to the start, its log evidence."""

    slot: Slot
    word: Word
    dx_mm: float
    dy_mm: float
    gain: float


def posterior(word: Word) -> dict[str, float]:
    """Probability of each lead name, given that the word is one; empty where none fits."""
    if not word.names or max(word.names.values()) < DOUBT:
        return {}
    log = np.array([word.names[name] for name in NAMES])
    share = np.exp(log - log.max())
    clear = np.exp(log.max() / 3)  # a poor reading spreads over all names
    share = clear * share / share.sum() + (1 - clear) / len(NAMES)
    return dict(zip(NAMES, share, strict=True))


def fit_labels(words: Sequence[Word], slots: Sequence[Slot], pitch_mm: float) -> LabelFit:
    """Return how the words fit the slots of an arrangement."""
    fits = [
        _fit_aligned([(w, p) for w in words if (p := posterior(w))], slots, pitch_mm, right)
        for right in (False, True)
    ]
    return max(fits, key=lambda fit: fit.score)


def _fit_aligned(
    words: list[tuple[Word, dict[str, float]]],
    slots: Sequence[Slot],
    pitch_mm: float,
    right: bool,
) -> LabelFit:
    pairs: list[_Pair] = []
    for slot in slots:
        for word, names in words:
            x = word.box.right_mm if right else word.box.left_mm
            dx = x - slot.x_mm
            dy = (word.box.top_mm + word.box.bottom_mm) / 2 - slot.y_mm
            near = -REACH_LEFT_MM < dx < REACH_RIGHT_MM and abs(dy) < 0.85 * pitch_mm
            if near and not _mere_stroke(names, slot):
                pairs.append(_Pair(slot, word, dx, dy, _gain(slot, names)))
    if not pairs:
        return LabelFit(0.0, {}, None, right, ())
    chosen, score = _shared_place(pairs, pitch_mm)
    if not chosen:
        return LabelFit(0.0, {}, None, right, ())
    read = {(pair.slot.row, pair.slot.column): _likeliest(posterior(pair.word)) for pair in chosen}
    places = {(pair.slot.row, pair.slot.column): pair.word.box for pair in chosen}
    boxes = tuple(places.values())
    first = _usual_place([pair for pair in chosen if pair.slot.column == 0])
    inner = _usual_place([pair for pair in chosen if pair.slot.column > 0])
    return LabelFit(score, read, first, right, boxes, inner, places)


def _mere_stroke(names: Mapping[str, float], slot: Slot) -> bool:
    """Whether a reading is an upright stroke or some where letters are expected: a separator."""
    return slot.name is not None and slot.name not in WEIGHT and _likeliest(names)[0] in WEIGHT


def _usual_place(pairs: Sequence[_Pair]) -> tuple[float, float] | None:
    """Median place of some readings relative to the starts, None where fewer than two agree."""
    if len(pairs) < 2:
        return None
    dx, dy = ([p.dx_mm for p in pairs], [p.dy_mm for p in pairs])
    return float(np.median(dx)), float(np.median(dy))


def _shared_place(pairs: Sequence[_Pair], pitch_mm: float) -> tuple[list[_Pair], float]:
    """The readings at the one place, relative to the starts, that explains most; their evidence."""
    dx = np.array([pair.dx_mm for pair in pairs])
    dy = np.array([pair.dy_mm for pair in pairs])
    gain = np.array([pair.gain for pair in pairs])
    first = np.array([pair.slot.column == 0 for pair in pairs])
    far = FAR * (np.abs(dy) > pitch_mm / 2)
    same_y_mm = max(SAME_Y * pitch_mm, 1.8)

    def best_at(group: np.ndarray) -> tuple[float, np.ndarray, int]:
        """Evidence at the best place of a group of pairs, who stands there, and one of these."""
        best = 0.0, np.zeros(len(pairs), bool), -1
        for k in np.nonzero(group & (gain > 0.5))[0]:
            near = group & (np.abs(dx - dx[k]) < SAME_X_MM) & (np.abs(dy - dy[k]) < same_y_mm)
            score = _one_each(_those(pairs, near))[0] - far[k]
            if score > best[0]:
                best = score, near, int(k)
        return best

    score, near, _ = best_at(np.ones(len(pairs), bool))
    (_, left, a), (_, inner, b) = best_at(first), best_at(~first)
    if a >= 0 and b >= 0:
        # A calibration mark may push the names of the first column aside from the others', or
        # those of the first column stand left of their traces and the others above.
        price = APART_LEVEL if abs(dy[a] - dy[b]) < same_y_mm else APART
        price += max(far[a], far[b])
        both, chosen = _one_each(_those(pairs, left | inner))
        if both - price > score:
            return chosen, both - price
    return _one_each(_those(pairs, near))[1], score


def _likeliest(names: Mapping[str, float]) -> tuple[str, float]:
    """The likeliest of some names and its probability."""
    name = max(names, key=lambda n: names[n])
    return name, names[name]


def _gain(slot: Slot, names: Mapping[str, float]) -> float:
    """Log evidence of one reading for one slot against a name drawn at random."""
    name = slot.name or _likeliest(names)[0]
    share = names[name] + (names["aVR"] if name == "-aVR" else 0.0)  # a minus is easily lost
    evidence = float(np.log(share * len(NAMES)))
    if slot.name is None:
        evidence = 0.3 * max(evidence, 0.0)
    return WEIGHT.get(name, 1.0) * max(evidence, -2.5)


def _those(pairs: Sequence[_Pair], mask: np.ndarray) -> list[_Pair]:
    """The pairs that a mask marks."""
    return [pair for pair, marked in zip(pairs, mask, strict=True) if marked]


def _one_each(pairs: Sequence[_Pair]) -> tuple[float, list[_Pair]]:
    """Best reading of each slot among the pairs, each word used once; their evidence first."""
    chosen: list[_Pair] = []
    taken: set[Slot | Box] = set()
    for pair in sorted(pairs, key=lambda pair: -pair.gain):
        if pair.slot not in taken and pair.word.box not in taken:
            taken |= {pair.slot, pair.word.box}
            chosen.append(pair)
    return sum(pair.gain for pair in chosen), chosen


def look_again(ink: Ink, fit: LabelFit, slots: Sequence[Slot], aside_mm: float = 0.0) -> LabelFit:
    """Read the place of each slot's name that was not read, where the others say it must be.

    `aside_mm` is how far calibration marks push the traces of the first column to the right: names
    left of the marks stand so much further from their traces than in the other columns.
    """
    missing = [slot for slot in slots if (slot.row, slot.column) not in fit.names]
    places = _places(fit, aside_mm)
    if places is None or not missing:
        return fit
    height = float(np.median([box.bottom_mm - box.top_mm for box in fit.boxes]))
    boxes = [
        _expected_box(slot, places[slot.column > 0], fit.right_aligned, height) for slot in missing
    ]
    score, names = fit.score, dict(fit.names)
    looked = {(s.row, s.column): box for s, box in zip(missing, boxes, strict=True)}
    plain, uncrossed = (read_boxes(of, boxes) for of in (ink, without_crossings(ink, boxes)))
    for slot, *words in zip(missing, plain, uncrossed, strict=True):
        post = max(map(posterior, words), key=lambda p: max(p.values(), default=0.0))
        if not post:
            continue
        score += min(max(_gain(slot, post), -1.0), 2.0)
        names[slot.row, slot.column] = _likeliest(post)
    return replace(fit, score=score, names=names, places={**fit.places, **looked})


def _places(
    fit: LabelFit, aside_mm: float
) -> tuple[tuple[float, float], tuple[float, float]] | None:
    """Place of the names in the first column and in the others, one guessed from the other."""
    first, inner = fit.offset_mm, fit.inner_offset_mm
    if first is not None and inner is None:
        inner = (first[0] + aside_mm, first[1]) if first[0] < -0.5 * aside_mm else first
    if inner is not None and first is None:
        first = (inner[0] - aside_mm, inner[1]) if inner[0] < 0 else inner
    return None if first is None or inner is None else (first, inner)


def _expected_box(slot: Slot, place: tuple[float, float], right: bool, height_mm: float) -> Box:
    dx, dy = place
    width = height_mm * 0.75 * max(len(slot.name or "V1"), 1.5)
    left = slot.x_mm + dx - (width if right else 0.0)
    top = slot.y_mm + dy - height_mm / 2
    return Box(left, top, left + width, top + height_mm)

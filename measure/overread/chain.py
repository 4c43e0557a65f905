"""One ECG and everything that follows from it under a list of corrections.

Each stage remembers its last results by the corrections that reach it. So a moved boundary makes
the waves and the findings anew and leaves the tracing and the beats as they are, and an undo costs
nothing.
"""

import itertools
import math
from collections.abc import Callable, Hashable, Sequence
from dataclasses import fields, replace
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from digitize.tracing import Tracing
from measure.average import DominantBeat, average_beats
from measure.beats import Beats, find_beats
from measure.boundaries import Boundaries, Edges, find_boundaries
from measure.criteria import judge
from measure.intervals import measure_intervals
from measure.overread.corrections import (
    PAGE,
    PLACES,
    STROKES,
    BeatUse,
    Boundary,
    Correction,
    Ignore,
    Measured,
    Patient,
    Refused,
    in_force,
)
from measure.quantity import Quantity
from measure.reading import Person, Reading, cautions_of
from measure.rhythm import describe_rhythm
from measure.waves import measure_waves

if TYPE_CHECKING:
    from digitize.read import Stages

_SAME_BEAT_S = 0.1  # a beat found again after a correction of the page is the nearest to its time
_REMEMBERED = 16
_PAGES_REMEMBERED = 3  # each holds the ink of a page

Made = TypeVar("Made")


class Chain:
    """One ECG with the stages that lead from its page, or its samples, to its reading."""

    def __init__(self, tracing: Tracing, stages: "Stages | None", person: Person) -> None:
        """`stages` is None for an ECG that was digital all along."""
        self._found_stages = stages
        self._found = tracing
        self._person = person
        self._made: dict[Hashable, Any] = {}
        self._pages: dict[tuple[Correction, ...], Stages] = {}

    def reading(self, corrections: Sequence[Correction] = ()) -> Reading:
        """Return the reading under these corrections, computed from the first stage they reach.

        Raises
        ------
        Refused
            A correction cannot be applied; the text is fit to be shown.
        NoTrace
            No beat is left.
        """
        corrections = in_force(corrections)
        page = tuple(c for c in corrections if isinstance(c, PAGE))
        paper = (page, tuple(c for c in corrections if isinstance(c, (*PLACES, *STROKES))))
        chosen = tuple(c for c in corrections if isinstance(c, BeatUse))
        moved = tuple(c for c in corrections if isinstance(c, Boundary))
        person = self._person
        for c in corrections:
            if isinstance(c, Patient):
                person = Person(c.sex, c.age_years)
        tracing = self._once(("tracing", paper), lambda: self._tracing(*paper))
        for c in corrections:
            if isinstance(c, Measured) and not 0 <= c.panel < len(tracing.panels):
                raise Refused(f"there is no panel {c.panel}")
        found = self._once(("beats", paper), lambda: find_beats(tracing))
        beats = choose_beats(found, chosen)
        beat = self._once(("beat", paper, chosen), lambda: average_beats(tracing, beats))
        edges = self._once(("edges", paper, chosen), lambda: find_boundaries(beat, beats))
        return self._once(
            ("reading", paper, chosen, moved, person),
            lambda: _read_on(tracing, person, beats, beat, move_edges(edges, moved)),
        )

    def stages(self, corrections: Sequence[Correction] = ()) -> "Stages | None":
        """Return the stages of the page under these corrections, None where there is no page."""
        page = tuple(c for c in in_force(corrections) if isinstance(c, PAGE))
        return self._stages_under(page)

    def _stages_under(self, page: tuple[Correction, ...]) -> "Stages | None":
        if self._found_stages is None or not page:
            return self._found_stages
        if page in self._pages:
            self._pages[page] = self._pages.pop(page)  # used last, forgotten last
            return self._pages[page]
        from measure.overread.reread import corrected_stages  # image libraries for pages alone

        if isinstance(page[-1], Ignore):  # beside what is remembered, one more region
            begun, more = self._stages_under(page[:-1]), page[-1:]
        else:
            begun, more = self._found_stages, page
        assert begun is not None
        self._pages[page] = corrected_stages(begun, more)
        while len(self._pages) > _PAGES_REMEMBERED:
            self._pages.pop(next(iter(self._pages)))
        return self._pages[page]

    def _tracing(self, page: tuple[Correction, ...], placed: tuple[Correction, ...]) -> Tracing:
        if not page and not placed:
            return self._found
        stages = self._stages_under(page)
        if stages is None:
            raise Refused("this ECG has no page: only beats and boundaries can be corrected")
        from measure.overread.paper import corrected_tracing  # image libraries for pages alone

        return corrected_tracing(stages, placed)

    def _once(self, key: Hashable, make: Callable[[], Made]) -> Made:
        """What was made for this key, made now where it was not."""
        if key in self._made:
            self._made[key] = self._made.pop(key)  # used last, forgotten last
        else:
            self._made[key] = make()
            while len(self._made) > 5 * _REMEMBERED:
                self._made.pop(next(iter(self._made)))
        return self._made[key]


def choose_beats(beats: Beats, chosen: Sequence[BeatUse]) -> Beats:
    """Return the beats with some of them taken into the average or out of it.

    Raises
    ------
    Refused
        There is no beat at that time, or none would be left.
    """
    dominant = beats.dominant.copy()
    for choice in chosen:
        nearest = int(np.argmin(np.abs(beats.time_s - choice.time_s)))
        if abs(beats.time_s[nearest] - choice.time_s) > _SAME_BEAT_S:
            raise Refused(f"there is no beat at {choice.time_s:.2f} s")
        dominant[nearest] = choice.use
    if not dominant.any():
        raise Refused("one beat at least must stay in the average")
    return replace(beats, dominant=dominant)


def move_edges(found: Boundaries, moved: Sequence[Boundary]) -> Boundaries:
    """Return the boundaries with some of the overall ones where a person put them.

    Each keeps its standard error, as nothing says that a hand is surer; one that was not found
    takes that of the QRS onset. The QRS of single leads stays within the overall one.

    Raises
    ------
    Refused
        The boundaries would no longer follow one another.
    """
    if not moved:
        return found
    overall = found.overall
    if not overall.qrs_on_ms.known:
        raise Refused("no whole beat was averaged: there is nothing to bound")
    for move in moved:
        auto: Quantity = getattr(overall, move.edge)
        se = auto.se if auto.known else overall.qrs_on_ms.se
        source = auto if auto.known else overall.qrs_on_ms
        hand = Quantity(move.at_ms, se, "ms", source.leads, source.beats)
        overall = replace(overall, **{move.edge: hand})
    known = [getattr(overall, f.name).value for f in fields(Edges)]
    placed = [value for value in known if not math.isnan(value)]
    if any(b <= a for a, b in itertools.pairwise(placed)):
        raise Refused("the boundaries must follow one another: P, QRS, T")
    by_lead = {lead: _inside(own, overall) for lead, own in found.by_lead.items()}
    return replace(found, overall=overall, by_lead=by_lead)


def _inside(own: Edges, overall: Edges) -> Edges:
    """The QRS of one lead within the overall one."""
    if not own.qrs_on_ms.known:
        return own
    low, high = overall.qrs_on_ms.value, overall.qrs_off_ms.value
    onset, offset = (
        replace(q, value=min(max(q.value, low), high)) for q in (own.qrs_on_ms, own.qrs_off_ms)
    )
    return replace(own, qrs_on_ms=onset, qrs_off_ms=offset)


def _read_on(
    tracing: Tracing, person: Person, beats: Beats, beat: DominantBeat, boundaries: Boundaries
) -> Reading:
    """The reading from its boundaries on."""
    waves = measure_waves(beat, boundaries)
    rhythm = describe_rhythm(beats, boundaries, waves)
    intervals = measure_intervals(beat, boundaries, rhythm, waves)
    return Reading(
        tracing=tracing,
        person=person,
        beats=beats,
        rhythm=rhythm,
        beat=beat,
        boundaries=boundaries,
        waves=waves,
        intervals=intervals,
        findings=judge(waves, boundaries, intervals, rhythm, beat, person),
        cautions=cautions_of(tracing, beats, beat),
    )

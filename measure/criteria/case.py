"""What a definition may look at: one measured ECG, and ways to ask it about single leads."""

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from measure.average import DominantBeat
from measure.boundaries import Boundaries
from measure.criteria.decide import OVERALL, Limit, Look, every, look_at, unseen
from measure.levelled import about_level
from measure.quantity import Quantity
from measure.rhythm import Rhythm
from measure.waves import LeadWaves

if TYPE_CHECKING:
    from measure.reading import Person


@dataclass(frozen=True, eq=False)
class Case:
    """The measurements of one ECG, as the definitions use them."""

    waves: Mapping[str, LeadWaves]
    boundaries: Boundaries
    intervals: Mapping[str, Quantity]
    rhythm: Rhythm
    beat: DominantBeat
    person: "Person"

    def in_lead(self, lead: str, judge: Callable[[LeadWaves], Look]) -> Look:
        """Judge one lead; undecided where its QRS was not measured whole."""
        if lead not in self.waves:
            return unseen(lead, "the lead is not there or could not be read")
        waves = self.waves[lead]
        if waves.beats == 0:
            return unseen(lead, "no usual beat could be read in this lead")
        if not waves.qrs_complete:
            return unseen(lead, "the QRS is cut by the edge of its panel")
        return judge(waves)

    def in_leads(
        self, leads: Iterable[str], judge: Callable[[LeadWaves], Look]
    ) -> tuple[Look, ...]:
        """Judge several leads, one look each."""
        return tuple(self.in_lead(lead, judge) for lead in leads)

    def interval(self, key: str, limit: Limit, *, what: str) -> Look:
        """Compare one of the overall intervals with a threshold."""
        return look_at(self.intervals[key], limit, lead=OVERALL, what=what)

    def interval_within(self, key: str, low: Limit, high: Limit, *, what: str) -> Look:
        """Compare one of the overall intervals with both ends of a range."""
        return every([self.interval(key, low, what=what), self.interval(key, high, what=what)])

    def samples(self, lead: str) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Time after the overall QRS onset in ms, mV about the level there and its standard error.

        That of one lead; what raises whole beats raises their level too and is no part of it.
        """
        onset_ms = self.boundaries.overall.qrs_on_ms.value
        about = about_level(self.beat, self.beat.leads.index(lead), onset_ms)
        return about.time_ms - onset_ms, about.mv, about.se_mv

    def edge_se_ms(self, lead: str) -> float:
        """Standard error of where the QRS of one lead begins or ends, in ms."""
        edges = self.boundaries.by_lead.get(lead, self.boundaries.overall)
        own = max(edges.qrs_on_ms.se, edges.qrs_off_ms.se)
        return own if np.isfinite(own) else self.intervals["qrs_ms"].se

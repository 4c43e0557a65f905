"""Old against new: what changed between two or more readings of one person.

A change counts where it exceeds twice the joint standard error of the two values: one in twenty
pairs of unchanged ECGs would exceed that by chance. Whether the readings belong to one person, and
whether the electrodes stood in the same places, cannot be seen on paper.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from digitize import program_version
from digitize.tracing import LEADS
from measure.plain import json_lines, plain
from measure.quantity import Quantity, missing
from measure.questions import BLOCK_FAMILIES, FAMILIES
from measure.reading_files import quantity_of
from measure.wording import NOTICE, ONE_SE, nice, number

FORMAT = "millivellum comparison"
FORMAT_VERSION = 1
JOINT_SE = 2.0
COMPARED = (
    "rate_bpm",
    "pr_ms",
    "qrs_ms",
    "qt_ms",
    "qtc_bazett_ms",
    "qtc_fridericia_ms",
    "qtc_framingham_ms",
    "qtc_hodges_ms",
    "qrs_axis_deg",
    "t_axis_deg",
)
BLOCK_KEYS = tuple(key for name, keys in FAMILIES if name in BLOCK_FAMILIES for key in keys)

Verdict = Literal["larger", "smaller", "no sure change", "not comparable"]
BlockVerdict = Literal["new", "gone", "there in both", "in neither", "open"]


@dataclass(frozen=True, eq=False)
class Side:
    """One of the readings compared, taken from its plain content.

    `time_ms` is (n,), after the overall QRS onset; `mv` holds (n,) arrays by lead.
    """

    name: str
    date: str | None  # as given by the person, year-month-day
    intervals: Mapping[str, Quantity]
    results: Mapping[str, str]
    definitions: Mapping[str, str]
    time_ms: np.ndarray
    mv: Mapping[str, np.ndarray]
    source: Mapping[str, Any]


@dataclass(frozen=True)
class Change:
    """One interval in the first and the last reading, and their difference."""

    key: str
    old: Quantity
    new: Quantity
    difference: Quantity
    verdict: Verdict


@dataclass(frozen=True)
class BlockChange:
    """One definition in the first and the last reading."""

    key: str
    definition: str
    old: str
    new: str
    verdict: BlockVerdict


@dataclass(frozen=True, eq=False)
class Comparison:
    """Readings in order of time, and what changed from the first to the last."""

    sides: tuple[Side, ...]
    changes: tuple[Change, ...]
    blocks: tuple[BlockChange, ...]
    beat_change_mv: Mapping[str, float]  # largest difference within the QRS, lead by lead
    cautions: tuple[str, ...]


def side(document: Mapping[str, Any], name: str, date: str | None = None) -> Side:
    """One side of a comparison from the content of a reading file."""
    beat = document["beat"]
    mv = {lead: np.array(values, float) for lead, values in beat["mv"].items()}
    length = max((len(values) for values in mv.values()), default=0)
    return Side(
        name=name,
        date=date,
        intervals={key: quantity_of(entry) for key, entry in document["intervals"].items()},
        results={f["key"]: f["result"] for f in document["findings"]},
        definitions={f["key"]: f["definition"] for f in document["findings"]},
        time_ms=beat["start_ms"] + 1000.0 * np.arange(length) / beat["fs_hz"],
        mv=mv,
        source=document["source"],
    )


def compare(sides: Sequence[Side]) -> Comparison:
    """Compare the last of several readings with the first.

    Raises
    ------
    ValueError
        There are fewer than two readings.
    """
    if len(sides) < 2:
        raise ValueError("a comparison needs two readings or more")
    old, new = sides[0], sides[-1]
    return Comparison(
        sides=tuple(sides),
        changes=tuple(_change(key, old, new) for key in COMPARED),
        blocks=tuple(
            _block(key, old, new) for key in BLOCK_KEYS if key in old.results and key in new.results
        ),
        beat_change_mv=_beat_change(old, new),
        cautions=_cautions(old, new),
    )


def headline(comparison: Comparison) -> tuple[str, ...]:
    """What changed, in two or three sentences."""
    (qrs,) = [c for c in comparison.changes if c.key == "qrs_ms"]
    wording = {
        "larger": "QRS is wider",
        "smaller": "QRS is narrower",
        "no sure change": "QRS has not surely changed",
        "not comparable": "QRS cannot be compared",
    }
    lines = [f"{wording[qrs.verdict]}: {number(qrs.old)} before, {number(qrs.new)} now."]
    for verdict, opening in (
        ("new", "Criteria met now and not before: "),
        ("gone", "Criteria met before and not now: "),
        ("open", "Undecided in one or both: "),
    ):
        names = [nice(b.definition) for b in comparison.blocks if b.verdict == verdict]
        if names:
            lines.append(opening + "; ".join(names) + ".")
    return tuple(lines)


def verdict_text(change: Change) -> str:
    """The verdict in words that fit the quantity: an axis turns, a time grows or shrinks."""
    if change.difference.unit != "deg":
        return change.verdict
    turned = {"larger": "turned to the right", "smaller": "turned to the left"}
    return turned.get(change.verdict, change.verdict)


def comparison_json(comparison: Comparison) -> bytes:
    """The content of NAME.compare.json; its form is in `schema/compare.schema.json`."""
    return json_lines(
        plain(
            {
                "format": FORMAT,
                "format_version": FORMAT_VERSION,
                "version": program_version(),
                "notice": f"{NOTICE} {ONE_SE}",
                "readings": [
                    {"name": s.name, "date": s.date, "source": s.source, "intervals": s.intervals}
                    for s in comparison.sides
                ],
                "changes": comparison.changes,
                "blocks": comparison.blocks,
                "beat_change_mv": comparison.beat_change_mv,
                "cautions": comparison.cautions,
            }
        )
    )


def _change(key: str, old: Side, new: Side) -> Change:
    before, after = old.intervals[key], new.intervals[key]
    for name, part in ((old.name, before), (new.name, after)):
        if not part.known:
            why = missing(part.unit, f"{name}: {part.reason}")
            return Change(key, before, after, why, "not comparable")
    difference = after.value - before.value
    if after.unit == "deg":  # the short way round the circle
        difference = (difference + 180.0) % 360.0 - 180.0
    joint = math.hypot(before.se, after.se)
    verdict: Verdict = "no sure change"
    if math.isnan(joint):
        verdict = "not comparable"
    elif abs(difference) > JOINT_SE * joint:
        verdict = "larger" if difference > 0 else "smaller"
    leads = tuple(lead for lead in before.leads if lead in after.leads)
    beats = min(before.beats, after.beats)
    return Change(
        key, before, after, Quantity(difference, joint, after.unit, leads, beats), verdict
    )


def _block(key: str, old: Side, new: Side) -> BlockChange:
    before, after = old.results[key], new.results[key]
    verdicts: dict[tuple[str, str], BlockVerdict] = {
        ("not met", "met"): "new",
        ("met", "not met"): "gone",
        ("met", "met"): "there in both",
        ("not met", "not met"): "in neither",
    }
    verdict = verdicts.get((before, after), "open")
    return BlockChange(key, new.definitions[key], before, after, verdict)


def _beat_change(old: Side, new: Side) -> dict[str, float]:
    """Largest difference of the aligned beats within the longer of the two QRS, in mV."""
    lengths = [s.intervals["qrs_ms"].value for s in (old, new)]
    end_ms = np.nanmax(lengths) if np.isfinite(lengths).any() else 0.0
    raster_ms = np.arange(0.0, end_ms + 1.0, 2.0)
    changes = {}
    for lead in LEADS:
        if lead not in old.mv or lead not in new.mv:
            continue
        before, after = (np.interp(raster_ms, s.time_ms, s.mv[lead]) for s in (old, new))
        difference = np.abs(after - before)
        changes[lead] = float(difference.max()) if np.isfinite(difference).all() else math.nan
    return changes


def _cautions(old: Side, new: Side) -> tuple[str, ...]:
    lines = [
        "Whether these ECGs are of one person, and the electrodes stood in the same places, "
        "cannot be seen here: check both.",
    ]
    if old.source["sha256"] == new.source["sha256"] and old.source["page"] == new.source["page"]:
        lines.append("LOOK: both readings are of the same page.")
    absent = [lead for lead in LEADS if lead not in old.mv or lead not in new.mv]
    if absent:
        lines.append(f"Not comparable, missing in one of them: {', '.join(absent)}.")
    return tuple(lines)

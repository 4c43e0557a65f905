"""What the page shows of one ECG, as plain content for JSON.

Numbers go out in the words of table and report, places in millimetres of paper; the page adds
nothing to them.
"""

from collections.abc import Mapping
from typing import Any

import numpy as np

from digitize.tracing import Panel, Tracing
from measure.criteria.finding import Clause, Finding
from measure.overread.calipers import measure_between
from measure.overread.corrections import Measured, counted, in_force
from measure.overread.session import Session
from measure.overread.wording import FIELDS, on_page
from measure.plain import plain
from measure.questions import FAMILIES, answer
from measure.reading import Reading
from measure.reference import usual
from measure.wording import NOTICE, clause_lines, nice, number

DOUBT_MV = 0.1  # a sample with a larger standard error is drawn as doubtful (common practice)
_DECIMALS = 3  # of millimetres and seconds


def overview(session: Session) -> dict[str, Any]:
    """Everything that the page shows of one ECG."""
    reading, automatic = session.reading(), session.automatic
    tracing = reading.tracing
    answers = answer(reading)
    return plain(
        {
            "revision": session.revision,
            "notice": NOTICE,
            "name": f"{tracing.source.file_name}, page {tracing.source.page}",
            "headline": answers.headline,
            "signed": session.signed,
            "signatures": [
                {k: s[k] for k in ("name", "comment", "when")} for s in session.signatures
            ],
            "corrections": _corrections(session),
            "measured": _measured(session, tracing),
            "can_redo": bool(session.undone),
            "scale": {
                "speed_mm_s": tracing.speed_mm_s,
                "gain_mm_mv": tracing.gain_mm_mv,
                "layout": tracing.layout,
                "timing": tracing.timing,
            },
            "person": reading.person,
            "paper": _paper(session),
            "panels": _panels(tracing),
            "doubts": _doubts(tracing),
            "cautions": reading.cautions,
            "by_eye": answers.by_eye,
            "intervals": _intervals(reading, automatic),
            "findings": _findings(reading, automatic),
            "beats": _beats(reading),
            "beat": _beat(reading, automatic),
        }
    )


def _corrections(session: Session) -> list[dict[str, Any]]:
    """What was corrected, and whether a later step left it void."""
    counts = counted([step.correction for step in session.steps])
    return [
        {**step.plain, "void": not counts_too}
        for step, counts_too in zip(session.steps, counts, strict=True)
    ]


def _measured(session: Session, tracing: Tracing) -> list[dict[str, Any]]:
    """Caliper results that were kept, on the scale that their panel has now."""
    kept = in_force([step.correction for step in session.steps])
    return [
        {"points": c.points, **measure_between(tracing.panels[c.panel], c.points)}
        for c in kept
        if isinstance(c, Measured)
    ]


def _paper(session: Session) -> dict[str, Any] | None:
    """Where the flattened and the scanned picture lie; of a tracing without its page, the paper."""
    stages = session.stages()
    if stages is None:
        return _paper_of(session.automatic.tracing)
    raster, (rows, cols) = stages.sheet.raster, stages.sheet.pixels.shape[:2]
    half = 0.5 / raster.px_per_mm
    left_mm, top_mm = raster.left_mm - half, raster.top_mm - half
    corners = np.array([[left_mm, top_mm], [raster.x_mm(cols) - half, raster.y_mm(rows) - half]])
    return {
        "turn_deg": stages.tracing.geometry["turn_deg"],  # after another turn it looks otherwise
        "flat": {"box": [*corners[0], *(corners[1] - corners[0])], "px": [cols, rows]},
        "scan": {"px": list(stages.page.pixels.shape[1::-1])},
        "ruled_mm": stages.grid.ruled_mm,
    }


def _paper_of(tracing: Tracing) -> dict[str, Any] | None:
    """The paper that a tracing was read from; None for an ECG that was digital all along."""
    if "ruled_mm" not in tracing.geometry:
        return None
    left, top, right, bottom = ruled = tracing.geometry["ruled_mm"]
    return {
        "turn_deg": tracing.geometry["turn_deg"],
        "flat": {"box": [left, top, right - left, bottom - top], "px": None},
        "ruled_mm": ruled,
    }


def _panels(tracing: Tracing) -> list[dict[str, Any]]:
    """The panels with their traces on the paper."""
    facts = tracing.geometry.get("panels", [])
    panels = []
    for k, panel in enumerate(tracing.panels):
        entry: dict[str, Any] = {
            "number": k,
            "lead": panel.lead,
            "lead_source": panel.lead_source,
            "strip": panel.strip,
            "row": panel.row,
            "start_s": panel.start_s,
            "speed_mm_s": panel.speed_mm_s,
            "gain_mm_mv": panel.gain_mm_mv,
            "box_mm": panel.box_mm,
            "notes": panel.notes,
        }
        if k < len(facts):
            entry |= _trace(panel, facts[k])
        panels.append(entry)
    return panels


def _trace(panel: Panel, fact: Mapping[str, Any]) -> dict[str, Any]:
    """Each sample on the paper, None where it is missing, and whether it is doubtful."""
    sign = -1.0 if fact["upside_down"] else 1.0
    y_mm = fact["baseline_mm"] - sign * panel.mv * panel.gain_mm_mv
    return {
        "upside_down": fact["upside_down"],
        "baseline_mm": fact["baseline_mm"],
        "step_mm": panel.speed_mm_s / panel.fs_hz,
        "y_mm": np.round(y_mm, _DECIMALS),
        "doubtful": np.flatnonzero(panel.sigma_mv > DOUBT_MV),
    }


def _doubts(tracing: Tracing) -> list[dict[str, Any]]:
    """Self-checks that failed or could not be judged, the failed ones first, with their panels."""
    open_ = [check for check in tracing.checks if check.passed is not True]
    return [
        {
            "message": on_page(check.message),
            "field": FIELDS.get(check.name),
            "failed": check.passed is False,
            "panels": [k for k, p in enumerate(tracing.panels) if p.lead in check.leads],
        }
        for check in sorted(open_, key=lambda check: check.passed is None)
    ]


def _intervals(reading: Reading, automatic: Reading) -> list[dict[str, Any]]:
    """Intervals in words, with the automatic value where it differs."""
    ranges = usual(reading.person.sex)
    rows = []
    for key, quantity in reading.intervals.items():
        now, before = number(quantity), number(automatic.intervals[key])
        rows.append(
            {
                "key": key,
                "label": ranges[key].label,
                "now": now,
                "automatic": before if before != now else None,
                "usual": ranges[key].text,
                "place": ranges[key].place(quantity),
            }
        )
    return rows


def _findings(reading: Reading, automatic: Reading) -> list[dict[str, Any]]:
    """Every definition by family, with its clauses and what it was before any correction."""
    before = {finding.key: finding.result for finding in automatic.findings}
    by_key = {finding.key: finding for finding in reading.findings}
    return [
        {
            "family": family,
            "findings": [_finding(by_key[key], before.get(key)) for key in keys if key in by_key],
        }
        for family, keys in FAMILIES
    ]


def _finding(finding: Finding, before: str | None) -> dict[str, Any]:
    return {
        "key": finding.key,
        "definition": nice(finding.definition),
        "source": finding.source,
        "result": finding.result,
        "automatic": before if before != finding.result else None,
        "cautions": finding.cautions,
        "clauses": [_clause(clause) for clause in finding.clauses],
    }


def _clause(clause: Clause) -> dict[str, Any]:
    return {
        "text": nice(clause.text),
        "result": clause.result,
        "lines": clause_lines(clause),
        "places": [
            {"lead": seen.lead, "time_ms": seen.time_ms, "what": seen.what}
            for seen in clause.evidence
        ],
    }


def _beats(reading: Reading) -> list[dict[str, Any]]:
    """Every beat with its time, its kind, and whether it is averaged."""
    beats = reading.beats
    return [
        {"time_s": time_s, "kind": kind, "averaged": averaged}
        for time_s, kind, averaged in zip(beats.time_s, beats.kind, beats.dominant, strict=True)
    ]


def _beat(reading: Reading, automatic: Reading) -> dict[str, Any]:
    """The dominant beat over its fiducial point, its boundaries and the automatic ones."""
    beat = reading.beat
    names = ("p_on_ms", "p_off_ms", "qrs_on_ms", "qrs_off_ms", "t_off_ms")

    def edges(of: Reading) -> dict[str, float]:
        return {name: getattr(of.boundaries.overall, name).value for name in names}

    return {
        "start_ms": beat.time_ms[0],
        "step_ms": 1000.0 / beat.fs_hz,
        "at_s": beat.at_s,
        "mv": {
            lead: np.round(mv, 4)
            for lead, mv, count in zip(beat.leads, beat.mv, beat.beats, strict=True)
            if count
        },
        "beats": dict(zip(beat.leads, beat.beats, strict=True)),
        "shapes": {lead: waves.shape for lead, waves in reading.waves.items()},
        "edges": edges(reading),
        "automatic": edges(automatic),
    }

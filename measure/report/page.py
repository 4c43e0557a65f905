"""The report as HTML: sections in the order of a reader's questions, nothing from outside."""

import base64
import dataclasses
import io
import json
from html import escape
from typing import Any

from digitize import program_version
from digitize.options import Options
from digitize.tracing import LEADS
from measure.criteria.finding import Clause, Finding
from measure.questions import (
    BLOCK_FAMILIES,
    Answers,
    Measured,
    answer,
    evidence_by_clause,
    refusal,
    shown_in_full,
)
from measure.reading import Reading
from measure.report.beats import beats_caption, draw_beats
from measure.report.html import bullets, document, mark, prose, section, table
from measure.waves import LeadWaves
from measure.wording import (
    NOTICE,
    ONE_SE,
    SIGNS,
    nice,
    number,
    origin,
    signed,
)


def report(reading: Reading, *, overlay_png: bytes | None = None) -> str:
    """Return the report of one reading as a complete HTML document.

    Parameters
    ----------
    reading : Reading
        What was measured.
    overlay_png : bytes, optional
        The page with the found trace drawn over it; it is embedded.
    """
    answers = answer(reading)
    source = reading.tracing.source
    title = f"{source.file_name}, page {source.page}"
    sections = (
        section("1 Can the tracing be trusted?", _trust(answers, overlay_png)),
        section(
            "2 What is the rhythm?", prose(answers.rhythm) + _beside(_rows(answers.rhythm_rows))
        ),
        '<div class="clear"></div>',
        section(
            "3 How wide is the QRS, what is its shape, what follows it?",
            _rows(answers.width_rows) + _waves(reading),
        ),
        section("4 Which pattern?", _patterns(answers)),
        section("5 On what evidence?", _beats(reading) + _evidence(answers)),
        section("6 What to check by eye", bullets(answers.by_eye)),
    )
    body = "".join(sections) + _footer(reading)
    return document(f"ECG reading: {title}", answers.headline, body)


def _trust(answers: Answers, overlay_png: bytes | None) -> str:
    if overlay_png is None:
        return bullets(answers.trust)
    data = base64.b64encode(_lighter(overlay_png)).decode("ascii")
    return (
        '<figure class="overlay"><img alt="The page with the found trace, panels and leads drawn '
        f'over it" src="data:image/webp;base64,{data}"><figcaption>The found trace over the page: '
        f"it must lie on the ink everywhere.</figcaption></figure>{bullets(answers.trust)}"
    )


def _lighter(png: bytes) -> bytes:
    """The overlay as WebP: a tenth of the size; the exact picture stands in its own file."""
    from PIL import Image  # only where there is a picture: a digital ECG loads no image library

    stream = io.BytesIO()
    with Image.open(io.BytesIO(png)) as picture:
        picture.convert("RGB").save(stream, "WEBP", quality=80)
    return stream.getvalue()


def _beside(table_html: str) -> str:
    """A table that may stand beside the overlay in print."""
    return f'<div class="beside">{table_html}</div>'


def _rows(rows: tuple[Measured, ...]) -> str:
    """Intervals beside their usual range; a source that all ranges share is named once."""
    sources = {row.usual.source for row in rows if row.usual.source}
    shared = f" ({sources.pop()})" if len(sources) == 1 else ""
    headings = ["", "measured", "from", f"usual in adults{shared}"]
    body = []
    for row in rows:
        off = row.place not in ("", "within")
        usual = f"{row.place} ({row.usual.text})" if off else row.usual.text
        cells = (
            f"<td>{escape(row.usual.label)}</td>"
            f'<td class="{"number" if row.quantity.known else "missing"}">'
            f"{escape(number(row.quantity))}</td>"
            f'<td class="plain">{escape(origin(row.quantity))}</td>'
            f'<td class="plain{" off" if off else ""}">{escape(usual)}</td>'
        )
        source = "" if shared else f'<td class="small">{escape(row.usual.source)}</td>'
        body.append(f"<tr>{cells}{source}</tr>")
    return table(headings if shared else [*headings, "source of the range"], body)


def _patterns(answers: Answers) -> str:
    """For each family what is met, what is open and what is not met."""
    rows = []
    for name, group in answers.families:
        first = escape(name)
        for result in ("met", "undecided", "not met"):
            members = [f for f in group if f.result == result]
            # One name of the axis says that the others do not fit; a block's "not met" is news.
            implied = result == "not met" and not first and name not in BLOCK_FAMILIES
            if members and not implied:
                names = "; ".join(_named(f, name) for f in members)
                kind = "small" if result == "not met" else ""
                cell = f'<td class="{kind}">{escape(names)}</td>'
                rows.append(f"<tr><td>{first}</td><td>{mark(result)}</td>{cell}</tr>")
                first = ""
    note = (
        '<p class="small">“Met” means: meets the criteria of the published definition. In '
        "brackets: the first clause that is not met; the file NAME.reading.json has them all.</p>"
    )
    return table(("", "result", "definition"), rows) + note


def _named(finding: Finding, family: str) -> str:
    """The definition, and for a block that is not met what decided it."""
    if finding.result == "not met" and family in BLOCK_FAMILIES:
        return refusal(finding)
    return nice(finding.definition)


def _beats(reading: Reading) -> str:
    caption = beats_caption(reading)
    return f"<figure>{draw_beats(reading)}<figcaption>{caption}</figcaption></figure>"


def _evidence(answers: Answers) -> str:
    above: dict[str, str] = {}
    findings = "".join(_finding(finding, above) for finding in shown_in_full(answers.families))
    return f'<div class="columns">{findings}</div>'


def _finding(finding: Finding, above: dict[str, str]) -> str:
    clauses = "".join(_clause(*shown) for shown in evidence_by_clause(finding, above))
    return (
        f'<div class="finding"><h3>{mark(finding.result)}: {escape(nice(finding.definition))} '
        f'<span class="source">{escape(finding.source)}</span></h3>'
        f"{clauses}</div>"
    )


def _clause(clause: Clause, words: str) -> str:
    note = "" if clause.required else " (not required)"
    text = f"{SIGNS[clause.result]} {escape(nice(clause.text))}{note}"
    return f"<p><b>{text}</b> {escape(words)}</p>"


def _waves(reading: Reading) -> str:
    known = [lead for lead in LEADS if lead in reading.waves]
    rows = [
        _wave_row(reading.waves[lead])
        for lead in (*known, *sorted(set(reading.waves) - set(LEADS)))
    ]
    headings = (
        "",
        "shape",
        "waves: mV (ms)",
        "R peak",
        "ST at J, 40, 60, 80",
        "T mV",
        "beats",
    )
    return f'<div class="waves">{table(headings, rows)}</div>'


def _wave_row(waves: LeadWaves) -> str:
    if waves.beats == 0 or not waves.qrs_complete:
        why = "no usual beat" if waves.beats == 0 else "QRS cut by the edge of the panel"
        return f'<tr><td>{escape(waves.lead)}</td><td colspan="6">not measured: {why}</td></tr>'
    deflections = [
        f"{d.name} {d.amplitude_mv:+.2f} ({d.duration_ms:.0f})" for d in waves.deflections
    ]
    bends = [f"{n.kind} at {n.peak_ms:.0f} ms" for n in waves.notches]
    peak = number(waves.r_peak_time_ms) if waves.r_peak_time_ms.known else "–"
    cells = (
        waves.lead,
        waves.shape,
        "; ".join(deflections + bends),
        peak,
        " ".join(signed(waves.st_mv[after]) for after in sorted(waves.st_mv)),
        signed(waves.t_mv),
        str(waves.beats),
    )
    kinds = ("", "", "", "plain", "plain", "plain", "")
    return (
        "<tr>"
        + "".join(
            f'<td class="{kind}">{escape(cell)}</td>'
            for kind, cell in zip(kinds, cells, strict=True)
        )
        + "</tr>"
    )


def _footer(reading: Reading) -> str:
    """Where this came from, in full."""
    tracing, person = reading.tracing, reading.person
    said = {"sex": person.sex or "not given", "age": person.age_years or "not given"}
    facts = (
        f"Source: {tracing.source.file_name}, page {tracing.source.page}, SHA-256 "
        f"{tracing.source.sha256}.",
        f"Program: millivellum {program_version()}. Given options: {_given(tracing.options)}.",
        f"Patient: sex {said['sex']}, age {said['age']}.",
        f"Corrections: {_flat(tracing.corrections) if tracing.corrections else 'none'}.",
        ONE_SE,
        NOTICE,
    )
    return f"<footer>{escape(' '.join(facts))}</footer>"


def _given(options: dict[str, Any]) -> str:
    """The options that a person gave."""
    defaults = dataclasses.asdict(Options())
    given = {key: value for key, value in options.items() if value != defaults.get(key)}
    return _flat(given) if given else "none"


def _flat(thing: object) -> str:
    return json.dumps(thing, ensure_ascii=False, sort_keys=True, default=str)

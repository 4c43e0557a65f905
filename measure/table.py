"""The reading in the terminal, arranged by question."""

from rich import box
from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from digitize.tracing import LEADS
from measure.compare import Comparison, headline, verdict_text
from measure.questions import BLOCK_FAMILIES, Answers, Measured, answer, refusal, shown_in_full
from measure.reading import Reading
from measure.reference import usual
from measure.waves import LeadWaves
from measure.wording import NOTICE, ONE_SE, SIGNS, clause_lines, nice, number, origin, signed

_STYLES = {"met": "bold", "undecided": "italic", "not met": "dim"}


def print_reading(reading: Reading, console: Console) -> None:
    """Print one reading as answers to the questions of a reader."""
    answers = answer(reading)
    source = reading.tracing.source
    console.print()
    console.rule(Text(f"{source.file_name}, page {source.page}"), align="left")
    for line in answers.headline:
        console.print(Text(line))
    for title, body in _sections(reading, answers):
        console.print()
        console.print(Text(title, style="bold underline"))
        console.print(Padding(body, (0, 0, 0, 2)))
    console.print()
    console.print(Text(f"{NOTICE} {ONE_SE}", style="bold"))


def print_comparison(comparison: Comparison, console: Console) -> None:
    """Print what changed between two readings or more."""
    labels = usual(None)
    console.print()
    for line in headline(comparison):
        console.print(Text(line))
    table = _plain_table("", *(s.date or s.name for s in comparison.sides), "difference", "")
    for change in comparison.changes:
        values = [number(s.intervals[change.key]) for s in comparison.sides]
        table.add_row(
            labels[change.key].label, *values, number(change.difference), verdict_text(change)
        )
    console.print(table)
    console.print(_lines(comparison.cautions))
    console.print(Text(f"{NOTICE} {ONE_SE}", style="bold"))


def _sections(reading: Reading, answers: Answers) -> list[tuple[str, RenderableType]]:
    return [
        ("Can the tracing be trusted?", _lines(answers.trust)),
        ("What is the rhythm?", Group(_lines(answers.rhythm), _intervals(answers.rhythm_rows))),
        (
            "How wide is the QRS, what is its shape, what follows it?",
            Group(_intervals(answers.width_rows), Text(), _waves(reading)),
        ),
        ("Which pattern?", _patterns(answers)),
        ("On what evidence?", _evidence(answers)),
        ("What to check by eye", _lines(answers.by_eye)),
    ]


def _lines(lines: tuple[str, ...]) -> RenderableType:
    return Group(*(Text(f"· {line}") for line in lines))


def _intervals(rows: tuple[Measured, ...]) -> Table:
    table = _plain_table("", "measured", "from", "usual in adults", "source")
    for row in rows:
        off = row.place not in ("", "within")
        remark = f"{row.place} (usual: {row.usual.text})" if off else row.usual.text
        table.add_row(
            row.usual.label,
            Text(number(row.quantity), style="bold" if off else ""),
            origin(row.quantity),
            Text(remark, style="bold" if off else ""),
            row.usual.source,
        )
    return table


def _patterns(answers: Answers) -> Table:
    """What is met or open line by line; what is not met in one line for each family."""
    table = _plain_table("", "", "definition")
    for name, group in answers.families:
        first = name
        for finding in group:
            if finding.result != "not met":
                result = f"{SIGNS[finding.result]} {finding.result}"
                style = _STYLES[finding.result]
                table.add_row(first, Text(result, style), Text(nice(finding.definition), style))
                first = ""
        refused = "; ".join(
            refusal(f) if name in BLOCK_FAMILIES else nice(f.definition)
            for f in group
            if f.result == "not met"
        )
        if refused:
            table.add_row(first, Text(f"{SIGNS['not met']} not met", "dim"), Text(refused, "dim"))
    return table


def _evidence(answers: Answers) -> RenderableType:
    """Every clause of what is met or open."""
    table = _plain_table("", "clause", "evidence")
    for finding in shown_in_full(answers.families):
        title = Text(nice(f"{finding.definition}: {finding.result}"), style="bold")
        table.add_row(SIGNS[finding.result], title, Text(finding.source, style="dim"))
        for clause in finding.clauses:
            if clause.result == "met" and not clause.evidence:
                continue
            note = "" if clause.required else " (not required)"
            text = f"{SIGNS[clause.result]} {nice(clause.text)}{note}"
            table.add_row("", Text(text), "\n".join(clause_lines(clause)))
    return table


def _waves(reading: Reading) -> Table:
    table = _plain_table("", "shape", "waves: mV, ms", "R peak", "ST at J, +60", "T", "beats")
    known = [lead for lead in LEADS if lead in reading.waves]
    for lead in (*known, *sorted(set(reading.waves) - set(LEADS))):
        waves = reading.waves[lead]
        if waves.beats == 0 or not waves.qrs_complete:
            table.add_row(lead, "not measured", "", "", "", "", str(waves.beats))
            continue
        table.add_row(
            lead,
            waves.shape,
            _deflections(waves),
            number(waves.r_peak_time_ms) if waves.r_peak_time_ms.known else "-",
            " ".join(signed(waves.st_mv[after]) for after in (0, 60)),
            signed(waves.t_mv),
            str(waves.beats),
        )
    return table


def _deflections(waves: LeadWaves) -> str:
    found = [f"{d.name} {d.amplitude_mv:+.2f}, {d.duration_ms:.0f}" for d in waves.deflections]
    bends = [f"{n.kind} at {n.peak_ms:.0f} ms" for n in waves.notches]
    return "; ".join(found + bends)


def _plain_table(*headings: str) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, padding=(0, 1), show_edge=False)
    for heading in headings:
        table.add_column(heading, overflow="fold")
    return table

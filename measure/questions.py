"""What a reader asks of an ECG, in order, with the answers from a reading.

Table and report show the same answers: can the tracing be trusted, what is the rhythm, how wide is
the QRS, which pattern, on what evidence, what to check by eye.
"""

from collections.abc import Iterator
from dataclasses import dataclass

from digitize.tracing import LEADS, Known
from measure.criteria.decide import OVERALL
from measure.criteria.finding import Clause, Finding
from measure.quantity import Quantity
from measure.reading import Reading
from measure.reference import Usual, usual
from measure.wording import clause_lines, deciding, nice, number

# The questions that findings answer, with the keys that belong to each.
FAMILIES: tuple[tuple[str, tuple[str, ...]], ...] = (
    (
        "Left bundle branch",
        (
            "lbbb_european_2013",
            "lbbb_european_2021",
            "lbbb_strict",
            "lbbb_aha",
            "lbbb_aha_incomplete",
            "lbbb_bedside",
        ),
    ),
    ("Right bundle branch", ("rbbb_complete", "rbbb_incomplete")),
    ("Fascicles", ("lafb", "lpfb", "rbbb_lafb", "rbbb_lpfb")),
    ("Neither pattern", ("nonspecific_delay",)),
    (
        "With left bundle branch block",
        (
            "crt_qrs_150",
            "crt_qrs_130_149",
            "crt_qrs_below_130",
            "ischaemia_in_lbbb_original",
            "ischaemia_in_lbbb_modified",
        ),
    ),
    ("Axis", ("axis_normal", "axis_left", "axis_left_marked", "axis_right", "axis_right_marked")),
    ("Atria to ventricles", ("pr_long", "pr_short", "short_pr_slurred_onset")),
    ("Repolarisation", ("qtc_long", "qtc_long_wide_qrs")),
    ("Voltage", ("voltage_sokolow_lyon", "voltage_cornell")),
)
BLOCK_FAMILIES = tuple(name for name, _ in FAMILIES[:4])
# Clauses on the block itself, of what is judged only within it or only without it.
ABOUT_BLOCK = (
    "left bundle branch block by one of",
    "(precondition) no left bundle branch block",
)
RHYTHM_KEYS = ("rate_bpm", "rr_ms", "p_ms", "pr_ms", "p_axis_deg")
WIDTH_KEYS = (
    "qrs_ms",
    "qrs_axis_deg",
    "qt_ms",
    "jt_ms",
    "qtc_bazett_ms",
    "qtc_fridericia_ms",
    "qtc_framingham_ms",
    "qtc_hodges_ms",
    "t_axis_deg",
)
_ORIGIN = {
    "found": "measured on the page",
    "printed": "read from the page",
    "given": "given by the person",
    "assumed": "ASSUMED, not seen on the page",
}


@dataclass(frozen=True)
class Measured:
    """One interval beside its usual range; `place` says on which side of it the value lies."""

    usual: Usual
    quantity: Quantity
    place: str


@dataclass(frozen=True)
class Answers:
    """The content of table and report."""

    headline: tuple[str, ...]
    trust: tuple[str, ...]  # doubts first
    rhythm: tuple[str, ...]
    rhythm_rows: tuple[Measured, ...]
    width_rows: tuple[Measured, ...]
    families: tuple[tuple[str, tuple[Finding, ...]], ...]
    by_eye: tuple[str, ...]


def shown_in_full(
    families: tuple[tuple[str, tuple[Finding, ...]], ...],
) -> tuple[Finding, ...]:
    """The findings whose every clause is worth a look: those met or open.

    Left out are those that rest on overall intervals alone, whose numbers stand in the tables,
    and those withheld because a left bundle branch block is, or is not, surely there.
    """
    return tuple(
        finding
        for _, group in families
        for finding in group
        if finding.result != "not met" and _rests_on_leads(finding) and not _withheld(finding)
    )


def evidence_by_clause(finding: Finding, above: dict[str, str]) -> Iterator[tuple[Clause, str]]:
    """Each clause that has something to show, and its evidence in words.

    `above` remembers under which definition a piece of evidence stands already: it is only
    referred to from there on.
    """
    for clause in finding.clauses:
        if not clause.evidence and clause.result == "met":
            continue
        words = "; ".join(clause_lines(clause))
        first = above.setdefault(words, finding.definition)
        repeated = first != finding.definition and len(words) > len(first)
        yield clause, f"as above: {first}" if repeated else words


def _rests_on_leads(finding: Finding) -> bool:
    return any(seen.lead != OVERALL for c in finding.clauses for seen in c.evidence)


def _withheld(finding: Finding) -> bool:
    """Whether it waits for, or gives way to, a left bundle branch block."""
    return any(c.result != "met" and c.text.startswith(ABOUT_BLOCK) for c in finding.clauses)


def refusal(finding: Finding) -> str:
    """A definition that is not met, with the first clause that decided it."""
    return nice(f"{finding.definition} (not: {deciding(finding)[0].text})")


def answer(reading: Reading) -> Answers:
    """Sort one reading into the questions it answers."""
    return Answers(
        headline=_headline(reading),
        trust=_trust(reading),
        rhythm=_rhythm(reading),
        rhythm_rows=_rows(reading, RHYTHM_KEYS),
        width_rows=_rows(reading, WIDTH_KEYS),
        families=_families(reading.findings),
        by_eye=_by_eye(reading),
    )


def _headline(reading: Reading) -> tuple[str, ...]:
    """Two or three sentences: rhythm and QRS, what is met, what is open."""
    qrs, rate = reading.intervals["qrs_ms"], reading.intervals["rate_bpm"]
    lines = [f"QRS {number(qrs)}. {_capital(reading.rhythm.statement)}, rate {number(rate)}."]
    if doubted := _doubted(reading):
        lines.append(f"LOOK FIRST: the tracing is in doubt ({doubted}); see question 1.")
    families = _families(reading.findings)
    blocks = [f for name, group in families if name in BLOCK_FAMILIES for f in group]
    for result, opening in (
        ("met", "Meets the criteria of: "),
        ("undecided", "Undecided: "),
    ):
        names = [f.definition for f in blocks if f.result == result]
        if names:
            lines.append(opening + "; ".join(names) + ".")
    if not any(f.result != "not met" for f in blocks):
        lines.append("Meets the criteria of no conduction block that is judged here.")
    return tuple(lines)


def _doubted(reading: Reading) -> str:
    """What the failed self-checks concern, in words; empty where none failed."""
    failed = [check for check in reading.tracing.checks if check.passed is False]
    leads = dict.fromkeys(lead for check in failed for lead in check.leads)
    if leads:
        return f"leads {', '.join(leads)}: findings that rest on them may be wrong"
    return "a self-check failed" if failed else ""


def _trust(reading: Reading) -> tuple[str, ...]:
    tracing = reading.tracing
    failed = [c.message for c in tracing.checks if c.passed is False]
    unjudged = [c.message for c in tracing.checks if c.passed is None]
    absent = [lead for lead in LEADS if lead not in tracing.leads]
    cut = [w.lead for w in reading.waves.values() if not w.qrs_complete and w.beats > 0]
    lines = [f"LOOK: {message}" for message in failed]
    if absent:
        lines.append(f"LOOK: not on the page or not read: {', '.join(absent)}.")
    if cut:
        lines.append(f"QRS cut by the edge of the panel, not measured in: {', '.join(cut)}.")
    lines += [
        "A digital recording: no scale was taken from paper."
        if tracing.layout.value == "digital"
        else f"Paper speed {_known(tracing.speed_mm_s, 'mm/s')}; gain "
        f"{_known(tracing.gain_mm_mv, 'mm/mV')}; layout {_known(tracing.layout, '')}.",
        _beats(reading),
    ]
    lines += [f"Not judged: {message}" for message in unjudged]
    passed = sum(c.passed is True for c in tracing.checks)
    if passed:
        lines.append(f"{passed} of {len(tracing.checks)} self-checks of the tracing passed.")
    return tuple(lines)


def _known(known: Known, unit: str) -> str:
    value = known.value
    shown = f"{value:g} {unit}" if isinstance(value, float) else f"{value} {unit}".strip()
    return f"{shown} ({_ORIGIN[known.source]})"


def _beats(reading: Reading) -> str:
    counts = [count for count in reading.beat.beats if count]
    if not counts:
        return "LOOK: no usual beat could be averaged."
    span = f"{min(counts)}" if min(counts) == max(counts) else f"{min(counts)} to {max(counts)}"
    return f"Measured on the dominant beat: {span} usual beats in each of {len(counts)} leads."


def _rhythm(reading: Reading) -> tuple[str, ...]:
    rhythm = reading.rhythm
    regular = {True: "regular", False: "irregular", None: "regularity not judged"}[rhythm.regular]
    lines = [f"{_capital(rhythm.statement)}; {regular}.", *(_capital(w) for w in rhythm.why)]
    if rhythm.premature or rhythm.odd:
        lines.append(
            f"Set aside before measuring: {rhythm.premature} early, {rhythm.odd} of odd shape."
        )
    if rhythm.paced:
        lines.append("Pacing spikes are seen: the definitions of block do not apply.")
    return tuple(lines)


def _rows(reading: Reading, keys: tuple[str, ...]) -> tuple[Measured, ...]:
    ranges = usual(reading.person.sex)
    return tuple(
        Measured(ranges[key], reading.intervals[key], ranges[key].place(reading.intervals[key]))
        for key in keys
    )


def _families(findings: tuple[Finding, ...]) -> tuple[tuple[str, tuple[Finding, ...]], ...]:
    by_key = {f.key: f for f in findings}
    return tuple(
        (name, tuple(by_key[key] for key in keys if key in by_key)) for name, keys in FAMILIES
    )


def _by_eye(reading: Reading) -> tuple[str, ...]:
    """What a person should look at: cautions, then what would settle the open definitions."""
    waiting: dict[str, list[str]] = {}
    notes: dict[str, list[str]] = {}
    for finding in reading.findings:
        if finding.result == "undecided":
            settle = [c.settle for c in finding.clauses if c.result == "undecided" and c.settle]
            waiting.setdefault("; ".join(dict.fromkeys(settle)), []).append(finding.definition)
        for caution in finding.cautions if finding.result == "met" else ():
            notes.setdefault(caution, []).append(finding.definition)
    lines = list(reading.cautions)
    lines += [f"Open: {', '.join(names)}. To settle it: {how}." for how, names in waiting.items()]
    lines += [f"{_capital(', '.join(names))}: {note}" for note, names in notes.items()]
    return tuple(nice(line) for line in dict.fromkeys(lines))


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]

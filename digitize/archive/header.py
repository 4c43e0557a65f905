"""The printing outside the traces as text, and the fields that a person's patterns find in it.

Kept only where it is asked for. Text is what was recognised, slips included; nothing is taken for a
name or a date unless a pattern of the person says so.
"""

import re
from collections import defaultdict
from collections.abc import Sequence
from pathlib import Path

from digitize.drawn_words import drawn_printing
from digitize.errors import UnreadableFile, at
from digitize.read import Stages
from digitize.redact import names_lead, states_run
from digitize.sheet import Box
from digitize.tracing import Panel
from digitize.words import read_printing


def read_patterns(path: Path) -> tuple[str, ...]:
    """Return the patterns of a file: one regular expression a line, its named groups the fields.

    Empty lines and those that begin with # are left out.

    Raises
    ------
    UnreadableFile
        It cannot be read, or a line is no such expression.
    """
    try:
        lines = path.read_text("utf-8-sig").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        reason = getattr(error, "strerror", None) or "it is no text"
        raise at(UnreadableFile(f"it cannot be read ({reason})"), path.name) from None
    patterns = []
    for number, line in enumerate(lines, start=1):
        if not line.strip() or line.startswith("#"):
            continue
        try:
            names = re.compile(line).groupindex
        except re.error as error:
            reason = f"line {number} is no regular expression ({error})"
            raise at(UnreadableFile(reason), path.name) from None
        if not names:
            reason = f"line {number} names no field: write (?P<patient>...)"
            raise at(UnreadableFile(reason), path.name)
        patterns.append(line)
    return tuple(patterns)


def header_text(stages: Stages) -> str:
    """The lines of printing outside the panels, from the top, without lead names and the run."""
    page = stages.page
    drawn = drawn_printing(page.drawing, stages.grid) if page.drawing else None
    lines = (drawn or read_printing(stages.ink)).lines
    panels, leads = stages.tracing.panels, stages.tracing.leads
    kept = [
        line
        for line in sorted(lines, key=lambda word: (round(word.box.top_mm), word.box.left_mm))
        if not any(_within(line.box, panel) for panel in panels)
        and not states_run(line.text)
        and not all(names_lead(word, leads) for word in line.text.split())
    ]
    return "\n".join(line.text.strip() for line in kept)


def header_fields(text: str, patterns: Sequence[str]) -> dict[str, str]:
    """What the patterns find in single lines; a field with two different values is left out."""
    found: dict[str, set[str]] = defaultdict(set)
    for pattern in patterns:
        for line in text.splitlines():
            for match in re.finditer(pattern, line):
                for name, value in match.groupdict().items():
                    if value and value.strip():
                        found[name].add(value.strip())
    return {name: values.pop() for name, values in sorted(found.items()) if len(values) == 1}


def _within(box: Box, panel: Panel) -> bool:
    """Whether the middle of a box lies in a panel."""
    left, top, right, bottom = panel.box_mm
    x, y = (box.left_mm + box.right_mm) / 2, (box.top_mm + box.bottom_mm) / 2
    return left <= x <= right and top <= y <= bottom

"""Findings against the statements of an open database: `python -m tests.criteria_benchmark`.

PTB-XL (Wagner et al., Sci Data 7:154; the folder is named by PTBXL_DIR) carries statements by
cardiologists or a recorder, partly validated: some are wrong, and they do not say by which
definition. So a table of agreement is printed, and with `--list` every disagreement to look at.
With `--pages N` the same N records of the labelled groups are drawn on 3x4+1 pages at 300 dpi and
read back from there.
"""

import argparse
import ast
import csv
import os
import sys
from collections import Counter
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from digitize.errors import InputError, NoTrace
from digitize.tracing import FS_HZ, LEADS, Tracing
from measure.criteria.finding import Finding
from measure.reading import Person, read
from measure.wording import deciding

if TYPE_CHECKING:
    from tests.drawn.heart import Recording

LBBB = ("lbbb_european_2013", "lbbb_strict", "lbbb_european_2021", "lbbb_aha")
BLOCKS = (
    *LBBB,
    "lbbb_aha_incomplete",
    "rbbb_complete",
    "rbbb_incomplete",
    "lafb",
    "lpfb",
    "rbbb_lafb",
    "rbbb_lpfb",
    "nonspecific_delay",
)
GROUPS = ("CLBBB", "CRBBB", "LAFB", "LPFB", "ILBBB", "IRBBB", "IVCD", "WPW", "PACE", "NORM")


@dataclass(frozen=True)
class Labelled:
    """One record of the database with its statements."""

    record: str
    statements: frozenset[str]
    person: Person


@dataclass(frozen=True)
class Judged:
    """A record and what was found on it."""

    label: Labelled
    qrs_ms: float
    findings: dict[str, Finding]

    def result(self, key: str) -> str:
        """Result of one definition; "lbbb" and "any" stand for the best result of several."""
        keys = {"lbbb": LBBB, "any block": BLOCKS, "lafb or rbbb_lafb": ("lafb", "rbbb_lafb")}
        results = {self.findings[k].result for k in keys.get(key, (key,))}
        return next(r for r in ("met", "undecided", "not met") if r in results)


def records(folder: Path) -> Iterator[Labelled]:
    """Records of the database with the statements that are at least likely (50 % or unstated)."""
    sexes = {"M": "male", "F": "female"}
    with (folder / "labels.csv").open(newline="") as file:
        for row in csv.DictReader(file):
            codes = ast.literal_eval(row["scp_codes"])
            statements = frozenset(k for k, v in codes.items() if v == 0 or v >= 50)
            age = float(row["age"]) if row["age"] else None
            yield Labelled(row["record"], statements, Person(sexes.get(row["sex"]), age))


def judge_all(
    labels: Iterable[Labelled], tracing_of: Callable[[Labelled], Tracing]
) -> Iterator[Judged]:
    """Read every record; one that cannot be read is said on stderr and left out."""
    for label in labels:
        try:
            reading = read(tracing_of(label), label.person)
        except InputError as error:
            print(f"{label.record}: {error}", file=sys.stderr)
            continue
        by_key = {f.key: f for f in reading.findings}
        yield Judged(label, reading.intervals["qrs_ms"].value, by_key)


def table(judged: list[Judged]) -> str:
    """Share met / undecided in percent: a row for each definition, a column for each statement."""
    lines = ["".ljust(20) + "".join(f"{group:>11}" for group in GROUPS)]
    members = {g: [j for j in judged if g in j.label.statements] for g in GROUPS}
    lines.append("records".ljust(20) + "".join(f"{len(members[g]):>11}" for g in GROUPS))
    for key in (*BLOCKS, "lafb or rbbb_lafb", "lbbb", "any block"):
        cells = [_share(members[group], key) for group in GROUPS]
        lines.append(key.ljust(20) + "".join(cells))
    return "\n".join(lines)


def _share(members: list[Judged], key: str) -> str:
    if not members:
        return "-".rjust(11)
    counts = Counter(j.result(key) for j in members)
    met, undecided = (100 * counts[r] / len(members) for r in ("met", "undecided"))
    return f"{met:5.1f}/{undecided:5.1f}"


def disagreements(judged: list[Judged]) -> Iterator[str]:
    """Records whose statement and finding differ, with the clauses that decided."""
    expected = {
        "CLBBB": "lbbb_european_2013",
        "CRBBB": "rbbb_complete",
        "LAFB": "lafb or rbbb_lafb",
    }
    for one in judged:
        for statement, key in expected.items():
            if statement in one.label.statements and one.result(key) != "met":
                first = one.findings[key.split(" or ")[-1]]
                why = "; ".join(c.text for c in deciding(first))
                what = f"{one.label.record} {statement}: {one.result(key)}"
                yield f"{what} (QRS {one.qrs_ms:.0f}; {why})"
        if "NORM" in one.label.statements and one.result("any block") == "met":
            met = [k for k in BLOCKS if one.findings[k].result == "met"]
            yield f"{one.label.record} NORM: met {', '.join(met)} (QRS {one.qrs_ms:.0f})"


def _digital(folder: Path) -> Callable[[Labelled], Tracing]:
    from measure.sources import read_digital

    return lambda label: read_digital(folder / f"{label.record}.hea")


def _drawn(folder: Path) -> Callable[[Labelled], Tracing]:
    """The record drawn on a page, scanned and read back."""
    from tests.paper import page_spec, read_back

    digital = _digital(folder)

    def tracing_of(label: Labelled) -> Tracing:
        spec = page_spec("scan", int(label.record[:5]))
        tracing = read_back(_recording(digital(label)), spec)
        if tracing is None:
            raise NoTrace("its page was refused")
        return tracing

    return tracing_of


def _recording(tracing: Tracing) -> "Recording":
    """A digital record as the page maker takes it, at 500/s as it was measured.

    Plain interpolation of 100/s would draw the ringing of the filter before it, which no recorder
    prints.
    """
    from tests.drawn.heart import Recording

    mv = np.stack([np.nan_to_num(tracing.lead(lead).mv) for lead in LEADS])
    return Recording(mv, FS_HZ, name=tracing.source.file_name)


def main() -> None:
    """Print the table, and on request the disagreements and the same through paper."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--list", action="store_true", help="print every disagreement")
    parser.add_argument("--pages", type=int, default=0, help="records to draw and read back")
    given = parser.parse_args()
    if not os.environ.get("PTBXL_DIR"):
        sys.exit("PTBXL_DIR is not set: the database is not on this machine")
    folder = Path(os.environ["PTBXL_DIR"])
    labels = list(records(folder))
    if given.pages:
        labels = _sample(labels, given.pages)
    runs = [("digital", _digital(folder))] + (
        [("through drawn pages", _drawn(folder))] * bool(given.pages)
    )
    for name, tracing_of in runs:
        judged = list(judge_all(labels, tracing_of))
        print(f"{name}: met / undecided, % of the records with each statement\n{table(judged)}")
        if given.list:
            print("\n".join(disagreements(judged)))


def _sample(labels: list[Labelled], count: int) -> list[Labelled]:
    """As many records of left block, right block and normal conduction, evenly taken."""
    chosen: dict[str, Labelled] = {}
    for group in ("CLBBB", "CRBBB", "NORM"):
        members = [x for x in labels if group in x.statements]
        step = max(len(members) * 3 // count, 1)
        chosen |= {x.record: x for x in members[::step][: -(-count // 3)]}
    return list(chosen.values())


if __name__ == "__main__":
    main()

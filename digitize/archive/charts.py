"""Whose chart a page is and of which day: only as a person says it, in a table or in file names.

A manifest is a CSV with the columns `file`, `patient`, `date` and, where they are known, `page`,
`sex`, `age`. `file` is a name or the end of a path (`ward3/0417.pdf`, `box.zip/0417.pdf`); without
`page` a row stands for the whole file. A pattern is a regular expression with the groups `patient`
or `date` that fits the whole name of a file. Nothing is guessed: what no row and no pattern says is
not known.
"""

import csv
import datetime
import re
from collections import Counter, defaultdict
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath

from digitize.archive.catalogue import Chart
from digitize.archive.sources import Source
from digitize.errors import UnreadableFile, at

_NEEDED, _MORE = ("file", "patient", "date"), ("page", "sex", "age")
_LONGEST = 200  # letters of a patient key
OLDEST_YEARS = 130.0


@dataclass(frozen=True)
class _Row:
    number: int  # line of the manifest
    parts: tuple[str, ...]  # of the end of a path
    page: int  # 0: every page
    chart: Chart


Manifest = Mapping[str, list[_Row]]  # by the last part of the path


@dataclass
class Charts:
    """What is known of the sources of one run; made by `read_manifest` and `name_pattern`."""

    rows: Manifest = field(default_factory=dict)
    pattern: re.Pattern[str] | None = None
    used: dict[tuple[int, int], set[str]] = field(default_factory=lambda: defaultdict(set))

    def of(self, source: Source) -> dict[int, Chart]:
        """What is said of a source, by page; page 0 stands for all of them."""
        inside = PurePosixPath(source.member or "").parts
        parts = (*source.path.resolve().parts, *inside)
        fitting = [r for r in self.rows.get(parts[-1], ()) if parts[-len(r.parts) :] == r.parts]
        longest = max((len(r.parts) for r in fitting), default=0)
        found = {r.page: r for r in fitting if len(r.parts) == longest}
        for row in found.values():
            self.used[row.number, row.page].add(source.sha256)
        if found:
            return {page: row.chart for page, row in found.items()}
        match = self.pattern.fullmatch(source.name) if self.pattern else None
        return {} if match is None else {0: _from_groups(match)}

    def doubts(self) -> Iterator[str]:
        """Rows that fit no file or several, once all sources were asked for."""
        for row in (row for rows in self.rows.values() for row in rows):
            files = len(self.used.get((row.number, row.page), ()))
            if files != 1:
                what = "no file" if not files else f"{files} files of different content"
                yield f"row {row.number} of the manifest fits {what}"


def read_manifest(path: Path) -> Manifest:
    """Return the rows of a manifest by the name of their file.

    Raises
    ------
    UnreadableFile
        It is no such table, or rows are wrong; the text names each of them by its line.
    """
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            reader = csv.DictReader(file, strict=True)
            columns = tuple(name.strip().lower() for name in reader.fieldnames or ())
            reader.fieldnames = list(columns)
            _check_columns(columns)
            entries = [(reader.line_num, entry) for entry in reader]
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise at(UnreadableFile(f"it cannot be read as a CSV ({reason})"), path.name) from None
    except UnreadableFile as error:
        raise at(error, path.name) from None
    rows, wrong = [], []
    for number, entry in entries:
        try:
            rows.append(_row(number, entry))
        except ValueError as error:
            wrong.append(f"row {number}: {error}")
    wrong += _contradictions(rows)
    if wrong:
        raise at(UnreadableFile("; ".join(wrong)), path.name)
    by_name: dict[str, list[_Row]] = defaultdict(list)
    for row in rows:
        by_name[row.parts[-1]].append(row)
    return by_name


def name_pattern(text: str) -> re.Pattern[str]:
    """Return a pattern of file names.

    Raises
    ------
    ValueError
        It is no regular expression, or names neither a patient nor a date.
    """
    try:
        pattern = re.compile(text)
    except re.error as error:
        raise ValueError(f"'{text}' is no regular expression ({error})") from None
    groups = set(pattern.groupindex)
    if not groups or groups - {"patient", "date"}:
        raise ValueError(f"'{text}' needs the groups (?P<patient>...) or (?P<date>...), no others")
    return pattern


def _check_columns(columns: tuple[str, ...]) -> None:
    absent = [name for name in _NEEDED if name not in columns]
    unknown = [name for name in columns if name not in (*_NEEDED, *_MORE)]
    if absent or unknown or len(set(columns)) < len(columns):
        raise UnreadableFile(
            f"its first row must name the columns {', '.join(_NEEDED)} and may name "
            f"{', '.join(_MORE)}, each once and no others"
        )


def _row(number: int, entry: Mapping[str | None, str | None]) -> _Row:
    """One row checked; a ValueError says what is wrong with it."""
    if None in entry or None in entry.values():
        raise ValueError("it has more or fewer cells than the first row")
    cells = {str(name): str(text).strip() for name, text in entry.items()}
    parts = PurePosixPath(cells["file"].replace("\\", "/")).parts
    if not parts or ".." in parts:
        raise ValueError("it names no file")
    page = cells.get("page", "")
    if page and not (page.isdecimal() and int(page) > 0):
        raise ValueError("its page is no number from 1")
    return _Row(number, parts, int(page or 0), _chart(cells))


def _chart(cells: Mapping[str, str]) -> Chart:
    patient, sex, age = (cells.get(name, "") for name in ("patient", "sex", "age"))
    if len(patient) > _LONGEST or not all(letter.isprintable() for letter in patient):
        raise ValueError(f"its patient key is longer than {_LONGEST} letters or is no plain text")
    if sex not in ("", "male", "female"):
        raise ValueError("its sex is neither male nor female nor empty")
    try:
        years = float(age) if age else None
    except ValueError:
        years = -1.0
    if years is not None and not 0 <= years <= OLDEST_YEARS:
        raise ValueError("its age is no number of years")
    return Chart(patient or None, _day(cells["date"]), sex or None, years)


def _day(text: str) -> str | None:
    """A day as year-month-day, also written without dashes."""
    if not text:
        return None
    try:
        return datetime.date.fromisoformat(text).isoformat()
    except ValueError:
        raise ValueError("its date is not of the form 2024-03-01") from None


def _contradictions(rows: list[_Row]) -> list[str]:
    """Rows that say something of the same page of the same file."""
    seen = Counter((row.parts, row.page) for row in rows)
    whole = {row.parts for row in rows if row.page == 0}
    return [
        f"row {row.number}: another row speaks of the same page"
        for row in rows
        if seen[row.parts, row.page] > 1 or (row.page and row.parts in whole)
    ]


def _from_groups(match: re.Match[str]) -> Chart:
    """What a name says; a date that is none is not known."""
    groups = match.groupdict()
    try:
        date = _day(groups.get("date") or "")
    except ValueError:
        date = None
    return Chart(patient=groups.get("patient") or None, date=date)

"""The catalogue of a store: one SQLite file that says what became of every page.

A page's row is committed after its files are in place, so a row stands for files that are there.
Tables: `source` (where a content was met), `work` (one content under one set of options, done when
all its pages have a row), `page` (one page each: what was read, or why not), `chart` (what a person
says of a content: whose, of which day; page 0 stands for all its pages), `refused` (files without a
content, such as a damaged zip file, at the last run that met them). `user_version` is the version
of this schema; a later one is refused, an earlier one is brought up step by step.
"""

import sqlite3
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from contextlib import closing, contextmanager
from dataclasses import asdict, astuple, dataclass, fields
from pathlib import Path
from typing import Any

from digitize.errors import UnreadableFile, shown

GOOD, LOOK, FAILED = "good", "look", "failed"

# One step per version of the schema, in order; what was released is never altered.
_STEPS = (
    """
    CREATE TABLE source (
        path BLOB PRIMARY KEY, bytes INTEGER NOT NULL, changed_ns INTEGER NOT NULL,
        sha256 TEXT NOT NULL
    ) WITHOUT ROWID;
    CREATE INDEX source_content ON source (sha256);
    CREATE TABLE work (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, done INTEGER NOT NULL,
        PRIMARY KEY (sha256, options)
    ) WITHOUT ROWID;
    CREATE TABLE page (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, page INTEGER NOT NULL,
        status TEXT NOT NULL CHECK (status IN ('good', 'look', 'failed')),
        reason TEXT NOT NULL, stem TEXT, leads INTEGER, layout TEXT,
        speed_mm_s REAL, speed_source TEXT, gain_mm_mv REAL, gain_source TEXT, timing TEXT,
        read_share REAL, checks_failed INTEGER, width_px INTEGER, height_px INTEGER,
        seconds REAL, peak_mb REAL, version TEXT,
        PRIMARY KEY (sha256, options, page)
    ) WITHOUT ROWID;
    CREATE INDEX page_status ON page (status);
    """,
    """
    CREATE TABLE chart (
        sha256 TEXT NOT NULL, page INTEGER NOT NULL,
        patient TEXT, date TEXT, sex TEXT, age_years REAL, PRIMARY KEY (sha256, page)
    ) WITHOUT ROWID;
    CREATE INDEX chart_patient ON chart (patient, date);
    ALTER TABLE page ADD COLUMN header TEXT;
    ALTER TABLE page ADD COLUMN header_fields TEXT;
    """,
    """
    CREATE TABLE refused (path BLOB NOT NULL, reason TEXT NOT NULL);
    CREATE INDEX refused_path ON refused (path);
    """,
)


@dataclass(frozen=True)
class Chart:
    """What a person says of a page; None is what was not said. `date` is year-month-day."""

    patient: str | None = None
    date: str | None = None
    sex: str | None = None  # "male" or "female"
    age_years: float | None = None


@dataclass(frozen=True)
class PageRow:
    """What became of one page; page 0 is a file that could not be opened as a whole.

    `reason` is empty for a good page, else says in words what to look at or what went wrong.
    `read_share` is the share of printed samples that could be read. `header` is the printing
    outside the traces and `header_fields` what a person's patterns found in it, as JSON; both only
    where it was asked for.
    """

    page: int
    status: str
    reason: str = ""
    stem: str | None = None
    leads: int | None = None
    layout: str | None = None
    speed_mm_s: float | None = None
    speed_source: str | None = None
    gain_mm_mv: float | None = None
    gain_source: str | None = None
    timing: str | None = None
    read_share: float | None = None
    checks_failed: int | None = None
    width_px: int | None = None
    height_px: int | None = None
    seconds: float | None = None
    peak_mb: float | None = None
    version: str | None = None
    header: str | None = None
    header_fields: str | None = None


_COLUMNS = tuple(field.name for field in fields(PageRow))


@contextmanager
def opened(path: Path, *, read_only: bool = False) -> Iterator["Catalogue"]:
    """The catalogue in a file, made or brought up to date where it may be written.

    Raises
    ------
    UnreadableFile
        It is missing (read only), damaged, or of a later version of the program.
    """
    if read_only and not path.is_file():
        raise UnreadableFile(f"there is no catalogue in {shown(path.parent)}: give a store")
    mode = "ro" if read_only else "rwc"
    try:
        uri = f"{path.resolve().as_uri()}?mode={mode}"
        with closing(sqlite3.connect(uri, uri=True, timeout=30, isolation_level=None)) as db:
            db.execute("PRAGMA synchronous = FULL")
            _bring_up(db, read_only=read_only)
            yield Catalogue(db)
    except sqlite3.Error as error:
        raise UnreadableFile(f"the catalogue {shown(path)} cannot be used ({error})") from None


def _bring_up(db: sqlite3.Connection, *, read_only: bool) -> None:
    """Take the schema from its version to ours, each step whole or not at all."""
    version = db.execute("PRAGMA user_version").fetchone()[0]
    if version > len(_STEPS):
        raise UnreadableFile("the catalogue was written by a later version: use that version")
    if read_only and version < len(_STEPS):
        raise UnreadableFile("the catalogue is of an earlier version: run digitize archive once")
    for number, step in enumerate(_STEPS[version:], start=version + 1):
        db.executescript(f"BEGIN IMMEDIATE; {step} PRAGMA user_version = {number}; COMMIT;")


class Catalogue:
    """An open catalogue. Every call that writes is committed when it returns."""

    def __init__(self, db: sqlite3.Connection) -> None:
        self.db = db

    def known_source(self, path: bytes, size: int, changed_ns: int) -> str | None:
        """Hash of a source that has not changed since it was last seen."""
        row = self.db.execute(
            "SELECT sha256 FROM source WHERE path = ? AND bytes = ? AND changed_ns = ?",
            (path, size, changed_ns),
        ).fetchone()
        return row and row[0]

    def add_source(self, path: bytes, size: int, changed_ns: int, sha256: str) -> None:
        """Note where a content was met."""
        values = (path, size, changed_ns, sha256)
        self.db.execute("INSERT OR REPLACE INTO source VALUES (?, ?, ?, ?)", values)

    def is_done(self, sha256: str, options: str) -> bool:
        """Whether all pages of a content have their rows under these options."""
        sql = "SELECT done FROM work WHERE sha256 = ? AND options = ?"
        row = self.db.execute(sql, (sha256, options)).fetchone()
        return bool(row and row[0])

    def options_of(self, sha256: str) -> set[str]:
        """Every set of options under which a content was read."""
        sql = "SELECT options FROM work WHERE sha256 = ?"
        return {row[0] for row in self.db.execute(sql, (sha256,))}

    def pages_of(self, sha256: str, options: str) -> dict[int, str]:
        """Status of each page that has a row."""
        sql = "SELECT page, status FROM page WHERE sha256 = ? AND options = ?"
        return dict(self.db.execute(sql, (sha256, options)).fetchall())

    def forget_failed(self, sha256: str, options: str) -> None:
        """Take the failed pages of a content up again."""
        with self.db:
            self.db.execute("BEGIN IMMEDIATE")
            where = "WHERE sha256 = ? AND options = ?"
            self.db.execute(f"DELETE FROM page {where} AND status = 'failed'", (sha256, options))
            self.db.execute(f"UPDATE work SET done = 0 {where}", (sha256, options))

    def add_page(self, sha256: str, options: str, row: PageRow) -> None:
        """Commit what became of a page, once its files are in place."""
        marks = ", ".join("?" * (2 + len(_COLUMNS)))
        names = ", ".join(_COLUMNS)
        self.db.execute(
            f"INSERT OR REPLACE INTO page (sha256, options, {names}) VALUES ({marks})",
            (sha256, options, *asdict(row).values()),
        )

    def set_charts(self, sha256: str, charts: Mapping[int, Chart]) -> None:
        """Put what is said of a content in place of what was said before."""
        with self.db:
            self.db.execute("BEGIN IMMEDIATE")
            self.db.execute("DELETE FROM chart WHERE sha256 = ?", (sha256,))
            self.db.executemany(
                "INSERT INTO chart VALUES (?, ?, ?, ?, ?, ?)",
                [(sha256, page, *astuple(chart)) for page, chart in charts.items()],
            )

    def set_refused(self, path: bytes, reasons: Sequence[str]) -> None:
        """Put why a file, or what is in it, cannot be opened in place of what was noted before."""
        with self.db:
            self.db.execute("BEGIN")
            self.db.execute("DELETE FROM refused WHERE path = ?", (path,))
            rows = [(path, reason) for reason in reasons]
            self.db.executemany("INSERT INTO refused VALUES (?, ?)", rows)

    def finish(self, sha256: str, options: str) -> None:
        """Note that a content has all its rows."""
        self.db.execute("INSERT OR REPLACE INTO work VALUES (?, ?, 1)", (sha256, options))

    def counts(self) -> Counter[str]:
        """Pages by status."""
        return Counter(dict(self.db.execute("SELECT status, count(*) FROM page GROUP BY status")))

    def rows(self) -> Iterator[dict[str, Any]]:
        """Every page as a dictionary, those to look at first, then failed, then good."""
        order = "CASE status WHEN 'look' THEN 0 WHEN 'failed' THEN 1 ELSE 2 END"
        names = ("sha256", "options", *_COLUMNS)
        sql = f"SELECT {', '.join(names)} FROM page ORDER BY {order}, sha256, options, page"
        for row in self.db.execute(sql):
            yield dict(zip(names, row, strict=True))

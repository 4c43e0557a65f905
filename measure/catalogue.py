"""Readings in the catalogue of a store: one row per page that was measured, or why it could not be.

Table `reading` has a column for every interval (`qrs_ms`), for its standard error (`qrs_ms_se`) and
for every finding (`lbbb_strict`: 'met', 'not met' or 'undecided'); NULL is what could not be
measured. A measurement that the store does not know yet becomes one more column, empty for earlier
readings. `measure_version` holds the version of this table.
"""

import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass, field

from digitize import program_version
from digitize.errors import UnreadableFile
from measure.questions import FAMILIES, RHYTHM_KEYS, WIDTH_KEYS

VERSION = 2
INTERVALS = (*RHYTHM_KEYS, *WIDTH_KEYS)
ERRORS = tuple(f"{name}_se" for name in INTERVALS)
FINDINGS = tuple(key for _, keys in FAMILIES for key in keys)
COLUMNS: Mapping[str, str] = {
    **dict.fromkeys((*INTERVALS, *ERRORS), "REAL"),
    **dict.fromkeys(FINDINGS, "TEXT"),
}
Key = tuple[str, str, int]  # hash of the content, options, page

_TABLES = f"""
    CREATE TABLE IF NOT EXISTS measure_version (version INTEGER NOT NULL);
    INSERT INTO measure_version SELECT {VERSION} WHERE NOT EXISTS (SELECT 1 FROM measure_version);
    CREATE TABLE IF NOT EXISTS reading (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, page INTEGER NOT NULL,
        reason TEXT NOT NULL, version TEXT NOT NULL, PRIMARY KEY (sha256, options, page)
    ) WITHOUT ROWID;
"""


@dataclass(frozen=True)
class Measured:
    """What a worker brings back of one page: nothing of it is written there."""

    reason: str  # why there is no reading; empty where there is one
    content: bytes = b""  # of the reading's file
    numbers: Mapping[str, tuple[float, float]] = field(default_factory=dict)  # value, its error
    words: Mapping[str, str] = field(default_factory=dict)

    def values(self) -> dict[str, float | str]:
        """By the names of the columns."""
        found: dict[str, float | str] = dict(self.words)
        for name, (value, se) in self.numbers.items():
            found |= {name: value, f"{name}_se": se}
        return found


def open_tables(db: sqlite3.Connection) -> None:
    """Make the table where it is not and bring it up to date.

    Raises
    ------
    UnreadableFile
        It was written by a later version.
    """
    db.execute("BEGIN IMMEDIATE")
    for statement in _TABLES.split(";"):
        db.execute(statement)
    version = db.execute("SELECT version FROM measure_version").fetchone()[0]
    if version > VERSION:
        db.execute("ROLLBACK")
        raise UnreadableFile("the readings were written by a later version: use that version")
    present = columns_of(db)
    for name, kind in COLUMNS.items():
        if name not in present:
            db.execute(f"ALTER TABLE reading ADD COLUMN {name} {kind}")
    if version == 1:
        _from_rows(db)
    db.execute(f"UPDATE measure_version SET version = {VERSION}")
    db.execute("COMMIT")


def columns_of(db: sqlite3.Connection) -> set[str]:
    """Names of the columns of `reading`; none where there is no such table."""
    return {row[1] for row in db.execute("PRAGMA table_info(reading)")}


def keep(db: sqlite3.Connection, key: Key, found: Measured) -> None:
    """Commit a reading with all that was measured."""
    values = {name: value for name, value in found.values().items() if name in COLUMNS}
    names = ("sha256", "options", "page", "reason", "version", *values)
    marks = ", ".join("?" * len(names))
    row = (*key, found.reason, program_version(), *values.values())
    db.execute(f"INSERT OR REPLACE INTO reading ({', '.join(names)}) VALUES ({marks})", row)


def _from_rows(db: sqlite3.Connection) -> None:
    """Fill the columns from the table of version 1, which had a row for every number and word."""
    source = "FROM measured m WHERE (m.sha256, m.options, m.page, m.name) = "
    parts = {
        **{name: ("number", name) for name in INTERVALS},
        **{f"{name}_se": ("se", name) for name in INTERVALS},
        **{name: ("word", name) for name in FINDINGS},
    }
    assignments = ", ".join(
        f"{column} = (SELECT m.{part} {source}"
        f"(reading.sha256, reading.options, reading.page, '{name}'))"
        for column, (part, name) in parts.items()
    )
    db.execute(f"UPDATE reading SET {assignments}")
    db.execute("DROP TABLE measured")

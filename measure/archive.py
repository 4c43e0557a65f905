"""Readings of every page in a store, in tables of their own beside those of `digitize`.

`reading` has one row per page that was measured, or why it could not be. `measured` has one row per
number or finding of a reading, so that a new measurement needs no new column: `number` and `se` for
intervals, `word` for findings ("met", "not met", "undecided"). What could not be measured has no
row. A reading's rows are committed together, after its file is in place.
"""

import multiprocessing
import sqlite3
import sys
from collections.abc import Iterator, Mapping
from concurrent.futures import ProcessPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass
from pathlib import Path

from digitize import CAUTION, program_version
from digitize.archive.catalogue import opened
from digitize.archive.store import CATALOGUE, locked, put
from digitize.console import console
from digitize.errors import InputError, UnreadableFile, shown
from digitize.tracing_files import read_tracing
from measure.reading import Person, read
from measure.reading_files import to_json

VERSION = 1  # of these tables
ENDING = ".reading.json"
# What arithmetic on an unforeseen tracing can raise: LinAlgError is a ValueError.
_FAULTS = (ArithmeticError, LookupError, TypeError, ValueError, MemoryError)
_TABLES = f"""
    BEGIN IMMEDIATE;
    CREATE TABLE IF NOT EXISTS measure_version (version INTEGER NOT NULL);
    INSERT INTO measure_version SELECT {VERSION} WHERE NOT EXISTS (SELECT 1 FROM measure_version);
    CREATE TABLE IF NOT EXISTS reading (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, page INTEGER NOT NULL,
        reason TEXT NOT NULL, version TEXT NOT NULL, PRIMARY KEY (sha256, options, page)
    ) WITHOUT ROWID;
    CREATE TABLE IF NOT EXISTS measured (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, page INTEGER NOT NULL,
        name TEXT NOT NULL, number REAL, se REAL, word TEXT,
        PRIMARY KEY (sha256, options, page, name)
    ) WITHOUT ROWID;
    CREATE INDEX IF NOT EXISTS measured_name ON measured (name, number, word);
    COMMIT;
"""

Key = tuple[str, str, int]  # hash of the content, options, page


@dataclass(frozen=True)
class Measured:
    """What a worker brings back of one page: nothing of it is written there."""

    reason: str  # why there is no reading; empty where there is one
    content: bytes = b""  # of the reading's file
    numbers: Mapping[str, tuple[float, float]] | None = None  # value and standard error
    words: Mapping[str, str] | None = None


def measure_archive(store: Path, *, processes: int, again: bool = False) -> int:
    """Measure every page of a store that has a tracing, and return how many could not be.

    Parameters
    ----------
    store : Path
        As `digitize archive` fills it. Started again, this continues.
    processes : int
        Pages measured at the same time.
    again : bool
        Measure anew what was measured before.
    """
    failed = 0
    try:
        with locked(store), opened(_existing(store)) as catalogue:
            open_tables(catalogue.db)
            todo = dict(_todo(catalogue.db, again=again))
            with console(len(todo)) as shown_on:
                shown_on.line(f"{len(todo)} pages to measure")
                for key, found in _measure_all(store, todo, processes):
                    if found.content:
                        put(store, todo[key], {ENDING: found.content})
                    _keep(catalogue.db, key, found)
                    if found.reason:
                        failed += 1
                        shown_on.line(f"{key[0][:12]}, page {key[2]}: {found.reason}")
                    shown_on.end()
    except InputError as error:
        print(error, file=sys.stderr)
        return 1
    print(f"{len(todo) - failed} pages measured, {failed} could not be.\n{CAUTION}")
    return failed


def open_tables(db: sqlite3.Connection) -> None:
    """Make the tables where they are not; refuse those of a later version."""
    db.executescript(_TABLES)
    if db.execute("SELECT version FROM measure_version").fetchone()[0] > VERSION:
        raise UnreadableFile("the readings were written by a later version: use that version")


def measure_page(path: Path) -> Measured:
    """Return the reading of one tracing as plain values, or the reason why there is none."""
    try:
        reading = read(read_tracing(path), Person())
    except InputError as error:
        return Measured(str(error).removeprefix(f"{error.place}: "))
    except _FAULTS as fault:
        return Measured(f"the program failed on this page ({type(fault).__name__})")
    known = {name: q for name, q in reading.intervals.items() if q.known}
    return Measured(
        "",
        to_json(reading),
        {name: (float(q.value), float(q.se)) for name, q in known.items()},
        {finding.key: finding.result for finding in reading.findings},
    )


def _existing(store: Path) -> Path:
    if not (store / CATALOGUE).is_file():
        raise UnreadableFile(f"{shown(store)} is no store: fill one with digitize archive")
    return store / CATALOGUE


def _todo(db: sqlite3.Connection, *, again: bool) -> Iterator[tuple[Key, str]]:
    """Pages with a tracing, and where it stands; those without a reading unless `again`."""
    sql = """
        SELECT p.sha256, p.options, p.page, p.stem FROM page p
        LEFT JOIN reading r USING (sha256, options, page)
        WHERE p.stem IS NOT NULL AND (? OR r.version IS NULL) ORDER BY 1, 2, 3
    """
    for sha256, options, page, stem in db.execute(sql, (again,)):
        yield (sha256, options, page), stem


def _measure_all(
    store: Path, todo: Mapping[Key, str], processes: int
) -> Iterator[tuple[Key, Measured]]:
    """Each page with what was found, as it comes."""
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["measure.archive"])
    with ProcessPoolExecutor(processes, mp_context=context) as pool:
        work = {pool.submit(measure_page, _tracing(store, stem)): k for k, stem in todo.items()}
        try:
            for future in as_completed(work):
                yield work[future], future.result()
        except BrokenProcessPool:
            raise UnreadableFile(
                "a process was ended from outside: start it again, it continues"
            ) from None


def _tracing(store: Path, stem: str) -> Path:
    return store / f"{stem}.json"


def _keep(db: sqlite3.Connection, key: Key, found: Measured) -> None:
    """Commit a reading with all that was measured."""
    numbers = ((*key, n, value, se, None) for n, (value, se) in (found.numbers or {}).items())
    words = ((*key, name, None, None, word) for name, word in (found.words or {}).items())
    with db:
        db.execute("BEGIN IMMEDIATE")
        db.execute("DELETE FROM measured WHERE (sha256, options, page) = (?, ?, ?)", key)
        insert = "INSERT INTO measured VALUES (?, ?, ?, ?, ?, ?, ?)"
        db.executemany(insert, [*numbers, *words])
        row = (*key, found.reason, program_version())
        db.execute("INSERT OR REPLACE INTO reading VALUES (?, ?, ?, ?, ?)", row)

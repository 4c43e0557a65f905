"""Readings of every page in a store: each a file beside its tracing and a row of the catalogue.

Workers return records, the parent alone writes: a reading's row is committed after its file is in
place.
"""

import sqlite3
import sys
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager
from dataclasses import dataclass
from functools import partial
from pathlib import Path

from digitize import CAUTION
from digitize.archive.alone import Limits, run_alone
from digitize.archive.catalogue import opened
from digitize.archive.engines import Engine, WorkerLost, each_done
from digitize.archive.store import CATALOGUE, locked, put
from digitize.console import console
from digitize.errors import InputError, UnreadableFile, at, shown
from digitize.tracing_files import read_tracing
from measure.catalogue import Key, Measured, keep, open_tables
from measure.reading import Person, read
from measure.reading_files import to_json

ENDING = ".reading.json"
# What arithmetic on an unforeseen tracing can raise: LinAlgError is a ValueError.
FAULTS = (ArithmeticError, LookupError, TypeError, ValueError, MemoryError)
_PRELOAD = ("measure.archive", "measure.warm", "measure.cli")


@dataclass(frozen=True)
class Task:
    """One page to measure; everything in it can be sent to another machine."""

    key: Key
    stem: str  # of its files below the store
    path: Path  # of its tracing
    person: Person
    limits: Limits


def measure_archive(
    store: Path, limits: Limits, engine: AbstractContextManager[Engine], *, again: bool = False
) -> int:
    """Measure every page of a store that has a tracing, and return how many could not be.

    Parameters
    ----------
    store : Path
        As `digitize archive` fills it. Started again, this continues.
    limits : Limits
        What one page may take.
    engine : context manager of Engine
        Who does the work.
    again : bool
        Measure anew what was measured before.
    """
    try:
        with locked(store), opened(_existing(store)) as catalogue:
            open_tables(catalogue.db)
            todo = _todo(store, catalogue.db, limits, again=again)
            with console(len(todo)) as shown_on, engine as at_work:
                shown_on.line(f"{len(todo)} pages to measure")
                for task, done in each_done(at_work, measure_alone, todo):
                    found = Measured(str(done)) if isinstance(done, WorkerLost) else done
                    if found.content:
                        put(store, task.stem, {ENDING: found.content})
                    keep(catalogue.db, task.key, found)
                    if found.reason:
                        sha256, _, page = task.key
                        shown_on.fail(at(InputError(found.reason), sha256[:12], page))
                    shown_on.end()
    except InputError as error:
        print(error, file=sys.stderr)
        return 1
    failed = shown_on.failed
    print(f"{len(todo) - failed} pages measured, {failed} could not be.\n{CAUTION}")
    return failed


def measure_alone(task: Task, stopped: Callable[[], bool] = lambda: False) -> Measured:
    """Measure one page in a process of its own and wait for what becomes of it.

    Parameters
    ----------
    task : Task
        The page and its limits.
    stopped : callable
        Asked now and then; once it is true, the process is ended and what is returned means
        nothing.
    """
    ended = run_alone(partial(_steps, task), task.limits, _PRELOAD, stopped)
    return ended.steps[0] if ended.steps else Measured(ended.lost)


def _steps(task: Task) -> Iterator[Measured]:
    yield measure_page(task.path, task.person)


def measure_page(path: Path, person: Person) -> Measured:
    """Return the reading of one tracing as plain values, or the reason why there is none."""
    try:
        reading = read(read_tracing(path), person)
    except InputError as error:
        return Measured(str(error).removeprefix(f"{error.place}: "))
    except FAULTS as fault:
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


def _todo(store: Path, db: sqlite3.Connection, limits: Limits, *, again: bool) -> list[Task]:
    """Pages with a tracing, where it is, whose it is; those without a reading unless `again`."""
    sql = """
        SELECT p.sha256, p.options, p.page, p.stem, c.sex, c.age_years FROM page p
        LEFT JOIN reading r USING (sha256, options, page)
        LEFT JOIN chart c ON c.sha256 = p.sha256 AND c.page IN (0, p.page)
        WHERE p.stem IS NOT NULL AND (? OR r.version IS NULL) ORDER BY 1, 2, 3, c.page
    """
    tasks = {}  # what is said of a page alone comes after what is said of its whole file
    for sha256, options, page, stem, sex, age_years in db.execute(sql, (again,)):
        key, path = (sha256, options, page), (store / f"{stem}.json").resolve()
        tasks[key] = Task(key, stem, path, Person(sex, age_years), limits)
    return list(tasks.values())

"""Readings of every page in a store: each a file beside its tracing and a row of the catalogue.

Workers return records, the parent alone writes: a reading's row is committed after its file is in
place.
"""

import multiprocessing
import sqlite3
import sys
from collections.abc import Iterator, Mapping
from concurrent.futures import ProcessPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from pathlib import Path

from digitize import CAUTION
from digitize.archive.catalogue import opened
from digitize.archive.store import CATALOGUE, locked, put
from digitize.console import console
from digitize.errors import InputError, UnreadableFile, shown
from digitize.tracing_files import read_tracing
from measure.catalogue import Key, Measured, keep, open_tables
from measure.reading import Person, read
from measure.reading_files import to_json

ENDING = ".reading.json"
# What arithmetic on an unforeseen tracing can raise: LinAlgError is a ValueError.
_FAULTS = (ArithmeticError, LookupError, TypeError, ValueError, MemoryError)


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
                        put(store, todo[key][0], {ENDING: found.content})
                    keep(catalogue.db, key, found)
                    if found.reason:
                        failed += 1
                        shown_on.line(f"{key[0][:12]}, page {key[2]}: {found.reason}")
                    shown_on.end()
    except InputError as error:
        print(error, file=sys.stderr)
        return 1
    print(f"{len(todo) - failed} pages measured, {failed} could not be.\n{CAUTION}")
    return failed


def measure_page(path: Path, person: Person) -> Measured:
    """Return the reading of one tracing as plain values, or the reason why there is none."""
    try:
        reading = read(read_tracing(path), person)
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


def _todo(db: sqlite3.Connection, *, again: bool) -> Iterator[tuple[Key, tuple[str, Person]]]:
    """Pages with a tracing, where it is, whose it is; those without a reading unless `again`."""
    sql = """
        SELECT p.sha256, p.options, p.page, p.stem, c.sex, c.age_years FROM page p
        LEFT JOIN reading r USING (sha256, options, page)
        LEFT JOIN chart c ON c.sha256 = p.sha256 AND c.page IN (0, p.page)
        WHERE p.stem IS NOT NULL AND (? OR r.version IS NULL) ORDER BY 1, 2, 3
    """
    for sha256, options, page, stem, sex, age_years in db.execute(sql, (again,)):
        yield (sha256, options, page), (stem, Person(sex, age_years))


def _measure_all(
    store: Path, todo: Mapping[Key, tuple[str, Person]], processes: int
) -> Iterator[tuple[Key, Measured]]:
    """Each page with what was found, as it comes."""
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["measure.archive"])
    with ProcessPoolExecutor(processes, mp_context=context) as pool:
        work = {
            pool.submit(measure_page, _tracing(store, stem), person): key
            for key, (stem, person) in todo.items()
        }
        try:
            for future in as_completed(work):
                yield work[future], future.result()
        except BrokenProcessPool:
            raise UnreadableFile(
                "a process was ended from outside: start it again, it continues"
            ) from None


def _tracing(store: Path, stem: str) -> Path:
    return store / f"{stem}.json"

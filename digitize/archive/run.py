"""One run over an archive: what is to do is settled first, then done by many processes.

Each file has a process of its own; a page that ends the process or its time is recorded as failed
and the next process goes on behind it. The parent alone writes: files first, then the row.
"""

import hashlib
import json
import sys
import time
from collections.abc import Iterator
from dataclasses import asdict, dataclass, field, replace
from multiprocessing.connection import Connection, wait
from multiprocessing.process import BaseProcess
from pathlib import Path

from digitize import CAUTION
from digitize.archive.catalogue import FAILED, Catalogue, PageRow, opened
from digitize.archive.contact import STATUS_WORDS, contact_sheet
from digitize.archive.sources import Source, find_files, identify, remove, unpack
from digitize.archive.store import CATALOGUE, CONTACT_SHEET, locked, put, stem_of, temporary
from digitize.archive.worker import PageDone, Reader, Task, start
from digitize.console import Console, console
from digitize.errors import CannotWrite, InputError, at, shown
from digitize.options import Options
from digitize.safe_write import write_files

_LOOK_EVERY_S = 0.5


@dataclass(frozen=True)
class Limits:
    """What one page may take, and how many processes work at once."""

    seconds: float = 120.0
    memory_mb: int = 6144  # of address space, of which libraries take a share
    processes: int = 1


@dataclass
class Plan:
    """The contents to read, and how many files need nothing."""

    options: str
    todo: list[Source] = field(default_factory=list)
    unreadable: list[InputError] = field(default_factory=list)
    known: int = 0
    doubled: int = 0
    other_options: int = 0

    def __str__(self) -> str:
        """What will be done, in one line."""
        text = f"{len(self.todo)} files to read, {self.known} done before"
        if self.doubled:
            text += f", {self.doubled} of the same content as another"
        if self.other_options:
            text += f"; {self.other_options} were read with other options and are read anew"
        if self.unreadable:
            text += f"; {len(self.unreadable)} cannot be opened"
        return text


def run_archive(
    folders: list[Path],
    store: Path,
    options: Options,
    limits: Limits,
    *,
    read: Reader,
    again_failed: bool = False,
) -> int:
    """Read every page under the folders into a store and return how many could not be read.

    Parameters
    ----------
    folders : list of Path
        Where the scans are, also in zip files; a file may stand for itself.
    store : Path
        Folder of results and catalogue, made if it is not there.
    options, limits
        What is known better than the pages say; what one page may take.
    read : callable
        Reads one page; must be a function of a module.
    again_failed : bool
        Whether to take up again what failed before.
    """
    try:
        with locked(store), opened(store / CATALOGUE) as catalogue:
            plan = make_plan(folders, options, catalogue, again_failed=again_failed)
            with console(len(plan.todo)) as shown_on:
                for text in (plan, *plan.unreadable):
                    shown_on.line(str(text))
                run = _Run(store, catalogue, plan, options, limits, shown_on, read)
                try:
                    run.work()
                finally:
                    run.stop()
            counts = catalogue.counts()
            page = contact_sheet(catalogue.rows(), counts)
            write_files({store / CONTACT_SHEET: page}, replace=True)
    except InputError as error:
        print(error, file=sys.stderr)
        return 1
    told = ", ".join(f"{counts[status]} {word}" for status, word in STATUS_WORDS.items())
    print(f"Pages in the store: {told}. Look at {shown(store / CONTACT_SHEET)}.\n{CAUTION}")
    return run.failed + len(plan.unreadable)


def make_plan(
    folders: list[Path], options: Options, catalogue: Catalogue, *, again_failed: bool = False
) -> Plan:
    """Settle what is to do; the sources are hashed where they were not seen before."""
    plan = Plan(options_key(options))
    met: set[str] = set()
    for path in find_files(folders):
        for found in identify(path, catalogue):
            if isinstance(found, InputError):
                plan.unreadable.append(found)
                continue
            if found.sha256 in met:
                plan.doubled += 1
                continue
            met.add(found.sha256)
            statuses = catalogue.pages_of(found.sha256, plan.options).values()
            if again_failed and FAILED in statuses:
                catalogue.forget_failed(found.sha256, plan.options)
            if catalogue.is_done(found.sha256, plan.options):
                plan.known += 1
                continue
            plan.other_options += bool(catalogue.options_of(found.sha256) - {plan.options})
            plan.todo.append(found)
    return plan


def options_key(options: Options) -> str:
    """A short name for the options that change a result: not the limit, which only refuses."""
    values = {k: v for k, v in asdict(options).items() if k != "max_megapixels"}
    text = json.dumps(values, sort_keys=True)
    return hashlib.sha256(text.encode()).hexdigest()[:16]


@dataclass
class _Job:
    """One process at work."""

    source: Source
    path: Path
    process: BaseProcess
    done: set[int]
    since: float
    opened: int = 0  # the last page that it could open


@dataclass
class _Run:
    """The processes of one run, and what they bring."""

    store: Path
    catalogue: Catalogue
    plan: Plan
    options: Options
    limits: Limits
    console: Console
    read: Reader
    failed: int = 0
    _jobs: dict[Connection, _Job] = field(default_factory=dict)

    def work(self) -> None:
        """Until every content of the plan has its rows."""
        waiting = iter(self.plan.todo)
        self._fill(waiting)
        while self._jobs:
            for pipe in wait(list(self._jobs), timeout=_LOOK_EVERY_S):
                assert isinstance(pipe, Connection)
                self._hear(pipe)
            for pipe, job in list(self._jobs.items()):
                if time.monotonic() - job.since > self.limits.seconds:
                    self._lost(pipe, f"it took more than {self.limits.seconds:g} s")
            self._fill(waiting)

    def stop(self) -> None:
        """End what is still at work."""
        for pipe, job in self._jobs.items():
            job.process.kill()
            pipe.close()

    def _fill(self, waiting: Iterator[Source]) -> None:
        while len(self._jobs) < self.limits.processes:
            source = next(waiting, None)
            if source is None:
                return
            done = set(self.catalogue.pages_of(source.sha256, self.plan.options))
            try:
                path = source.path
                if source.member is not None:
                    path = unpack(source, temporary(self.store))
            except OSError as error:
                raise CannotWrite(f"a zip file cannot be unpacked ({error.strerror})") from None
            self._start(source, path, done)

    def _start(self, source: Source, path: Path, done: set[int]) -> None:
        memory_mb = self.limits.memory_mb
        name = source.sha256 + Path(source.name).suffix.lower()
        task = Task(path, name, self.options, frozenset(done), memory_mb, self.read)
        process, pipe = start(task)
        self._jobs[pipe] = _Job(source, path, process, done, time.monotonic())

    def _hear(self, pipe: Connection) -> None:
        """Take one message of a process."""
        job = self._jobs[pipe]
        try:
            message = pipe.recv()
        except (EOFError, OSError):
            self._lost(pipe, "the program failed on it, or it took too much memory")
            return
        job.since = time.monotonic()
        if isinstance(message, int):
            job.opened = message
        elif isinstance(message, PageDone):
            self._keep(job, message)
        else:
            self._end(pipe)

    def _lost(self, pipe: Connection, reason: str) -> None:
        """A process ended before its time: its page has failed, the others go on."""
        job = self._jobs.pop(pipe)
        job.process.kill()
        job.process.join()
        pipe.close()
        if job.opened and job.opened not in job.done:
            self._keep(job, PageDone(PageRow(job.opened, FAILED, reason), {}))
            self._start(job.source, job.path, job.done)
            return
        # It could not open the next page, and there is no way to those behind it.
        page = job.opened + 1 if job.opened + 1 not in job.done else max(job.done) + 1
        reason += "; pages behind it, if there are any, cannot be reached"
        self._keep(job, PageDone(PageRow(page, FAILED, reason), {}))
        self._finish(job)

    def _keep(self, job: _Job, page: PageDone) -> None:
        """Put a page's files in place, then commit its row."""
        sha256, row = job.source.sha256, page.row
        if page.files:
            stem = stem_of(sha256, self.plan.options, row.page)
            put(self.store, stem, page.files)
            row = replace(row, stem=stem)
        self.catalogue.add_page(sha256, self.plan.options, row)
        job.done.add(row.page)
        if row.status == FAILED:
            self.failed += 1
            error = at(InputError(row.reason), job.source.name, row.page or None)
            self.console.line(str(error))

    def _end(self, pipe: Connection) -> None:
        job = self._jobs.pop(pipe)
        pipe.close()
        job.process.join()
        self._finish(job)

    def _finish(self, job: _Job) -> None:
        if not job.done:
            self._keep(job, PageDone(PageRow(0, FAILED, "there is no page in it"), {}))
        self.catalogue.finish(job.source.sha256, self.plan.options)
        if job.source.member is not None:
            remove(job.path)
        self.console.end()

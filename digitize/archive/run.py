"""One run over an archive: what is to do is settled first, then done page by page.

Each page has a process of its own, here or on another machine; the pages of one file are read at
the same time. The parent alone writes: a page's files first, then its row.
"""

import sys
from collections import deque
from collections.abc import Callable
from concurrent.futures import FIRST_COMPLETED, Future, wait
from contextlib import AbstractContextManager
from dataclasses import dataclass, field, replace
from functools import partial
from pathlib import Path

from digitize import CAUTION
from digitize.archive.alone import Limits
from digitize.archive.catalogue import FAILED, Catalogue, PageRow, opened
from digitize.archive.charts import Charts
from digitize.archive.contact import STATUS_WORDS, contact_sheets, sheet_name
from digitize.archive.engines import Engine, WorkerLost
from digitize.archive.plan import Plan, make_plan, options_key
from digitize.archive.sources import Source, remove, unpack
from digitize.archive.store import CATALOGUE, locked, put, stem_of, temporary
from digitize.archive.worker import PRELOAD, Outcome, PageDone, Reader, Task, perform
from digitize.console import Console, console
from digitize.errors import CannotWrite, InputError, at, shown
from digitize.options import Options
from digitize.safe_write import write_files


@dataclass(frozen=True)
class Kept:
    """What the store is to hold beside what the pages say: nothing of it unless it is asked for.

    `header` are the patterns for the header's fields where its printing is kept, else None.
    """

    charts: Charts | None = None
    header: tuple[str, ...] | None = None


NOTHING_KEPT = Kept()


def run_archive(
    folders: list[Path],
    store: Path,
    options: Options,
    limits: Limits,
    engine: AbstractContextManager[Engine],
    *,
    read: Reader,
    preload: tuple[str, ...] = PRELOAD,
    kept: Kept = NOTHING_KEPT,
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
    engine : context manager of Engine
        Who does the work.
    read : callable
        Reads one page; must be a function of a module.
    preload : tuple of str
        Modules that are loaded before pages are forked.
    kept : Kept
        What a person says of the sources, and whether the printing of the header is kept.
    again_failed : bool
        Whether to take up again what failed before.
    """
    try:
        with locked(store), opened(store / CATALOGUE) as catalogue:
            key = options_key(options, kept.header)
            plan = make_plan(folders, key, catalogue, kept.charts, again_failed=again_failed)
            with console(len(plan.todo)) as shown_on:
                for text in (plan, *plan.doubts, *plan.unreadable):
                    shown_on.line(str(text))
                task_of = partial(Task, options=options, limits=limits, read=read, preload=preload)
                with engine as at_work:
                    _Run(store, catalogue, plan, shown_on, at_work, task_of).work()
            counts = catalogue.counts()
            for name, sheet in contact_sheets(catalogue.rows(), counts):
                write_files({store / name: sheet}, replace=True)
    except InputError as error:
        print(error, file=sys.stderr)
        return 1
    told = ", ".join(f"{counts[status]} {word}" for status, word in STATUS_WORDS.items())
    print(f"Pages in the store: {told}. Look at {shown(store / sheet_name(1))}.\n{CAUTION}")
    return shown_on.failed + len(plan.unreadable)


@dataclass(eq=False)
class _File:
    """One content at work: the pages that have a row, and those that are to come."""

    source: Source
    path: Path
    done: set[int]
    left: set[int] | None = None  # None: nobody has counted them yet


@dataclass
class _Run:
    """The pages of one run that are under way, and what they bring."""

    store: Path
    catalogue: Catalogue
    plan: Plan
    console: Console
    engine: Engine
    task_of: Callable[[Path, str, int], Task]
    _ready: deque[tuple[_File, int]] = field(default_factory=deque)
    _under_way: dict[Future[Outcome], tuple[_File, Task]] = field(default_factory=dict)

    def work(self) -> None:
        """Until every content of the plan has its rows."""
        waiting = deque(self.plan.todo)
        while True:
            while len(self._under_way) < self.engine.at_once and (self._ready or waiting):
                file, page = self._ready.popleft() if self._ready else self._open(waiting.popleft())
                self._begin(file, page)
            if not self._under_way:
                return
            for future in wait(self._under_way, return_when=FIRST_COMPLETED).done:
                self._take(future)

    def _open(self, source: Source) -> tuple[_File, int]:
        """A content taken up at its first page without a row."""
        done = set(self.catalogue.pages_of(source.sha256, self.plan.options))
        try:
            path = source.path.resolve()
            if source.member is not None:
                path = unpack(source, temporary(self.store)).resolve()
        except OSError as error:
            raise CannotWrite(f"a zip file cannot be unpacked ({error.strerror})") from None
        first = next(page for page in range(1, len(done) + 2) if page not in done)
        return _File(source, path, done), first

    def _begin(self, file: _File, page: int) -> None:
        name = file.source.sha256 + Path(file.source.name).suffix.lower()
        task = self.task_of(file.path, name, page)
        self._under_way[self.engine.submit(perform, task)] = file, task

    def _take(self, future: Future[Outcome]) -> None:
        """What became of a page; the first of a file tells how many others there are."""
        file, task = self._under_way.pop(future)
        try:
            outcome = self.engine.outcome(future)
        except WorkerLost as lost:
            outcome = Outcome(None, PageDone(PageRow(task.page, FAILED, str(lost)), {}))
        done = outcome.done
        if file.left is None:
            file.left = set(range(1, (outcome.pages or 0) + 1)) - file.done - {task.page}
            self._ready.extend((file, page) for page in sorted(file.left))
        elif done is not None and done.row.page == 0:  # it was opened well for another page
            done = replace(done, row=replace(done.row, page=task.page))
        if done is not None:
            self._keep(file, done)
        file.left.discard(task.page)
        if not file.left:
            self._finish(file)

    def _keep(self, file: _File, page: PageDone) -> None:
        """Put a page's files in place, then commit its row."""
        sha256, row = file.source.sha256, page.row
        if page.files:
            stem = stem_of(sha256, self.plan.options, row.page)
            put(self.store, stem, page.files)
            row = replace(row, stem=stem)
        self.catalogue.add_page(sha256, self.plan.options, row)
        file.done.add(row.page)
        if row.status == FAILED:
            self.console.fail(at(InputError(row.reason), file.source.name, row.page or None))

    def _finish(self, file: _File) -> None:
        if not file.done:
            self._keep(file, PageDone(PageRow(0, FAILED, "there is no page in it"), {}))
        self.catalogue.finish(file.source.sha256, self.plan.options)
        if file.source.member is not None:
            remove(file.path)
        self.console.end()

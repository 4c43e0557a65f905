"""A process of its own for each page, within limits of time and memory.

The process writes nothing: how many pages its file has and what became of its own page come back
over a pipe, as plain records. What ends the process (a crash of a decoder, a page that takes too
long or too much memory) costs that page. It ends itself when whoever waits for it is gone.
"""

import dataclasses
import gc
import multiprocessing
import os
import resource
import sys
import threading
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess
from pathlib import Path

from digitize.archive.catalogue import FAILED, PageRow
from digitize.errors import InputError
from digitize.options import Options
from digitize.pages import Page, count_pages, open_pages

Reader = Callable[[Page, Options], tuple[PageRow, Mapping[str, bytes]]]
MIB = 2**20
_LOOK_EVERY_S = 0.5


@dataclass(frozen=True)
class Limits:
    """What one page may take."""

    seconds: float = 120.0
    memory_mb: int = 6144  # of address space, of which libraries take a share


@dataclass(frozen=True)
class Task:
    """One page to read; everything in it can be sent to another machine."""

    path: Path
    name: str  # of the source in its results: by content, for its own may name a patient
    page: int  # from 1
    options: Options
    limits: Limits
    read: Reader


@dataclass(frozen=True)
class PageDone:
    """One page is read, or cannot be: its row, and the contents of its files by ending."""

    row: PageRow
    files: Mapping[str, bytes]


@dataclass(frozen=True)
class Outcome:
    """How many pages the file has, None where that was not found out, and what became of the page.

    `done` is None where the file has no such page.
    """

    pages: int | None
    done: PageDone | None


def perform(task: Task, stopped: Callable[[], bool] = lambda: False) -> Outcome:
    """Read one page in a process of its own and wait for what becomes of it.

    Parameters
    ----------
    task : Task
        The page and its limits: the time counts once for opening the file and once for the page.
    stopped : callable
        Asked now and then; once it is true, the process is ended and the outcome means nothing.
    """
    process, pipe = _start(task)
    try:
        return _listen(task, pipe, stopped)
    finally:
        process.kill()
        process.join()
        pipe.close()


def _listen(task: Task, pipe: Connection, stopped: Callable[[], bool]) -> Outcome:
    """What the process says, until it has ended or must end."""
    pages: int | None = None
    since = time.monotonic()
    while True:
        if not pipe.poll(_LOOK_EVERY_S):
            if time.monotonic() - since > task.limits.seconds:
                return _lost(task, pages, f"it took more than {task.limits.seconds:g} s")
            if stopped():
                return Outcome(pages, None)
            continue
        try:
            message: Message = pipe.recv()
        except (EOFError, OSError):
            return _lost(task, pages, "the program failed on it, or it took too much memory")
        since = time.monotonic()
        if isinstance(message, Outcome):
            return message
        pages = message


def _lost(task: Task, pages: int | None, reason: str) -> Outcome:
    """The process ended before its time: while it opened the file, or at its page."""
    page = task.page
    if pages is None:
        page, reason = 0, f"{reason}, while it was opened"
    return Outcome(pages, PageDone(PageRow(page, FAILED, reason), {}))


# None: libraries are loaded; the number of pages: the file is open; the end
Message = int | Outcome | None


def _start(task: Task) -> tuple[BaseProcess, Connection]:
    """A process at work on a task, and the pipe on which its messages come."""
    context = multiprocessing.get_context("forkserver")
    # Loaded once, in the process from which all others are forked: the image libraries, and the
    # command, which each of them would import again.
    context.set_forkserver_preload(["digitize.archive.reading", "digitize.cli"])
    ours, theirs = context.Pipe()
    process = context.Process(target=_work, args=(task, theirs), daemon=True)
    process.start()
    theirs.close()
    return process, ours


def _work(task: Task, pipe: Connection) -> None:
    """The life of the process."""
    gc.freeze()  # what was loaded before the fork stays: looking it through would copy it
    _be_silent()
    threading.Thread(target=_end_with_parent, args=(pipe,), daemon=True).start()
    pipe.send(None)
    limit = task.limits.memory_mb * MIB
    resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))  # a core file would hold the page
    try:
        pages = count_pages(task.path)
    except InputError as error:
        pipe.send(Outcome(None, _failed(0, error)))
        return
    pipe.send(pages)
    pipe.send(Outcome(pages, _page_done(task)))


def _page_done(task: Task) -> PageDone | None:
    """The page read; None where there is no such page."""
    errors: list[InputError] = []
    limit = task.options.max_megapixels
    try:
        pages = open_pages(task.path, max_megapixels=limit, only=task.page, on_error=errors.append)
        page = next(pages, None)
    except InputError as error:
        return _failed(task.page, error)
    if page is None:
        return _failed(task.page, errors[0]) if errors else None
    return _read(page, task)


def _read(page: Page, task: Task) -> PageDone:
    """One page read; a mistake of the program's own ends the process, an error of the page not."""
    began = time.monotonic()
    page = dataclasses.replace(page, source=dataclasses.replace(page.source, file_name=task.name))
    try:
        row, files = task.read(page, task.options)
    except InputError as error:
        return _failed(task.page, error)
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024 / MIB
    seconds = time.monotonic() - began
    return PageDone(
        dataclasses.replace(row, seconds=round(seconds, 3), peak_mb=round(peak_mb, 1)), files
    )


def _failed(page: int, error: InputError) -> PageDone:
    """The error's words without the name of the file, which may name a patient."""
    reason = str(error).removeprefix(f"{error.place}: ")
    return PageDone(PageRow(page, FAILED, reason), {})


def _be_silent() -> None:
    """Send away what native libraries print: it may quote the page."""
    nowhere = os.open(os.devnull, os.O_RDWR)
    for stream in (sys.stdout, sys.stderr):
        stream.flush()
    for number in (1, 2):
        os.dup2(nowhere, number)


def _end_with_parent(pipe: Connection) -> None:
    """Wait for the other end of the pipe to close, which it does when its process ends."""
    try:
        pipe.recv()
    except (EOFError, OSError):
        os._exit(1)

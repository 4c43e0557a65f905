"""A process of its own that reads the pages of one file, within limits of time and memory.

It writes nothing: each page comes back over a pipe as a row for the catalogue and the contents of
its files. What ends the process (a crash of a decoder, a page that takes too long or too much
memory) costs the page it was at. It ends itself when the run that started it is gone.
"""

import dataclasses
import multiprocessing
import os
import resource
import sys
import threading
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from multiprocessing.connection import Connection
from pathlib import Path

from digitize.archive.catalogue import FAILED, PageRow
from digitize.errors import InputError
from digitize.options import Options
from digitize.pages import Page, open_pages

Reader = Callable[[Page, Options], tuple[PageRow, Mapping[str, bytes]]]
MIB = 2**20


@dataclass(frozen=True)
class Task:
    """What one process is to do: the pages of a file but those that are done."""

    path: Path
    name: str  # of the source in its results: by content, for its own may name a patient
    options: Options
    done: frozenset[int]
    memory_mb: int
    read: Reader


@dataclass(frozen=True)
class PageDone:
    """One page is read, or cannot be."""

    row: PageRow
    files: Mapping[str, bytes]


# number of the page that is open (0: none yet), a page done, the end of the file
Message = int | PageDone | None


def start(task: Task) -> tuple[multiprocessing.process.BaseProcess, Connection]:
    """A process at work on a task, and the pipe on which its messages come."""
    context = multiprocessing.get_context("forkserver")
    # Image libraries are loaded once, in the process from which all others are forked.
    context.set_forkserver_preload(["digitize.archive.reading"])
    ours, theirs = context.Pipe()
    process = context.Process(target=_work, args=(task, theirs), daemon=True)
    process.start()
    theirs.close()
    return process, ours


def _work(task: Task, pipe: Connection) -> None:
    """The life of the process."""
    _be_silent()
    threading.Thread(target=_end_with_parent, args=(pipe,), daemon=True).start()
    pipe.send(0)  # the time of the first page begins when the libraries are loaded
    limit = task.memory_mb * MIB
    resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))  # a core file would hold the page
    number = 0

    def fail(error: InputError) -> None:
        nonlocal number
        number += 1
        pipe.send(number)
        if number not in task.done:
            pipe.send(_failed(number, error))

    try:
        pages = open_pages(task.path, max_megapixels=task.options.max_megapixels, on_error=fail)
        for page in pages:
            number = page.source.page
            pipe.send(number)
            if number not in task.done:
                pipe.send(_read(page, task))
    except InputError as error:
        if number == 0 and 0 not in task.done:
            pipe.send(_failed(0, error))
    pipe.send(None)


def _read(page: Page, task: Task) -> PageDone:
    """One page read; a mistake of the program's own ends the process, an error of the page not."""
    began = time.monotonic()
    page = dataclasses.replace(page, source=dataclasses.replace(page.source, file_name=task.name))
    try:
        row, files = task.read(page, task.options)
    except InputError as error:
        return _failed(page.source.page, error)
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

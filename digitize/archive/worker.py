"""One page of a file, opened and read in a process of its own.

How many pages the file has and what became of the page come back as plain records.
"""

import dataclasses
import resource
import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

from digitize.archive.alone import MIB, Limits, run_alone
from digitize.archive.catalogue import FAILED, PageRow
from digitize.errors import InputError
from digitize.options import Options
from digitize.pages import Page, count_pages, open_pages

Reader = Callable[[Page, Options], tuple[PageRow, Mapping[str, bytes]]]
# Loaded before pages are forked: this, and the command, which each of them would import again.
PRELOAD = ("digitize.archive.worker", "digitize.cli")


@dataclass(frozen=True)
class Task:
    """One page to read; everything in it can be sent to another machine."""

    path: Path
    name: str  # of the source in its results: by content, for its own may name a patient
    page: int  # from 1
    options: Options
    limits: Limits
    read: Reader
    preload: tuple[str, ...] = PRELOAD


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
    ended = run_alone(partial(_steps, task), task.limits, task.preload, stopped)
    match ended.steps:
        case (pages, done):
            return Outcome(pages, done)
        case (pages,):
            return Outcome(pages, PageDone(PageRow(task.page, FAILED, ended.lost), {}))
    reason = f"{ended.lost}, while it was opened"
    return Outcome(None, PageDone(PageRow(0, FAILED, reason), {}))


def _steps(task: Task) -> Iterator[Any]:
    """The number of pages, None where the file cannot be opened, and what became of the page."""
    try:
        pages = count_pages(task.path)
    except InputError as error:
        yield None
        yield _failed(0, error)
        return
    yield pages
    yield _page_done(task)


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

"""What a run shows: results on stdout, everything else on stderr, and a bar only for a person.

The bar stands on stderr while that is a terminal and vanishes at the end; piped, there is none.
"""

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Protocol

from digitize.errors import InputError


class Bar(Protocol):
    """The part of a progress bar that is used here."""

    def say(self, text: str) -> None:
        """Say what is being done."""

    def advance(self) -> None:
        """One file is done."""


class Console:
    """Lines and progress of one run, and a stopwatch over its stages."""

    def __init__(self, bar: Bar | None = None) -> None:
        self._bar = bar
        self.failed = 0  # files and pages that could not be used
        self._file = ""
        self._laps: list[tuple[str, float]] = []  # stage, when it began

    def begin(self, file_name: str) -> None:
        """A file is taken up."""
        self._file = file_name
        self._laps = []

    def end(self) -> None:
        """The file is done."""
        if self._bar is not None:
            self._bar.advance()

    def stage(self, name: str) -> None:
        """A stage begins; "page" is the first of each page."""
        if name == "page":
            self._laps = []
        self._laps.append((name, time.perf_counter()))
        if self._bar is not None:
            self._bar.say(f"{self._file} {name}")

    def timings(self) -> str:
        """Seconds that each stage of the page took, up to now."""
        ends = [start for _, start in self._laps[1:]] + [time.perf_counter()]
        parts = [
            f"{name} {end - start:.2f}"
            for (name, start), end in zip(self._laps, ends, strict=True)
            if name
        ]
        total_s = ends[-1] - self._laps[0][1] if self._laps else 0.0
        return f"seconds: {', '.join(parts)}; all {total_s:.2f}"

    def fail(self, error: InputError) -> None:
        """Say what could not be used, and count it."""
        self.failed += 1
        self.line(str(error))

    def line(self, text: str) -> None:
        """A line for the person, on stderr."""
        print(text, file=sys.stderr)

    def result(self, text: str) -> None:
        """A result, on stdout."""
        print(text)


@contextmanager
def console(files: int) -> Iterator[Console]:
    """A console for a run over so many files."""
    if not sys.stderr.isatty():
        yield Console()
        return
    from rich.console import Console as Terminal
    from rich.progress import (
        BarColumn,
        MofNCompleteColumn,
        Progress,
        TextColumn,
        TimeRemainingColumn,
    )

    columns = (
        TextColumn("{task.description}", markup=False),
        BarColumn(),
        MofNCompleteColumn(),
        TimeRemainingColumn(),
    )
    terminal = Terminal(stderr=True)
    # Lines printed meanwhile go above the bar; a stdout that is piped stays a pipe.
    with Progress(
        *columns, console=terminal, transient=True, redirect_stdout=sys.stdout.isatty()
    ) as progress:
        yield Console(_RichBar(progress, files))


class _RichBar:
    """A bar of the rich library."""

    def __init__(self, progress, files: int) -> None:  # type: ignore[no-untyped-def]
        self._progress = progress
        self._task = progress.add_task("", total=files)
        self._done, self._began_s = 0, time.monotonic()

    def say(self, text: str) -> None:
        self._progress.update(self._task, description=text)

    def advance(self) -> None:
        self._progress.advance(self._task)
        self._done += 1
        rate = 60 * self._done / max(time.monotonic() - self._began_s, 1e-3)
        self._progress.update(self._task, description=f"{rate:.1f} files a minute")

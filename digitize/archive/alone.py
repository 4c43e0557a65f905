"""A piece of work in a process of its own, within limits of time and memory.

The process writes nothing: what it finds comes back over a pipe, as plain records. What ends it (a
crash of a library, a hang, too much memory) costs that piece of work alone. It ends itself when
whoever waits for it is gone.
"""

import gc
import multiprocessing
import os
import resource
import sys
import threading
import time
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess
from typing import Any

MIB = 2**20
_LOOK_EVERY_S = 0.5

Work = Callable[[], Iterable[Any]]  # what it yields is sent, step by step


@dataclass(frozen=True)
class Limits:
    """What one page may take."""

    seconds: float = 120.0
    memory_mb: int = 6144  # of address space, of which libraries take a share


@dataclass(frozen=True)
class Ended:
    """What a piece of work yielded, and why it was ended before its time; "" where it was not."""

    steps: tuple[Any, ...]
    lost: str = ""


def run_alone(
    work: Work, limits: Limits, preload: Sequence[str], stopped: Callable[[], bool]
) -> Ended:
    """Do a piece of work in a process of its own and wait for its end.

    Parameters
    ----------
    work : callable
        Gives an iterable; each thing in it is sent back when it comes, and the clock starts anew.
    limits : Limits
        Time for each step, address space for all.
    preload : sequence of str
        Modules that are loaded once, in the process from which all others are forked; what was
        asked for first stays.
    stopped : callable
        Asked now and then; once it is true, the process is ended.
    """
    process, pipe = _start(work, limits, preload)
    try:
        return _listen(limits, pipe, stopped)
    finally:
        process.kill()
        process.join()
        pipe.close()


def _listen(limits: Limits, pipe: Connection, stopped: Callable[[], bool]) -> Ended:
    """What the process sends, until it has ended or must end."""
    steps: list[Any] = []
    since = time.monotonic()
    while True:
        if not pipe.poll(_LOOK_EVERY_S):
            if time.monotonic() - since > limits.seconds:
                return Ended(tuple(steps), f"it took more than {limits.seconds:g} s")
            if stopped():
                return Ended(tuple(steps), "the run was left")
            continue
        try:
            kind, step = pipe.recv()
        except (EOFError, OSError):
            reason = "the program failed on it, or it took too much memory"
            return Ended(tuple(steps), reason)
        since = time.monotonic()
        if kind == _END:
            return Ended(tuple(steps))
        if kind == _STEP:
            steps.append(step)


_BEGUN, _STEP, _END = "begun", "step", "end"


def _start(work: Work, limits: Limits, preload: Sequence[str]) -> tuple[BaseProcess, Connection]:
    """A process at work, and the pipe on which its messages come."""
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["digitize.archive.one_core", *preload])
    ours, theirs = context.Pipe()
    process = context.Process(target=_live, args=(work, limits, theirs), daemon=True)
    process.start()
    theirs.close()
    return process, ours


def _live(work: Work, limits: Limits, pipe: Connection) -> None:
    """The life of the process."""
    gc.freeze()  # what was loaded before the fork stays: looking it through would copy it
    _be_silent()
    threading.Thread(target=_end_with_parent, args=(pipe,), daemon=True).start()
    pipe.send((_BEGUN, None))  # libraries are loaded: the clock starts
    limit = limits.memory_mb * MIB
    resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))  # a core file would hold the page
    for step in work():
        pipe.send((_STEP, step))
    pipe.send((_END, None))


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

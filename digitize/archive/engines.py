"""Who does the work of a run: processes of this machine, or workers of a dask cluster.

An engine takes up pieces of work and says what became of each, with the number of them to have
under way. Both kinds run the same functions on the same records, so that a page comes out the same
whoever reads it.
"""

import multiprocessing
import threading
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import (
    FIRST_COMPLETED,
    CancelledError,
    Executor,
    Future,
    ThreadPoolExecutor,
    wait,
)
from contextlib import AbstractContextManager, contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

from digitize import program_version
from digitize.errors import CannotWrite, UnreadableFile, needs_extra

if TYPE_CHECKING:
    from distributed import Client

_AHEAD = 2  # pages per thread of a cluster: none waits for the next one to be sent
_ANSWER_S = 15  # for a scheduler to answer

Task = TypeVar("Task")
Done = TypeVar("Done")


class WorkerLost(Exception):  # noqa: N818 - it says what happened
    """Whoever did a piece of work is gone, again and again; the text says so in words."""


@dataclass(frozen=True)
class Engine:
    """`submit` has a function do a task, `outcome` says what came of it or raises `WorkerLost`."""

    submit: Callable[[Callable[..., Any], Any], "Future[Any]"]
    at_once: int
    outcome: Callable[["Future[Any]"], Any] = lambda future: future.result()


def engine_for(address: str | None, processes: int) -> AbstractContextManager[Engine]:
    """The workers of a scheduler where its address is given, else processes of this machine."""
    return this_machine(processes) if address is None else cluster(address)


@contextmanager
def this_machine(processes: int) -> Iterator[Engine]:
    """So many processes at a time here; those at work are ended when the run is left.

    Functions are told by a second argument, a callable, whether that is so.
    """
    stopped = threading.Event()
    with ThreadPoolExecutor(processes) as pool:
        try:
            yield Engine(lambda do, task: pool.submit(do, task, stopped.is_set), processes)
        finally:
            stopped.set()


@contextmanager
def cluster(address: str) -> Iterator[Engine]:
    """The workers of a dask scheduler, such as tcp://host:8786; sources and store are shared.

    A page whose worker died is done again by another one, and lost where several died on it.

    Raises
    ------
    UnreadableFile
        The package is not installed, or no scheduler answers there.
    """
    try:
        from distributed import Client
    except ImportError:
        raise needs_extra("a cluster", "cluster") from None
    try:
        client = Client(address, timeout=_ANSWER_S, set_as_default=False)
    except (OSError, ValueError, TimeoutError):
        raise UnreadableFile(
            f"no dask scheduler answers at {address}: give its address, such as tcp://host:8786"
        ) from None
    with client:
        threads = sum(client.nthreads().values())
        if not threads:
            raise UnreadableFile(f"the dask scheduler at {address} has no worker: start some")
        _check_workers(client)
        executor: Executor = client.get_executor()
        yield Engine(executor.submit, threads * _AHEAD, _of_cluster)


def each_done(
    engine: Engine, do: Callable[..., Done], tasks: Iterable[Task]
) -> Iterator[tuple[Task, Done | WorkerLost]]:
    """Every task with what came of it, as it comes; no more of them under way than is useful."""
    rest = iter(tasks)
    under_way: dict[Future[Done], Task] = {}
    while True:
        while len(under_way) < engine.at_once and (task := next(rest, None)) is not None:
            under_way[engine.submit(do, task)] = task
        if not under_way:
            return
        for future in wait(under_way, return_when=FIRST_COMPLETED).done:
            task = under_way.pop(future)
            try:
                yield task, engine.outcome(future)
            except WorkerLost as lost:
                yield task, lost


def _check_workers(client: "Client") -> None:
    """Refuse workers of another version, or that may not have processes of their own."""
    try:
        facts = set(client.run(_facts_of_worker).values())
    except ImportError:
        facts = {(None, False)}
    if {version for version, _ in facts} != {program_version()}:
        raise UnreadableFile("the workers lack this version of the program: install it there")
    if any(daemon for _, daemon in facts):
        raise UnreadableFile(
            "the workers may not have processes of their own: start them with "
            "DASK_DISTRIBUTED__WORKER__DAEMON=False"
        )


def _facts_of_worker() -> tuple[str | None, bool]:
    """Version of the program there, and whether the worker is a process that may have no others."""
    return program_version(), multiprocessing.current_process().daemon


def _of_cluster(future: "Future[Done]") -> Done:
    from distributed import KilledWorker

    try:
        return future.result()
    except KilledWorker:
        raise WorkerLost("the workers that took it up died, one after the other") from None
    except (CancelledError, OSError):
        raise CannotWrite("the cluster is gone: start the run again, it continues") from None

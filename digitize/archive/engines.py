"""Who does the work of a run: processes of this machine, or workers of a dask cluster.

An engine is an executor of `concurrent.futures` with the number of pages to have under way. Both
run the same function on the same records, so that a page comes out the same whoever reads it.
"""

import multiprocessing
import threading
from collections.abc import Callable, Iterator
from concurrent.futures import CancelledError, Executor, Future, ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

from digitize import program_version
from digitize.archive.catalogue import FAILED, PageRow
from digitize.archive.worker import Outcome, PageDone, Task, perform
from digitize.errors import CannotWrite, UnreadableFile

if TYPE_CHECKING:
    from distributed import Client

_AHEAD = 2  # pages per thread of a cluster: none waits for the next one to be sent
_ANSWER_S = 15  # for a scheduler to answer


@dataclass(frozen=True)
class Engine:
    """`submit` takes up a page, `outcome` says what became of it."""

    submit: Callable[[Task], "Future[Outcome]"]
    at_once: int
    outcome: Callable[[Task, "Future[Outcome]"], Outcome] = lambda task, future: future.result()


@contextmanager
def this_machine(processes: int) -> Iterator[Engine]:
    """So many processes at a time here; those at work are ended when the run is left."""
    stopped = threading.Event()
    with ThreadPoolExecutor(processes) as pool:
        try:
            yield Engine(lambda task: pool.submit(perform, task, stopped.is_set), processes)
        finally:
            stopped.set()


@contextmanager
def cluster(address: str) -> Iterator[Engine]:
    """The workers of a dask scheduler, such as tcp://host:8786; sources and store are shared.

    A page whose worker died is read again by another one; a page that several workers died on is
    recorded as failed.

    Raises
    ------
    UnreadableFile
        The package is not installed, or no scheduler answers there.
    """
    try:
        from distributed import Client
    except ImportError:
        raise UnreadableFile(
            "a cluster needs one more package: install millivellum[cluster]"
        ) from None
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
        yield Engine(lambda task: executor.submit(perform, task), threads * _AHEAD, _of_cluster)


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


def _of_cluster(task: Task, future: "Future[Outcome]") -> Outcome:
    from distributed import KilledWorker

    try:
        return future.result()
    except KilledWorker:
        reason = "the workers that read it died, one after the other"
        return Outcome(None, PageDone(PageRow(task.page, FAILED, reason), {}))
    except (CancelledError, OSError):
        raise CannotWrite("the cluster is gone: start the run again, it continues") from None

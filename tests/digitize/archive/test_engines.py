"""The same work by processes of this machine and by the workers of a cluster."""

import os
import signal
import sqlite3
import threading
import time
from contextlib import closing

import dask
import pytest
from distributed import Client, LocalCluster

from digitize.archive.alone import Limits
from digitize.archive.engines import cluster, this_machine
from digitize.archive.run import run_archive
from digitize.archive.worker import Task, perform
from digitize.errors import UnreadableFile
from digitize.options import Options
from tests.digitize.archive import stand_in as made

WORKERS, FILES, PAGES = 3, 4, 6


def rows(store):
    with closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
        return db.execute("SELECT sha256, page, status, stem FROM page").fetchall()


def task(path, page, seconds=20.0):
    return Task(path, "x.tiff", page, Options(), Limits(seconds, 4096), made.read)


# ---- one page --------------------------------------------------------------------------------


def test_one_page_alone_is_read_and_the_pages_are_counted(tmp_path):
    path = made.save(tmp_path / "x.tiff", made.CRASH, made.READ, made.CRASH)
    outcome = perform(task(path, 2))
    assert (outcome.pages, outcome.done.row.page, outcome.done.row.status) == (3, 2, "good")
    assert perform(task(path, 3)).done.row.reason.startswith("the program failed on it")
    beyond = perform(task(path, 4))
    assert (beyond.pages, beyond.done) == (3, None)


def test_pages_of_one_file_are_read_at_the_same_time(tmp_path):
    """Two pages that hang until their limit: one after the other would take two limits."""
    path = made.save(tmp_path / "scans" / "x.tiff", made.HANG, made.HANG, made.HANG, made.HANG)
    began = time.monotonic()
    limits, store = Limits(3.0, 4096), tmp_path / "store"
    run_archive([path], store, Options(), limits, this_machine(4), read=made.read)
    assert time.monotonic() - began < 4 * 3.0
    assert [row[2] for row in rows(store)] == ["failed"] * 4


def test_leaving_a_run_ends_its_pages_at_once(tmp_path):
    path = made.save(tmp_path / "x.tiff", made.HANG)
    began = time.monotonic()
    with this_machine(1) as engine:
        engine.submit(perform, task(path, 1, seconds=600.0))
    assert time.monotonic() - began < 60


# ---- a cluster -------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def workers():
    """Several workers of this machine, each a process that may have processes of its own."""
    with (
        dask.config.set({"distributed.worker.daemon": False}),
        LocalCluster(
            n_workers=WORKERS, threads_per_worker=1, dashboard_address=":0", memory_limit=0
        ) as made_cluster,
    ):
        yield made_cluster.scheduler_address


def test_a_worker_that_is_killed_costs_no_page_and_doubles_none(tmp_path, workers):
    scans, store = tmp_path / "scans", tmp_path / "store"
    for number in range(FILES):
        made.save(scans / f"{number}.tiff", *[made.SLOW] * PAGES, number=number)
    with Client(workers, set_as_default=False) as client:
        victims = list(client.run(os.getpid).values())
    killer = threading.Thread(target=_kill_when_busy, args=(store, victims[0]))
    killer.start()
    limits = Limits(20.0, 4096)
    failed = run_archive([scans], store, Options(), limits, cluster(workers), read=made.read)
    killer.join()
    assert failed == 0
    found = rows(store)
    assert len(found) == len({row[:2] for row in found}) == FILES * PAGES
    for sha256, page, _, stem in found:
        for end in (".csv", ".json", ".overlay.png"):
            assert (store / f"{stem}{end}").read_text().startswith(f"{sha256} {page}")
    with Client(workers, set_as_default=False) as client:
        assert victims[0] not in client.run(os.getpid).values()


def _kill_when_busy(store, victim):
    """Kill one worker once the first rows are there."""
    while True:
        try:
            if len(rows(store)) >= 3:
                break
        except sqlite3.OperationalError:  # not yet made
            pass
        time.sleep(0.02)
    os.kill(victim, signal.SIGKILL)


def test_workers_that_may_have_no_processes_are_refused():
    with dask.config.set({"distributed.worker.daemon": True}):
        few = LocalCluster(n_workers=1, threads_per_worker=1, dashboard_address=":0")
    with few, pytest.raises(UnreadableFile, match="DAEMON=False"), cluster(few.scheduler_address):
        pass


def test_no_scheduler_and_no_address_are_told(monkeypatch):
    monkeypatch.setattr("digitize.archive.engines._ANSWER_S", 0.2)
    for address in ("tcp://127.0.0.1:9", "nonsense"):
        with pytest.raises(UnreadableFile, match="no dask scheduler answers"), cluster(address):
            pass

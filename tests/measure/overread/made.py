"""ECGs to over-read: a digital one that is quickly read, and a sample page."""

import contextlib
import functools
import socket
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from digitize.options import Options
from digitize.read import Stages, read_stages
from digitize.tracing import LEADS
from measure.overread.chain import Chain
from measure.overread.items import Item
from measure.overread.session import Session
from measure.overread.worklist import Worklist
from measure.reading import Person
from measure.sources import tracing_from_samples
from tests.drawn.heart import HeartSpec, record_model

if TYPE_CHECKING:
    from measure.overread.guard import Guard

SAMPLES = Path(__file__).parents[3] / "sample_scans"
NOON = "2024-03-01T12:00:00+00:00"


@functools.cache
def digital_chain() -> Chain:
    """A model ECG of ten seconds; what it computed once it remembers for all tests."""
    recording = record_model(HeartSpec(qrs_ms=100.0, seed=5))
    tracing = tracing_from_samples(
        recording.mv.T, LEADS, recording.fs_hz, file_name="model.csv", sha256="ab" * 32
    )
    return Chain(tracing, None, Person())


@functools.cache
def page_stages() -> Stages:
    """A sample page with every stage; it takes some seconds."""
    (stages,) = read_stages(SAMPLES / "lafb_6x2.jpg", Options())
    return stages


@functools.cache
def page_chain() -> Chain:
    """The chain of the sample page."""
    return Chain(page_stages().tracing, page_stages(), Person())


def session(chain: Chain, folder: Path) -> Session:
    """An over-reading whose journal lies in a folder of the test's own."""
    return Session(chain, folder / "ecg.overread.json", lambda: NOON)


def worklist(folder: Path, *chains: Chain) -> Worklist:
    """A worklist of ECGs that are ready; the first keeps its journal as `session` does."""
    names = ["ecg", *(f"ecg{k}" for k in range(2, len(chains) + 1))]
    items = [Item(f"{n}.png", folder / f"{n}.png", folder / f"{n}.overread.json") for n in names]
    made = Worklist(items, Options(), Person())
    for entry, chain in zip(made.entries, chains, strict=True):
        entry.session = Session(chain, entry.item.journal, lambda: NOON)
        entry.state = "ready"
    return made


def write_csv(path: Path) -> None:
    """The model ECG as a table."""
    panels = digital_chain().reading().tracing.panels
    names = ",".join(f"{p.lead}_mV" for p in panels)
    rows = np.column_stack([panels[0].time_s, *(p.mv for p in panels)])
    np.savetxt(path, rows, delimiter=",", header=f"time_s,{names}", comments="", fmt="%.5f")


@contextlib.contextmanager
def serving(made: Worklist) -> Iterator["Guard"]:
    """The real server of a worklist on a free port, for as long as the context lasts."""
    import uvicorn

    from measure.overread.guard import HOST, Guard
    from measure.overread.server import make_app

    with socket.socket() as listener:
        listener.bind((HOST, 0))
        guard = Guard(listener.getsockname()[1])
        config = uvicorn.Config(make_app(made, guard), log_level="error", ws="none")
        server = uvicorn.Server(config)
        thread = threading.Thread(target=server.run, args=([listener],), daemon=True)
        thread.start()
        while not server.started:
            time.sleep(0.01)
        yield guard
        server.should_exit = True
        thread.join()

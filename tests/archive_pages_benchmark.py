"""What an archive does with real drawn pages: two cores against one, and memory over thousands.

    python -m tests.archive_pages_benchmark [--scaling 40] [--memory 2000] [--keep FOLDER]

The first reads pages of all families with one process and with two; on a machine that does other
work at the same time its clock says little, so the processor time of the pages stands beside it.
The second reads short strips at 100 dpi and prints the memory of the program, and of the process
from which pages are forked, once for every hundred pages.
"""

import argparse
import contextlib
import io
import os
import sqlite3
import sys
import tempfile
import time
from collections.abc import Iterator
from functools import partial
from pathlib import Path

import numpy as np
from PIL import Image

from digitize.archive.alone import Limits
from digitize.archive.catalogue import GOOD, LOOK
from digitize.archive.engines import this_machine
from digitize.archive.reading import read_for_store
from digitize.archive.run import run_archive
from digitize.archive.store import CATALOGUE
from digitize.options import Options
from tests.benchmark.pages import cases
from tests.drawn.files import write_page
from tests.drawn.heart import record_model
from tests.drawn.page import draw_page
from tests.drawn.spec import CaptureSpec, LayoutSpec, PageSpec, PaperSpec
from tests.drawn.variety import vary_heart
from tests.watching import looking

MIB = 2**20
DIFFERENT = 25  # strips that are drawn; each file of one differs from the others in one pixel
EVERY = 100  # pages between two figures of memory


def main() -> None:
    """Print what is asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--scaling", type=int, default=0)
    parser.add_argument("--memory", type=int, default=0)
    parser.add_argument("--keep", type=Path, help="folder for pages and stores, else none is kept")
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as made:
        folder = asked.keep or Path(made)
        if asked.scaling:
            one_against_two(folder, asked.scaling)
        if asked.memory:
            over_thousands(folder, asked.memory)


def one_against_two(folder: Path, pages: int) -> None:
    """The same pages with one process at a time, with two, and with one again."""
    scans = folder / "pages"
    scans.mkdir(parents=True, exist_ok=True)
    chosen = [case for case in cases(only=-(-pages // 9)) if case.family != "vector pdf"][:pages]
    for case in chosen:
        if not (scans / case.name).exists():
            write_page(draw_page(case.recording(), case.spec), scans / case.name)
    for run, processes in enumerate((1, 2, 1)):
        store = folder / f"store{run}"
        began = time.monotonic()
        read(scans, store, processes)
        wall_s = time.monotonic() - began
        print(
            f"{processes} at a time: {len(chosen)} pages in {wall_s:.1f} s, {told(store)}, "
            f"load average {os.getloadavg()[0]:.1f}",
            flush=True,
        )


def over_thousands(folder: Path, pages: int) -> None:
    """Memory while so many strips are read."""
    scans, store = folder / "strips", folder / "store"
    write_strips(scans, pages)
    with watched(store):
        read(scans, store, 2)
    print(f"{pages} strips: {told(store)}")


def write_strips(scans: Path, pages: int) -> None:
    """Short strips of different hearts, each file with a content of its own."""
    for number in range(DIFFERENT):
        spec = PageSpec(
            paper=PaperSpec(size_mm=(100.0, 60.0)),
            layout=LayoutSpec(1, 1, ("II",), left_mm=15.0, top_mm=25.0, panel_s=2.6),
            capture=CaptureSpec(dpi=(100.0, 100.0), mode="grey"),
            seed=number,
        )
        pixels = draw_page(record_model(vary_heart(number)), spec).pixels
        for copy, file in enumerate(range(number, pages, DIFFERENT)):
            page = pixels.copy()
            page[-1, :2] = divmod(copy, 256)
            (scans / f"{file // 1000}").mkdir(parents=True, exist_ok=True)
            Image.fromarray(page).save(scans / f"{file // 1000}" / f"{file}.png", dpi=(100, 100))


def read(scans: Path, store: Path, processes: int) -> None:
    """Read every page into a store, without a word."""
    with contextlib.redirect_stdout(io.StringIO()), contextlib.redirect_stderr(io.StringIO()):
        run_archive(
            [scans], store, Options(), Limits(600.0), this_machine(processes),
            read=partial(read_for_store, header=None), preload=("digitize.archive.warm",),
        )  # fmt: skip


def told(store: Path) -> str:
    """What became of the pages, how long they took, and what they left."""
    with contextlib.closing(sqlite3.connect(store / CATALOGUE)) as db:
        counts = dict(db.execute("SELECT status, count(*) FROM page GROUP BY status"))
        seconds = [s for (s,) in db.execute("SELECT seconds FROM page WHERE seconds IS NOT NULL")]
    size = sum(file.stat().st_size for file in (store / "pages").rglob("*.*"))
    read_well = counts.get(GOOD, 0) + counts.get(LOOK, 0)
    each = np.median(seconds) if seconds else 0.0
    return f"{counts}, {each:.2f} s the median page, {size / MIB / max(read_well, 1):.2f} MB a page"


@contextlib.contextmanager
def watched(store: Path) -> Iterator[None]:
    """Memory of this process and of the fork server, printed as pages are done."""
    printed = -1

    def look() -> None:
        nonlocal printed
        done = count(store)
        if done // EVERY > printed:
            printed = done // EVERY
            say(f"{done} pages: {memory()}")

    try:
        with looking(look, 2.0):
            yield
    finally:
        say(f"{count(store)} pages: {memory()}")


def say(text: str) -> None:
    """A line on the terminal, whatever stdout is at the moment."""
    print(text, file=sys.__stdout__, flush=True)


def count(store: Path) -> int:
    """Pages that have a row."""
    try:
        with contextlib.closing(sqlite3.connect(store / CATALOGUE, timeout=30)) as db:
            return int(db.execute("SELECT count(*) FROM page").fetchone()[0])
    except sqlite3.OperationalError:  # not yet made
        return 0


def memory() -> str:
    """Resident memory of the program and of the processes that live as long as it does."""
    told = [f"program {resident_mb('self'):.0f} MB"]
    for task in Path("/proc/self/task").iterdir():
        for child in (task / "children").read_text().split():
            with contextlib.suppress(OSError):
                words = Path(f"/proc/{child}/cmdline").read_bytes()
                if b"forkserver" in words:
                    told.append(f"fork server {resident_mb(child):.0f} MB")
    return ", ".join(told)


def resident_mb(process: str) -> float:
    """Resident memory of a process."""
    pages = int(Path(f"/proc/{process}/statm").read_text().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE") / MIB


if __name__ == "__main__":
    main()

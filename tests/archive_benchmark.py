"""What an archive costs beside the reading of its pages: processes and memory.

    python -m tests.archive_benchmark [--files 2000]

Small pages are read with a stand-in that needs no time, so that what remains is the archive's own:
processor time for each page, and the memory of the parent, which must not grow.
"""

import argparse
import contextlib
import io
import os
import resource
import tempfile
import time
from functools import partial
from pathlib import Path

from digitize.archive.alone import Limits
from digitize.archive.engines import this_machine
from digitize.archive.run import run_archive
from digitize.options import Options
from tests.digitize.archive import stand_in as made
from tests.watching import looking

MIB = 2**20


def main() -> None:
    """Measure with one and with two processes at a time."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--files", type=int, default=2000)
    files = parser.parse_args().files
    with tempfile.TemporaryDirectory() as folder:
        measure_pages(Path(folder), files)


def measure_pages(folder: Path, files: int) -> None:
    """Time and memory of the archive itself over so many small pages."""
    for processes in (1, 2):
        scans = folder / f"scans{processes}"
        for number in range(files):
            made.save(scans / f"{number % 50}" / f"{number}.png", made.READ, number=number)
        store, memory = folder / f"store{processes}", []
        before, began = _cpu_s(), time.monotonic()
        with (
            contextlib.redirect_stdout(io.StringIO()),
            looking(partial(_note_own, memory), 0.2),
        ):
            run_archive(
                [scans], store, Options(), Limits(20.0, 4096), this_machine(processes),
                read=made.read,
            )  # fmt: skip
        wall_s, cpu_s = time.monotonic() - began, _cpu_s() - before
        early, late = memory[len(memory) // 10], memory[-1]
        print(
            f"{processes} at a time: {files} pages in {wall_s:.1f} s, "
            f"{1000 * cpu_s / files:.1f} ms of processor time a page; memory of the parent after a "
            f"tenth {early:.0f} MB, at the end {late:.0f} MB"
        )


def _note_own(memory: list[float]) -> None:
    """Add the memory of this process."""
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    memory.append(pages * os.sysconf("SC_PAGE_SIZE") / MIB)


def _cpu_s() -> float:
    """Processor time of this process and all that it has waited for.

    Pages are forked from a process of their own, whose time is not among them: it is read from the
    system instead.
    """
    own = resource.getrusage(resource.RUSAGE_SELF)
    return own.ru_utime + own.ru_stime + _forkserver_s()


def _forkserver_s() -> float:
    """Processor time of the process from which pages are forked, and of the pages it waited for."""
    ticks = os.sysconf("SC_CLK_TCK")
    for task in Path("/proc/self/task").iterdir():
        for child in (task / "children").read_text().split():
            name = Path(f"/proc/{child}/cmdline").read_bytes()
            if b"forkserver" in name:
                fields = Path(f"/proc/{child}/stat").read_text().rsplit(")", 1)[1].split()
                return sum(map(int, fields[11:15])) / ticks
    return 0.0


if __name__ == "__main__":
    main()

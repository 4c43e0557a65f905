"""Size and speed of a catalogue with as many pages as no test could read.

    python -m tests.catalogue_benchmark [--rows 1000000]

Rows are made, one reading for each page. What ten million would take is ten times that, and is to
be called so.
"""

import argparse
import resource
import tempfile
import time
from pathlib import Path

import numpy as np

from digitize.archive.catalogue import PageRow, opened
from digitize.archive.store import CATALOGUE, stem_of
from measure.catalogue import FINDINGS, INTERVALS, Measured, keep, open_tables
from measure.find import Question, find, understand
from measure.tables import write_parquet

OPTIONS = "0" * 16
QUESTIONS = (
    "qrs_ms >= 150 and lbbb_strict = 'met'",
    "status = 'look'",
    "qtc_bazett_ms is missing",
)
MIB = 2**20


def main() -> None:
    """Fill a catalogue, ask it, write it out."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rows", type=int, default=1_000_000)
    with tempfile.TemporaryDirectory() as folder:
        measure_catalogue(Path(folder), parser.parse_args().rows)


def measure_catalogue(store: Path, rows: int) -> None:
    """Size and speed of a catalogue of so many pages, each with its reading."""
    rng = np.random.default_rng(1)
    with opened(store / CATALOGUE) as catalogue:
        open_tables(catalogue.db)
        catalogue.db.execute("BEGIN")
        for number in range(rows):
            sha256 = f"{int(rng.integers(2**63)):032x}{number:032x}"
            catalogue.add_source(f"/scans/ward/{number:010}.tif".encode(), 1, 1, sha256)
            catalogue.finish(sha256, OPTIONS)
            catalogue.add_page(sha256, OPTIONS, _page(sha256, rng))
            keep(catalogue.db, (sha256, OPTIONS, 1), _reading(rng))
        catalogue.db.execute("COMMIT")
    size = (store / CATALOGUE).stat().st_size
    print(f"{rows} rows: {size / MIB:.0f} MB, {size / rows:.0f} bytes a page")
    for text in QUESTIONS:
        began = time.process_time()
        with find(store, understand(text), sort="-qrs_ms") as (_, found):
            count = sum(1 for _ in found)
        print(f"{time.process_time() - began:7.2f} s  {count:8} pages  {text}")
    began = time.process_time()
    everything = find(store, Question(), columns=("all",))
    with everything as (names, found), (store / "all.parquet").open("wb") as file:
        write_parquet(file, names, found)
    print(
        f"{time.process_time() - began:7.2f} s  the whole as Parquet, "
        f"{(store / 'all.parquet').stat().st_size / MIB:.0f} MB, peak memory "
        f"{resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MB"
    )


def _page(sha256: str, rng: np.random.Generator) -> PageRow:
    look = rng.random() < 0.2
    return PageRow(
        1,
        "look" if look else "good",
        "lead relations disagree in V2: look at the overlay" if look else "",
        stem_of(sha256, OPTIONS, 1),
        12,
        "3x4+1",
        *(25.0, "printed", 10.0, "found", "consecutive", 0.98, int(look), 3300, 2500, 8.1, 690.0),
        version="0.1.0",
    )


def _reading(rng: np.random.Generator) -> Measured:
    numbers = {
        name: (float(v), 3.0)
        for name, v in zip(INTERVALS, rng.normal(120, 30, len(INTERVALS)), strict=True)
    }
    if rng.random() < 0.1:
        del numbers["qtc_bazett_ms"]
    words = rng.choice(["met", "not met", "undecided"], len(FINDINGS), p=[0.1, 0.8, 0.1])
    return Measured("", b"", numbers, dict(zip(FINDINGS, words.tolist(), strict=True)))


if __name__ == "__main__":
    main()

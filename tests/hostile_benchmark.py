"""Damaged files of every kind through whole runs: what becomes of them, by kind.

    python -m tests.hostile_benchmark [--variants 120] [--seed 7] [--kind NAME]

Each variant is a file that `tests.digitize.archive.hostile` damages, read by a process of its own
within limits of time and address space, with the real readers of files and a stand-in for what
follows. A run that breaks a promise (a content without a row, a failure without a reason, a
traceback, a file outside the store) ends with exit code 1.
"""

import argparse
import contextlib
import io
import sqlite3
import sys
import tempfile
import time
from collections import Counter
from pathlib import Path

from digitize.archive.alone import Limits
from digitize.archive.engines import this_machine
from digitize.archive.run import run_archive
from digitize.options import Options
from tests.digitize.archive import hostile
from tests.digitize.archive import stand_in as made

LIMITS = Limits(20.0, 3072)


def main() -> int:
    """Run all kinds and print a table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--variants", type=int, default=120, help="of each kind")
    parser.add_argument("--seed", type=int, default=7)
    parser.add_argument("--kind", choices=hostile.whole_files(), help="that kind alone")
    given = parser.parse_args()
    kinds = [given.kind] if given.kind else [*hostile.whole_files()]
    print("kind             files  pages   good failed  seconds  reasons")
    total, broken, reasons = Counter[str](), [], Counter[str]()
    for kind in kinds:
        contents = [*hostile.variants(kind, given.variants, given.seed), *hostile.cuts(kind)]
        counts, said, seconds, promises = _run(kind, contents)
        broken += promises
        reasons += said
        total += counts
        print(
            f"{kind:<16} {counts['files']:5} {counts['pages']:6} {counts['good']:6} "
            f"{counts['failed']:6} {seconds:8.1f}  {len(said)}"
        )
    print(f"\n{total['files']} files, {total['pages']} pages: {total['good']} read")
    for reason, count in reasons.most_common():
        print(f"{count:6}  {reason}")
    for promise in broken:
        print(f"BROKEN: {promise}")
    return 1 if broken else 0


def _run(kind: str, contents: list[bytes]) -> tuple[Counter[str], Counter[str], float, list[str]]:
    """Counts, reasons, seconds and broken promises of one kind."""
    ending = kind.split(".")[0]
    with tempfile.TemporaryDirectory() as folder:
        scans, store = Path(folder, "scans"), Path(folder, "store")
        scans.mkdir()
        for number, content in enumerate(contents):
            (scans / f"{number}.{ending}").write_bytes(content)
        before = {path for path in Path(folder).rglob("*") if store not in path.parents}
        said, began = io.StringIO(), time.monotonic()
        with contextlib.redirect_stderr(said), contextlib.redirect_stdout(io.StringIO()):
            options = Options(max_megapixels=20)
            run_archive([scans], store, options, LIMITS, this_machine(2), read=made.read)
        seconds = time.monotonic() - began
        with contextlib.closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
            rows = db.execute("SELECT sha256, status, reason FROM page").fetchall()
        after = {path for path in Path(folder).rglob("*") if store not in path.parents}
        promises = []
        if ending != "zip" and len({row[0] for row in rows}) != len(set(contents)):
            promises.append(f"{kind}: not every content has a row")
        if any(status == "failed" and not reason for _, status, reason in rows):
            promises.append(f"{kind}: a failure without a reason")
        if "Traceback" in said.getvalue():
            promises.append(f"{kind}: a traceback")
        if after - before != {store}:
            promises.append(f"{kind}: a file outside the store")
    counts = Counter(files=len(set(contents)), pages=len(rows))
    counts.update(status for _, status, _ in rows)
    return counts, Counter(reason for *_, reason in rows if reason), seconds, promises


if __name__ == "__main__":
    sys.exit(main())

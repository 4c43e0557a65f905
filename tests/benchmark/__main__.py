"""`python -m tests.benchmark`: read the fixed set of drawn pages and print how well."""

import argparse
import multiprocessing
import sys
from collections.abc import Iterator
from functools import partial
from pathlib import Path

import numpy as np

from tests.benchmark.pages import FAMILIES, Case, cases
from tests.benchmark.run import Result, read

HEAD = (
    f"{'family':<22}{'pages':>6}{'median':>8}{'p10':>7}{'limit':>7}{'p10':>7}{'names':>7}"
    f"{'gain err':>9}{'shift':>8}{'R,S ok':>8}{'wrong':>7}{'refused':>8}"
    f"{'cpu s':>8}{'ratio':>7}{'MB':>6}"
)
UNITS = (
    f"{'':<22}{'':>6}{'dB':>8}{'dB':>7}{'dB':>7}{'dB':>7}{'right':>7}"
    f"{'median':>9}{'ms':>8}{'':>8}{'unsaid':>7}{'':>8}{'median':>8}{'':>7}{'max':>6}"
)


def main() -> None:
    """Read the options, run the pages, print the tables."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmark", description=__doc__)
    parser.add_argument("--family", action="append", help=f"one of: {', '.join(FAMILIES)}")
    parser.add_argument("--only", type=int, help="at most so many pages of each family")
    parser.add_argument("--save", type=Path, help="folder for pictures: truth red, reading blue")
    parser.add_argument("--jobs", type=int, default=1, help="pages read at the same time")
    parser.add_argument("--limit", action="store_true", help="what the pen fit alone could reach")
    parser.add_argument("--apart", action="store_true", help="a fresh process for every page")
    parser.add_argument("--worst", type=int, default=10, help="how many of the worst to name")
    options = parser.parse_args()
    if options.save:
        options.save.mkdir(parents=True, exist_ok=True)
    results = []
    for result in _results(list(cases(options.family, options.only)), options):
        results.append(result)
        print(_line(result), file=sys.stderr, flush=True)
    print(HEAD, UNITS, sep="\n")
    for family in dict.fromkeys(result.family for result in results):
        for source in ("model", "ludb"):
            group = [r for r in results if (r.family, r.source) == (family, source)]
            if group:
                print(_row(f"{family}, {source}", group))
    print(_row("all", results))
    print("\nworst pages:")
    for result in sorted(results, key=lambda r: r.median_db)[: options.worst]:
        print(_line(result))


def _results(todo: list[Case], options: argparse.Namespace) -> Iterator[Result]:
    work = partial(read, save=options.save, with_limit=options.limit)
    if options.jobs == 1 and not options.apart:
        yield from map(work, todo)
        return
    # A forked child would start with its parent's peak memory.
    context = multiprocessing.get_context("spawn")
    with context.Pool(options.jobs, maxtasksperchild=1 if options.apart else None) as pool:
        yield from pool.imap(work, todo)


def _row(name: str, group: list[Result]) -> str:
    """One line of the table."""
    leads = [lead for result in group for lead in result.score.leads]
    snr = np.array([lead.snr_db for lead in leads])
    read = [lead for lead in leads if lead.read_share > 0]
    gain = np.median([abs(lead.gain_error) for lead in read]) if read else np.nan
    shift = 1e3 * np.median([abs(lead.shift_s) for lead in read]) if read else np.nan
    best = np.array([db for result in group for db in result.limit_db] or [np.nan])
    names = np.mean([r.score.names_right for r in group])
    amplitudes = np.mean([lead.amplitudes_right for lead in leads])
    unsaid = sum(bool(r.score.unflagged) for r in group)
    refused = sum(r.error is not None for r in group)
    seconds, ratio = (np.median([getattr(r, key) for r in group]) for key in ("seconds", "ratio"))
    peak_mb = max(r.peak_mb for r in group)
    return (
        f"{name:<22}{len(group):>6}{np.median(snr):>8.1f}{np.percentile(snr, 10):>7.1f}"
        f"{np.median(best):>7.1f}{np.percentile(best, 10):>7.1f}"
        f"{names:>7.0%}{gain:>9.2%}{shift:>8.1f}{amplitudes:>8.0%}{unsaid:>7}{refused:>8}"
        f"{seconds:>8.2f}{ratio:>7.1f}{peak_mb:>6.0f}"
    )


def _line(result: Result) -> str:
    """One page in one line."""
    notes = [] if result.score.names_right else ["names wrong"]
    notes += [f"{what} wrong and unsaid" for what in result.score.unflagged]
    if result.error:
        notes.append(f"refused: {result.error}")
    lowest = min(result.score.leads, key=lambda lead: lead.snr_db)
    return (
        f"  {result.name:<38} {result.median_db:5.1f} dB, lowest {lowest.lead} "
        f"{lowest.snr_db:.1f}, {result.seconds:.1f} s {'; '.join(notes)}"
    )


if __name__ == "__main__":
    main()

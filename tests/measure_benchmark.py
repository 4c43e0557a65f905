"""Measure against open data and models: `python -m tests.measure_benchmark`.

Prints the differences from the cardiologists' marks of LUDB (half of its records were looked at
while the methods were made, the other half only reported), the same through perfect pages, beats
found and missed, and models with exact truth. `--compare` adds the delineators of `neurokit2`.
Standard deviations are in ms: all differences / without the 4 % largest, as the standard judges.
"""

import csv
import sys
import time
import warnings
from collections.abc import Callable, Iterable

import numpy as np

from digitize.tracing import LEADS, Tracing
from measure.beats import find_beats
from measure.reading import Reading, read
from tests.drawn.heart import HeartSpec
from tests.measure.model import as_page, digital, recording
from tests.measure.open_data import folder, ludb_tracing, ptbxl_tracing
from tests.measure.test_beats import ludb_missed_and_invented

KEYS = ("p", "pr", "qrs", "qt")
RECORDS = range(1, 200, 2)
DROPPED = 0.04


def spread(values: Iterable[float]) -> str:
    """Mean and SD, all and without the 4 % that lie furthest from the median."""
    known = np.array([v for v in values if np.isfinite(v)])
    if len(known) == 0:
        return "    -"
    order = np.argsort(np.abs(known - np.median(known)))
    kept = known[order[: len(known) - round(DROPPED * len(known))]]
    return f"{known.mean():6.1f} {known.std():5.1f} /{kept.std():5.1f} n{len(known):4d}"


def reference() -> dict[int, dict[str, str]]:
    """The table of intervals derived from the marks, by record."""
    with (folder("LUDB_DIR") / "global_intervals.csv").open(newline="") as file:
        return {int(row["record"]): row for row in csv.DictReader(file)}


def differences(reading: Reading, row: dict[str, str]) -> dict[str, float]:
    """Measured minus marked, NaN where either is missing."""
    return {
        key: reading.intervals[f"{key}_ms"].value - float(row[f"{key}_ms"] or "nan") for key in KEYS
    }


def ludb(form: str, change: Callable[[Tracing], Tracing]) -> dict[int, dict[str, float]]:
    """Print the table of one form of the records and return the differences."""
    rows = reference()
    started = time.process_time()
    readings = {record: read(change(ludb_tracing(record))) for record in RECORDS}
    seconds = (time.process_time() - started) / len(readings)
    off = {record: differences(reading, rows[record]) for record, reading in readings.items()}
    print(f"\nLUDB, {form} ({seconds:.2f} s per reading): mean, SD all / 4 % dropped")
    for half, rest in (("looked at", 1), ("only reported", 3), ("all", None)):
        chosen = [r for r in RECORDS if rest is None or r % 4 == rest]
        for key in KEYS:
            print(f"  {half:14s} {key:4s} {spread(off[r][key] for r in chosen)}")
        unpaced = [r for r in chosen if not rows[r]["pacing"]]
        print(f"  {half:14s} qrs, unpaced {spread(off[r]['qrs'] for r in unpaced)}")
    seen = {r: readings[r].intervals["pr_ms"].known for r in RECORDS}
    refused = [r for r in RECORDS if rows[r]["pr_ms"] and not seen[r]]
    invented = [r for r in RECORDS if rows[r]["p_absent"] == "1" and seen[r]]
    absent = sum(rows[r]["p_absent"] == "1" for r in RECORDS)
    print(f"  P refused: {refused}; P reported where none is marked: {invented} of {absent}")
    return off


def paper_against_original() -> None:
    """The same records read from perfect pages, against the original recordings."""
    original = ludb("original 10 s", lambda tracing: tracing)
    page = ludb("perfect 3x4+1 page", as_page)
    ludb("perfect 3x4 page without a strip", lambda tracing: as_page(tracing, strip=None))
    print("\nPage minus original")
    for key in KEYS:
        print(f"  {key:4s} {spread(page[r][key] - original[r][key] for r in RECORDS)}")


def beats() -> None:
    """Beats against the marks, and pages of PTB-XL against their own recordings."""
    counts = np.array([ludb_missed_and_invented(record) for record in RECORDS]).sum(axis=0)
    print("\nBeats: LUDB {} marked, {} missed, {} invented".format(*counts))
    labels = (folder("PTBXL_DIR") / "labels.csv").read_text().splitlines()[1:]
    total = missed = invented = 0
    for line in labels[::8]:
        tracing = ptbxl_tracing(line.split(",")[0])
        whole, page = find_beats(tracing).time_s, find_beats(as_page(tracing)).time_s
        inner = whole[(whole > 0.15) & (whole < 9.85)]
        total += len(inner)
        missed += int((np.abs(page[None, :] - inner[:, None]).min(axis=1) > 0.12).sum())
        inside = page[(page > 0.15) & (page < 9.85)]
        invented += int((np.abs(whole[None, :] - inside[:, None]).min(axis=1) > 0.12).sum())
    print(f"  PTB-XL pages against their recordings: {total}, {missed} missed, {invented} invented")


def models() -> None:
    """Models with exact truth: error and how often two standard errors cover it."""
    patterns = ("normal", "lbbb", "rbbb", "lafb", "lpfb", "nonspecific", "incomplete lbbb")
    for form, change in (("digital", lambda t: t), ("3x4+1 page", as_page)):
        error: dict[str, list[float]] = {key: [] for key in KEYS}
        covered: dict[str, list[bool]] = {key: [] for key in KEYS}
        for seed in range(28):
            pattern = patterns[seed % len(patterns)]
            spec = HeartSpec(
                conduction=pattern, seed=seed, muscle_mv=0.004 * (seed % 4), rate_bpm=55 + 2 * seed
            )
            intervals = read(change(digital(spec))).intervals
            truth = recording(spec).truth
            assert truth is not None
            for key in KEYS:
                quantity = intervals[f"{key}_ms"]
                error[key].append(quantity.value - getattr(truth, f"{key}_ms"))
                covered[key].append(abs(error[key][-1]) <= 1.96 * quantity.se)
        print(f"\nModels, {form}: mean, SD all / 4 % dropped, share within 95 % interval")
        for key in KEYS:
            print(f"  {key:4s} {spread(error[key])}  {np.mean(covered[key]):.0%}")


def compare() -> None:
    """The delineators of a general library on lead II and V5, median over beats."""
    import neurokit2

    rows = reference()
    for method in ("dwt", "peak"):
        off: dict[str, list[float]] = {"pr": [], "qrs": [], "qt": []}
        for record in RECORDS:
            lead = ludb_tracing(record).lead("II").mv
            cleaned = neurokit2.ecg_clean(lead, 500)
            _, peaks = neurokit2.ecg_peaks(cleaned, 500)
            _, waves = neurokit2.ecg_delineate(cleaned, peaks, 500, method=method)
            marks = {name: np.array(at, float) for name, at in waves.items()}
            onset, offset = marks.get("ECG_R_Onsets"), marks.get("ECG_R_Offsets")
            if onset is None or offset is None:
                continue
            p_on, t_off = marks["ECG_P_Onsets"], marks["ECG_T_Offsets"]
            for key, span in (
                ("pr", onset - p_on),
                ("qrs", offset - onset),
                ("qt", t_off - onset),
            ):
                marked = float(rows[record][f"{key}_ms"] or "nan")
                off[key].append(2 * float(np.nanmedian(span)) - marked)
        print(f"\nneurokit2, {method}, lead II: mean, SD all / 4 % dropped")
        for key, values in off.items():
            print(f"  {key:4s} {spread(values)}")


def main() -> None:
    """Print every table."""
    print(f"Leads: {', '.join(LEADS)}. Differences are measured minus reference, in ms.")
    models()
    paper_against_original()
    beats()
    if "--compare" in sys.argv:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            compare()


if __name__ == "__main__":
    main()

"""Measure against open data and models: `python -m tests.measure_benchmark`.

Prints the differences from the cardiologists' marks of LUDB (half of its records were looked at
while the methods were made, the other half only reported), the same through perfect pages, beats
found and missed, and models with exact truth. `--paper` draws the records on 3x4+1 pages, reads
them back and measures those; `--compare` prints the delineators of `neurokit2`, which need the
extra "compare".
Standard deviations are in ms: all differences / without the 4 % largest, as the standard judges.
"""

import argparse
import csv
import math
import time
import warnings
from collections.abc import Callable, Iterable, Mapping, Sequence
from types import ModuleType

import numpy as np

from digitize.tracing import LEADS, Tracing
from measure.beats import find_beats
from measure.reading import Reading, read
from tests.drawn.heart import HeartSpec
from tests.drawn.records import read_ludb
from tests.measure.model import as_page, digital, recording
from tests.measure.open_data import folder, ludb_tracing, ptbxl_tracing
from tests.measure.test_beats import ludb_missed_and_invented
from tests.paper import WAYS, page_spec, read_back

KEYS = ("p", "pr", "qrs", "qt")
RECORDS = range(1, 200, 2)
DROPPED = 0.04
_EDGE_S = 0.3  # a beat this near to the end of the recording may be cut
_SAME_BEAT_S = 0.15  # a wide QRS has its peaks in different leads this far apart


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


def ludb(
    form: str,
    tracing_of: Callable[[int], Tracing | None],
    records: Sequence[int] = RECORDS,
    original: Mapping[int, Reading] | None = None,
) -> dict[int, Reading]:
    """Print the table of one form of the records and return their readings.

    A page that was refused gives no reading; with the readings of the `original` recordings the
    differences from them are printed too, and the records where they are largest.
    """
    rows = reference()
    tracings = {record: tracing_of(record) for record in records}
    started = time.process_time()
    readings = {r: read(tracing) for r, tracing in tracings.items() if tracing is not None}
    seconds = (time.process_time() - started) / max(len(readings), 1)
    off = {record: differences(reading, rows[record]) for record, reading in readings.items()}
    print(f"\nLUDB, {form} ({seconds:.2f} s per reading): mean, SD all / 4 % dropped")
    print(f"  {len(records)} records, refused: {sorted(set(records) - set(readings))}")
    for half, rest in (("looked at", 1), ("only reported", 3), ("all", None)):
        chosen = [r for r in readings if rest is None or r % 4 == rest]
        for key in KEYS:
            print(f"  {half:14s} {key:4s} {spread(off[r][key] for r in chosen)}")
        unpaced = [r for r in chosen if not rows[r]["pacing"]]
        print(f"  {half:14s} qrs, unpaced {spread(off[r]['qrs'] for r in unpaced)}")
    seen = {r: readings[r].intervals["pr_ms"].known for r in readings}
    marked = [r for r in readings if rows[r]["pr_ms"]]
    absent = [r for r in readings if rows[r]["p_absent"] == "1"]
    print(f"  P refused: {[r for r in marked if not seen[r]]} of {len(marked)}")
    print(f"  P reported where none is marked: {[r for r in absent if seen[r]]} of {len(absent)}")
    if original is not None:
        against_original(readings, original)
    return readings


def against_original(readings: Mapping[int, Reading], original: Mapping[int, Reading]) -> None:
    """The same records in two forms: differences, and the records where they are largest."""
    print("  minus original, share within the joint 95 % interval, largest (record: ms)")
    for key in KEYS:
        one = {r: readings[r].intervals[f"{key}_ms"] for r in readings}
        other = {r: original[r].intervals[f"{key}_ms"] for r in readings}
        change = {r: one[r].value - other[r].value for r in readings if one[r].known}
        change = {r: ms for r, ms in change.items() if np.isfinite(ms)}
        within = [abs(ms) <= 1.96 * math.hypot(one[r].se, other[r].se) for r, ms in change.items()]
        worst = sorted(change, key=lambda r: -abs(change[r]))[:6]
        listed = ", ".join(f"{r}: {change[r]:.0f}" for r in worst)
        print(f"  {key:4s} {spread(change.values())}  {np.mean(within):.0%}  {listed}")


def on_paper(way: str, records: Sequence[int]) -> None:
    """The records drawn on 3x4+1 pages, captured and read back, against their originals."""
    original = {record: read(ludb_tracing(record)) for record in records}
    ludb(
        f"3x4+1 page, {way}",
        lambda record: read_back(read_ludb(record), page_spec(way, record)),
        records,
        original,
    )


def perfect_pages() -> None:
    """The same records read from perfect pages, against the original recordings."""
    original = ludb("original 10 s", ludb_tracing)
    ludb("perfect 3x4+1 page", lambda r: as_page(ludb_tracing(r)), original=original)
    ludb("perfect 3x4 page without a strip", _without_strip, original=original)


def _without_strip(record: int) -> Tracing:
    return as_page(ludb_tracing(record), strip=None)


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


def compare(records: Sequence[int]) -> None:
    """The delineators of a general library, on lead II and as the median over all leads."""
    rows = reference()
    for method in ("dwt", "prominence"):
        for leads in (("II",), LEADS):
            off: dict[str, list[float]] = {key: [] for key in KEYS}
            for record in records:
                for key, ms in delineated(ludb_tracing(record), method, leads).items():
                    off[key].append(ms - float(rows[record][f"{key}_ms"] or "nan"))
            print(f"\nneurokit2, {method}, {len(leads)} leads: mean, SD all / 4 % dropped")
            for key, values in off.items():
                print(f"  {key:4s} {spread(values)}")


def compare_beats(every: int) -> None:
    """Beats of PTB-XL, which carries no marks, against the R peaks of the library.

    A beat that it finds in two of three leads and we do not counts as missed, one of ours that it
    finds in none of them as invented; both are listed, to be looked at.
    """
    import neurokit2

    lines = (folder("PTBXL_DIR") / "labels.csv").read_text().splitlines()[1::every]
    total, missed, invented = 0, [], []
    for record in (line.split(",")[0] for line in lines):
        tracing = ptbxl_tracing(record)
        ours = find_beats(tracing).time_s
        ours = ours[(ours > _EDGE_S) & (ours < 10 - _EDGE_S)]
        seen = [_r_peaks(neurokit2, tracing.lead(lead).mv) for lead in ("II", "V2", "V5")]
        near = np.array([[np.abs(s - t).min(initial=9) < _SAME_BEAT_S for s in seen] for t in ours])
        total += len(ours)
        invented += [(record, t) for t, n in zip(ours, near, strict=True) if not n.any()]
        for t in seen[0]:
            others = sum(np.abs(s - t).min(initial=9) < _SAME_BEAT_S for s in seen[1:])
            if others and np.abs(ours - t).min(initial=9) > _SAME_BEAT_S and 0.5 < t < 9.5:
                missed.append((record, t))
    print(f"\nPTB-XL, every {every}: {total} beats of ours against neurokit2")
    for what, found in (("missed", missed), ("invented", invented)):
        print(f"  {what} {len(found)}: " + ", ".join(f"{r} {t:.2f}" for r, t in found))


def _r_peaks(library: ModuleType, mv: np.ndarray) -> np.ndarray:
    """Times of R peaks in seconds."""
    _, found = library.ecg_peaks(library.ecg_clean(mv, 500), 500)
    return np.array(found["ECG_R_Peaks"], float) / 500


def delineated(tracing: Tracing, method: str, leads: Sequence[str]) -> dict[str, float]:
    """Intervals in ms by `neurokit2`, each the median over the beats of lead II."""
    import neurokit2

    cleaned = {lead: neurokit2.ecg_clean(tracing.lead(lead).mv, 500) for lead in leads}
    _, peaks = neurokit2.ecg_peaks(cleaned["II"], 500)
    marks: dict[str, list[np.ndarray]] = {}
    for lead in leads:
        try:
            _, waves = neurokit2.ecg_delineate(cleaned[lead], peaks, 500, method=method)
        except (ValueError, IndexError, ZeroDivisionError):
            continue  # nothing that it can tell apart in this lead
        for name, at in waves.items():
            if len(at) == len(peaks["ECG_R_Peaks"]):
                marks.setdefault(name, []).append(2.0 * np.array(at, float))
    spans = {
        "p": ("ECG_P_Onsets", "ECG_P_Offsets"),
        "pr": ("ECG_P_Onsets", "ECG_R_Onsets"),
        "qrs": ("ECG_R_Onsets", "ECG_R_Offsets"),
        "qt": ("ECG_R_Onsets", "ECG_T_Offsets"),
    }
    return {
        key: float(np.nanmedian(_middle(marks, last) - _middle(marks, first)))
        for key, (first, last) in spans.items()
    }


def _middle(marks: Mapping[str, list[np.ndarray]], mark: str) -> np.ndarray:
    """One kind of mark at each beat: the median over the leads, a lead gone astray is forgiven."""
    rows = marks.get(mark, [])
    return np.nanmedian(np.stack(rows), axis=0) if rows else np.array([np.nan])


def main() -> None:
    """Print the tables that were asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--paper", choices=WAYS, help="only LUDB through drawn pages, read back")
    parser.add_argument("--every", type=int, default=1, help="of these: one record in so many")
    parser.add_argument("--compare", action="store_true", help="only the delineators of neurokit2")
    given = parser.parse_args()
    print(f"Leads: {', '.join(LEADS)}. Differences are measured minus reference, in ms.")
    if given.paper:
        on_paper(given.paper, RECORDS[:: given.every])
    elif given.compare:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            compare_beats(given.every)
            compare(RECORDS[:: given.every])
    else:
        models()
        perfect_pages()
        beats()


if __name__ == "__main__":
    main()

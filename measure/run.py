"""One call of `measure read` or `measure compare`: files in, tables and results out."""

import json
import sys
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rich.console import Console

from digitize.errors import InputError, OutputExists, UnreadableFile, at, shown
from digitize.options import Options
from digitize.safe_write import refuse_existing, write_files
from measure.compare import compare, comparison_json, side
from measure.inputs import Given, open_ecgs
from measure.reading import Person, read
from measure.reading_files import load_document, to_json
from measure.report import comparison_page, report
from measure.table import print_comparison, print_reading

READING_ENDING = ".reading.json"
REPORT_ENDING = ".reading.html"
COMPARE_ENDINGS = (".compare.html", ".compare.json")


def read_files(
    files: Iterable[Path],
    options: Options,
    person: Person,
    *,
    unit: str | None = None,
    folder: Path | None = None,
    replace: bool = False,
) -> int:
    """Measure each ECG of each file and return how many inputs could not be used.

    Parameters
    ----------
    files : iterable of Path
        Pages, tracings or digital ECGs.
    options, person, unit
        What is known better than the page says: scale and layout, the patient, a CSV's unit.
    folder : Path, optional
        Where the results go; beside each file where it is not given.
    replace : bool
        Whether earlier results may be written over.
    """
    results = _Results(folder, replace)
    for file in files:
        try:
            for given in open_ecgs(file, options, unit=unit, on_error=results.fail):
                try:
                    results.add(file, given, person)
                except InputError as error:
                    results.fail(at(error, file.name, given.tracing.source.page))
        except InputError as error:
            results.fail(at(error, file.name))
    return results.failed


def compare_files(
    files: Sequence[Path],
    dates: Sequence[str | None],
    person: Person,
    *,
    folder: Path | None = None,
    replace: bool = False,
) -> int:
    """Compare ECGs, oldest first, and return how many could not be used; with any, none is written.

    Parameters
    ----------
    files : sequence of Path
        Saved readings, or ECGs that are read now; of a file with several pages the first counts.
    dates : sequence of str or None
        Year-month-day of each file, where the person gave it.
    person, folder, replace
        As for `read_files`.
    """
    sides, failed = [], 0
    for file, date in zip(files, dates, strict=True):
        try:
            content = _content(file, person)
            sides.append(side(content, _name(file), date))
        except InputError as error:
            failed += 1
            print(at(error, file.name), file=sys.stderr)
    if failed:
        return failed
    comparison = compare(sides)
    place = (files[-1].parent if folder is None else folder) / sides[-1].name
    page, table = (place.with_name(place.name + end) for end in COMPARE_ENDINGS)
    try:
        contents = {page: comparison_page(comparison).encode(), table: comparison_json(comparison)}
        write_files(contents, replace=replace)
    except InputError as error:
        print(error, file=sys.stderr)
        return 1
    print_comparison(comparison, Console())
    print(f"\nWritten: {shown(place)}{' '.join(COMPARE_ENDINGS)}")
    return 0


def _name(file: Path) -> str:
    """Name of an ECG without the endings of its files."""
    reading = file.name.endswith(READING_ENDING)
    return file.name.removesuffix(READING_ENDING) if reading else file.stem


def _content(file: Path, person: Person) -> Mapping[str, Any]:
    """Content of a saved reading, or of one made now."""
    if file.name.endswith(READING_ENDING):
        return load_document(file)

    def refuse(error: InputError) -> None:
        raise error

    given = next(open_ecgs(file, Options(), on_error=refuse), None)
    if given is None:
        raise UnreadableFile("there is no ECG in it")
    return json.loads(to_json(read(given.tracing, person)))


@dataclass
class _Results:
    """What was written so far, and how many inputs failed."""

    folder: Path | None
    replace: bool
    failed: int = 0
    written: set[Path] = field(default_factory=set)

    def fail(self, error: InputError) -> None:
        """Say on stderr what could not be used."""
        self.failed += 1
        print(error, file=sys.stderr)

    def add(self, file: Path, given: Given, person: Person) -> None:
        """Measure one ECG, write its files, print its table."""
        place = (file.parent if self.folder is None else self.folder) / given.stem
        names = [*given.extra_files, place.name + REPORT_ENDING, place.name + READING_ENDING]
        paths = [place.parent / name for name in names]
        if self.written.intersection(paths):
            raise OutputExists("another file of the same name was read before it: use -o")
        refuse_existing(paths, replace=self.replace)
        reading = read(given.tracing, person)
        page = report(reading, overlay_png=given.overlay_png).encode()
        contents = [*given.extra_files.values(), page, to_json(reading)]
        write_files(dict(zip(paths, contents, strict=True)), replace=self.replace)
        self.written.update(paths)
        print_reading(reading, Console())
        print(f"\nWritten: {shown(place)}{READING_ENDING} {REPORT_ENDING}")

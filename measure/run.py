"""One call of `measure read`: every file read, its table printed, its results written."""

import sys
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

from rich.console import Console

from digitize.errors import InputError, OutputExists, at, shown
from digitize.options import Options
from digitize.safe_write import refuse_existing, write_files
from measure.inputs import Given, open_ecgs
from measure.reading import Person, read
from measure.reading_files import to_json
from measure.report import report
from measure.table import print_reading

READING_ENDING = ".reading.json"
REPORT_ENDING = ".reading.html"


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

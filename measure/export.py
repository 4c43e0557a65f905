"""A tracing together with what was measured on it, in the forms that other systems take.

`dicom`, `fhir` and `aecg` are those of `digitize export` with measurements and findings in the
places that the standards have for them; `pdf` is the report, `dicom-pdf` the report in a DICOM
object of the same study.
"""

import math
from collections.abc import Sequence
from pathlib import Path

from digitize import CAUTION
from digitize.console import Console
from digitize.errors import InputError, at, shown
from digitize.formats import WITH_MEASUREMENTS, export
from digitize.formats.measurements import Judged, Measurements, Number
from digitize.options import Options
from digitize.safe_write import write_files
from measure.inputs import Given, open_ecgs
from measure.quantity import Quantity
from measure.reading import Person, Reading, read
from measure.report.pdf import report_pdf

REPORTS = ("pdf", "dicom-pdf")
FORMS = (*WITH_MEASUREMENTS, *REPORTS)


def export_files(
    files: Sequence[Path],
    form: str,
    person: Person,
    console: Console,
    *,
    folder: Path | None,
    replace: bool,
) -> int:
    """Measure each ECG, write it in one form, and return how many could not be.

    Parameters
    ----------
    files : sequence of Path
        Tracings, pages or digital ECGs.
    form : str
        One of `FORMS`.
    person : Person
        Sex and age, where they are known.
    folder : Path, optional
        Where the files go; beside each input if not given.
    replace : bool
        Whether earlier files may be replaced.
    """
    for file in files:
        try:
            for given in open_ecgs(file, Options(), on_error=console.fail):
                place = file.parent if folder is None else folder
                try:
                    contents = exported(given, read(given.tracing, person), form)
                    paths = {place / name: content for name, content in contents.items()}
                    write_files(paths, replace=replace)
                except InputError as error:
                    console.fail(at(error, file.name, given.tracing.source.page))
                else:
                    console.result(" ".join(shown(path) for path in paths))
        except InputError as error:
            console.fail(at(error, file.name))
    console.result(CAUTION)
    return console.failed


def exported(given: Given, reading: Reading, form: str) -> dict[str, bytes]:
    """Return names and contents of the files of one reading in one of `FORMS`.

    Raises
    ------
    CannotExport
        The form has no way to hold this tracing.
    UnreadableFile
        A package that it needs is not installed.
    """
    stem = Path(given.stem).name
    if form not in REPORTS:
        return export(given.tracing, stem, form, measurements_of(reading))
    pdf = report_pdf(reading, overlay_png=given.overlay_png)
    if form == "pdf":
        return {f"{stem}.report.pdf": pdf}
    from digitize.formats import dicom_document

    shows_page = given.overlay_png is not None
    return dicom_document.files(pdf, given.tracing.source, stem, shows_page=shows_page)


def measurements_of(reading: Reading) -> Measurements:
    """What the formats take of a reading: intervals and axes, every finding, every caution."""
    numbers = tuple(_number(key, quantity) for key, quantity in reading.intervals.items())
    findings = tuple(Judged(f.definition, f.source, f.result) for f in reading.findings)
    return Measurements(numbers, findings, reading.cautions)


def _number(key: str, quantity: Quantity) -> Number:
    if not quantity.known:
        return Number(key, None, None, quantity.reason)
    return Number(key, quantity.value, None if math.isnan(quantity.se) else quantity.se)

"""The command `measure`: readings of ECGs, and old against new.

This module parses, calls and prints. Tables go to stdout, results to files, everything else to
stderr. Exit codes: 0 all was read, 1 some input could not be used, 2 the command was not
understood.
"""

import datetime
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from digitize import CAUTION, program_version
from digitize.archive.arguments import (
    ONE_PER_CORE,
    Cluster,
    PageMemory,
    PageSeconds,
    Processes,
)
from digitize.errors import InputError
from digitize.options import Options, names_from, scale_from

if TYPE_CHECKING:
    from measure.reading import Person

OLDEST_YEARS = 130.0

app = typer.Typer(
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    help=f"Measure ECGs and hold them against published criteria. {CAUTION}",
)


def main() -> None:
    """Entry point of the command."""
    app()


@app.callback(invoke_without_command=True)
def _command(
    context: typer.Context,
    version: Annotated[bool, typer.Option("--version", help="Print the version.")] = False,
) -> None:
    if version:
        print(f"measure {program_version()}")
        raise typer.Exit
    if context.invoked_subcommand is None:
        print(context.get_help())


@app.command()
def read(
    files: Annotated[
        list[Path],
        typer.Argument(help="Scans, photos, PDFs; tracings (CSV, JSON); WFDB, EDF, DICOM, CSV."),
    ],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for the results; else beside each file."),
    ] = None,
    sex: Annotated[
        str | None, typer.Option(help="male or female: some thresholds depend on it.")
    ] = None,
    age: Annotated[float | None, typer.Option(help="Age in years.")] = None,
    unit: Annotated[
        str | None, typer.Option(help="mV or uV, for a digital CSV that does not say it.")
    ] = None,
    speed: Annotated[float | None, typer.Option(help="Paper speed in mm/s.")] = None,
    gain: Annotated[float | None, typer.Option(help="Gain in mm/mV.")] = None,
    layout: Annotated[
        str | None, typer.Option(help="Rows x columns + rhythm strips, such as 3x4+1.")
    ] = None,
    leads: Annotated[
        str | None, typer.Option(help="Lead names row by row, such as I,aVR,V1,V4,II,...")
    ] = None,
    turn: Annotated[
        int | None, typer.Option(help="Clockwise turn that makes the page upright: 0 90 180 270.")
    ] = None,
    timing: Annotated[
        str | None, typer.Option(help="Columns in time: consecutive or simultaneous.")
    ] = None,
    px_per_mm: Annotated[
        str | None,
        typer.Option(help="Scale of a page without grid, such as 11.8, or 8.04,3.85 for a fax."),
    ] = None,
    max_megapixels: Annotated[
        float, typer.Option(help="Refuse larger pages.")
    ] = Options.max_megapixels,
    replace: Annotated[bool, typer.Option("--replace", help="Write over earlier results.")] = False,
) -> None:
    """Measure each ECG: a table, NAME.reading.json and NAME.reading.html.

    A page is digitised first and its tracing and overlay are written too. Look at the overlay
    before you use the numbers.
    """
    options = _options(speed, gain, layout, leads, turn, timing, px_per_mm, max_megapixels)
    person = _person(sex, age)
    from measure.run import read_files

    failed = read_files(files, options, person, unit=unit, folder=output, replace=replace)
    raise typer.Exit(1 if failed else 0)


@app.command()
def compare(
    files: Annotated[
        list[Path],
        typer.Argument(help="Two or more readings (.reading.json) or ECGs, the oldest first."),
    ],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for the results; else beside the last file."),
    ] = None,
    date: Annotated[
        list[str] | None,
        typer.Option(help="Date of each ECG in the same order, such as 2024-03-01; repeat it."),
    ] = None,
    sex: Annotated[
        str | None, typer.Option(help="male or female, for ECGs that were not read yet.")
    ] = None,
    age: Annotated[float | None, typer.Option(help="Age in years, likewise.")] = None,
    replace: Annotated[bool, typer.Option("--replace", help="Write over earlier results.")] = False,
) -> None:
    """Hold the newest ECG of a person against the oldest: NEW.compare.json and NEW.compare.html.

    Says whether a block is new, whether QRS is wider beyond the joint error, how axis and QTc have
    changed, and draws the beats over each other. Three or more give the course over time.
    """
    if len(files) < 2:
        raise typer.BadParameter("give two ECGs or more, the oldest first")
    dates = _dates(date, len(files))
    person = _person(sex, age)
    from measure.run import compare_files

    failed = compare_files(files, dates, person, folder=output, replace=replace)
    raise typer.Exit(1 if failed else 0)


@app.command()
def overread(
    files: Annotated[
        list[Path],
        typer.Argument(help="Scans, tracings, digital ECGs; folders of them; a store."),
    ],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for NAME.overread.json; else beside the file."),
    ] = None,
    port: Annotated[int, typer.Option(min=0, max=65535, help="Port; 0 takes a free one.")] = 0,
    no_browser: Annotated[
        bool, typer.Option("--no-browser", help="Print the address alone.")
    ] = False,
    sex: Annotated[str | None, typer.Option(help="male or female, where known.")] = None,
    age: Annotated[float | None, typer.Option(help="Age in years, where known.")] = None,
    speed: Annotated[float | None, typer.Option(help="Paper speed in mm/s.")] = None,
    gain: Annotated[float | None, typer.Option(help="Gain in mm/mV.")] = None,
    layout: Annotated[str | None, typer.Option(help="Such as 3x4+1.")] = None,
    px_per_mm: Annotated[
        str | None, typer.Option(help="Scale of a page without grid, such as 11.8.")
    ] = None,
) -> None:
    """Check, correct, measure and sign in the browser: a page that this machine serves to itself.

    What a person does is kept in NAME.overread.json; the input is never touched. A store stands for
    all its pages that need a look, the JSON of a page in a store for that page. A saved reading
    (NAME.reading.json) can be held beside another ECG.
    """
    options = _options(speed, gain, layout, None, None, None, px_per_mm, Options.max_megapixels)
    person = _person(sex, age)
    from digitize.errors import InputError
    from measure.overread.serve import serve

    try:
        serve(files, options, person, folder=output, port=port, browser=not no_browser)
    except InputError as error:
        print(error, file=sys.stderr)
        raise typer.Exit(1) from None


@app.command()
def export(
    files: Annotated[
        list[Path],
        typer.Argument(help="Tracings (CSV, JSON); scans, photos, PDFs; WFDB, EDF, DICOM."),
    ],
    form: Annotated[
        str,
        typer.Option("--as", help="dicom, fhir, aecg, pdf or dicom-pdf.", show_default=False),
    ],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for the files; else beside each input."),
    ] = None,
    sex: Annotated[str | None, typer.Option(help="male or female, where known.")] = None,
    age: Annotated[float | None, typer.Option(help="Age in years, where known.")] = None,
    replace: Annotated[bool, typer.Option("--replace", help="Write over earlier files.")] = False,
) -> None:
    """Write ECGs with what was measured on them for other systems, or the report as a document.

    Each number goes with its standard error; what could not be measured is said to be missing.
    Patient fields stay empty.
    """
    person = _person(sex, age)
    from digitize.console import console
    from measure.export import FORMS, export_files

    if form not in FORMS:
        raise typer.BadParameter(f"'{form}' is not known here: give {', '.join(FORMS)}")
    with console(len(files)) as shown_on:
        failed = export_files(files, form, person, shown_on, folder=output, replace=replace)
    raise typer.Exit(1 if failed else 0)


@app.command()
def archive(
    store: Annotated[Path, typer.Argument(help="A store that digitize archive has filled.")],
    processes: Processes = ONE_PER_CORE,
    cluster: Cluster = None,
    page_seconds: PageSeconds = 60.0,
    page_memory_mb: PageMemory = 4096,
    again: Annotated[bool, typer.Option("--again", help="Measure anew what was measured.")] = False,
) -> None:
    """Measure every page of a store: NAME.reading.json, and rows to ask with `measure find`.

    Started again, it continues. Where no manifest says sex and age, thresholds that depend on them
    may stay undecided.
    """
    from digitize.archive.alone import Limits
    from digitize.archive.engines import engine_for
    from measure.archive import measure_archive

    limits = Limits(page_seconds, page_memory_mb)
    failed = measure_archive(store, limits, engine_for(cluster, processes), again=again)
    raise typer.Exit(1 if failed else 0)


@app.command()
def find(
    store: Annotated[Path, typer.Argument(help="A store that was measured.")],
    where: Annotated[
        str | None, typer.Option(help="Such as: qrs_ms >= 150 and lbbb_strict = 'met'")
    ] = None,
    sort: Annotated[
        str | None, typer.Option(help="Name to sort by; -NAME for the largest first.")
    ] = None,
    columns: Annotated[
        str | None, typer.Option(help="Further names to show, such as qtc_bazett_ms,rr_ms; or all.")
    ] = None,
    to: Annotated[
        str, typer.Option(help="csv, parquet, or count for the number of pages alone.")
    ] = "csv",
    plot: Annotated[
        str | None, typer.Option(help="Name whose histogram is shown in place of a table.")
    ] = None,
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="File for the table or, as HTML, the histogram."),
    ] = None,
    replace: Annotated[bool, typer.Option("--replace", help="Write over an earlier file.")] = False,
) -> None:
    """List the pages of a store that a question is true of; the store is only read.

    Names are those of the readings: intervals (qrs_ms, qrs_ms_se), findings ('met', 'not met',
    'undecided') and what is known of the page (status, layout). "is missing" asks for what could
    not be measured. "--columns all" gives the whole catalogue. A match is no diagnosis: look at the
    page.
    """
    if to not in ("csv", "parquet", "count"):
        raise typer.BadParameter(f"'{to}' is not known here: give csv, parquet or count")
    if to == "parquet" and output is None and plot is None:
        raise typer.BadParameter("parquet is no text: give a file with -o")
    from measure.find import QuestionError
    from measure.find_command import Wanted, answer

    names = () if columns is None else tuple(name.strip() for name in columns.split(","))
    try:
        answer(store, Wanted(where, sort, names, to, plot, output, replace))
    except QuestionError as error:
        raise typer.BadParameter(str(error)) from None
    except InputError as error:
        print(error, file=sys.stderr)
        raise typer.Exit(1) from None


def _dates(given: list[str] | None, count: int) -> list[str | None]:
    """One date for each file, or none at all, in order of time."""
    if not given:
        return [None] * count
    try:
        days = [datetime.date.fromisoformat(text) for text in given]
    except ValueError:
        raise typer.BadParameter("a date is not of the form 2024-03-01") from None
    if len(days) != count:
        raise typer.BadParameter(f"{len(days)} dates for {count} ECGs: give one for each")
    if days != sorted(days):
        raise typer.BadParameter("the dates do not rise: give the oldest ECG first")
    return [day.isoformat() for day in days]


def _options(
    speed: float | None,
    gain: float | None,
    layout: str | None,
    leads: str | None,
    turn: int | None,
    timing: str | None,
    px_per_mm: str | None,
    max_megapixels: float,
) -> Options:
    """What the person knows about the page, as one record."""
    try:
        return Options(
            speed_mm_s=speed,
            gain_mm_mv=gain,
            layout=layout,
            lead_order=names_from(leads),
            turn_deg=turn,
            timing=timing,
            px_per_mm=scale_from(px_per_mm),
            max_megapixels=max_megapixels,
        )
    except ValueError as error:
        raise typer.BadParameter(str(error)) from None


def _person(sex: str | None, age: float | None) -> "Person":
    from measure.reading import Person

    if sex not in (None, "male", "female"):
        raise typer.BadParameter(f"'{sex}' is not known here: give male or female")
    if age is not None and not 0 <= age <= OLDEST_YEARS:
        raise typer.BadParameter(f"{age:g} years is no age: give 0 to {OLDEST_YEARS:g}")
    return Person(sex, age)

"""The command `digitize`: scans in, calibrated leads and an overlay out.

This module parses, calls and prints; image libraries are loaded when the first page is read.
Results go to stdout and files, everything else to stderr. Exit codes: 0 every page was read, 1 some
input could not be used, 2 the command was not understood.
"""

import sys
from functools import partial
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
from digitize.console import console
from digitize.errors import InputError
from digitize.formats import FORMATS
from digitize.options import Options, names_from, scale_from

if TYPE_CHECKING:
    from digitize.archive.run import Kept

Speed = Annotated[float | None, typer.Option(help="Paper speed in mm/s.")]
Gain = Annotated[float | None, typer.Option(help="Gain in mm/mV.")]
MaxMegapixels = Annotated[float, typer.Option(help="Refuse larger pages.")]

app = typer.Typer(
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    help=f"Read calibrated leads from scans, faxes and photos of paper ECGs. {CAUTION}",
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
        print(f"digitize {program_version()}")
        raise typer.Exit
    if context.invoked_subcommand is None:
        print(context.get_help())


@app.command()
def page(
    files: Annotated[
        list[Path], typer.Argument(help="Scans, faxes, photos: PNG, JPEG, TIFF, PDF, HEIC, DICOM.")
    ],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for the results; else beside each file."),
    ] = None,
    speed: Speed = None,
    gain: Gain = None,
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
    max_megapixels: MaxMegapixels = Options.max_megapixels,
    replace: Annotated[bool, typer.Option("--replace", help="Write over earlier results.")] = False,
    timings: Annotated[
        bool, typer.Option("--timings", help="Print how long each stage took (stderr).")
    ] = False,
    explain: Annotated[
        bool, typer.Option("--explain", help="Write NAME.explain-*.png, one for each stage.")
    ] = False,
) -> None:
    """Read each page of each file: NAME.csv, NAME.json and NAME.overlay.png.

    What you give here is taken as true; everything else is looked for on the page, and the JSON
    says where each value came from. Look at the overlay before you use the numbers.
    """
    try:
        options = Options(
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
    from digitize.run import read_files

    with console(len(files)) as shown_on:
        failed = read_files(
            files,
            options,
            shown_on,
            folder=output,
            replace=replace,
            timings=timings,
            explain=explain,
        )
    raise typer.Exit(1 if failed else 0)


@app.command()
def export(
    names: Annotated[list[Path], typer.Argument(help="Tracings: NAME.json, NAME.csv or NAME.")],
    form: Annotated[
        str,
        typer.Option(
            "--as",
            help=f"Open format: {', '.join(FORMATS)}; dicom-scan: the page itself.",
            show_default=False,
        ),
    ],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for the files; else beside each tracing."),
    ] = None,
    replace: Annotated[bool, typer.Option("--replace", help="Write over earlier files.")] = False,
) -> None:
    """Write tracings in an open format for other systems.

    Nothing is filled in: where nothing was read the format's own sign for it stands, and a format
    without one refuses. Patient fields stay empty.
    """
    from digitize.formats.command import SCAN, export_files

    if form not in (*FORMATS, SCAN):
        raise typer.BadParameter(f"'{form}' is not known here: give {', '.join((*FORMATS, SCAN))}")

    with console(len(names)) as shown_on:
        failed = export_files(names, form, shown_on, folder=output, replace=replace)
    raise typer.Exit(1 if failed else 0)


@app.command()
def archive(
    folders: Annotated[list[Path], typer.Argument(help="Folders of scans, also in zip files.")],
    store: Annotated[
        Path, typer.Option("--to", help="Folder of results and catalogue.", show_default=False)
    ],
    again: Annotated[
        str | None, typer.Option(help="failed: take up again what failed before.")
    ] = None,
    processes: Processes = ONE_PER_CORE,
    cluster: Cluster = None,
    manifest: Annotated[
        Path | None,
        typer.Option(help="CSV of whose the files are: file, patient, date (page, sex, age)."),
    ] = None,
    name_pattern: Annotated[
        str | None,
        typer.Option(help="Regular expression of file names with (?P<patient>...), (?P<date>...)."),
    ] = None,
    keep_header: Annotated[
        bool, typer.Option("--keep-header", help="Keep the printing outside the traces as text.")
    ] = False,
    header_fields: Annotated[
        Path | None,
        typer.Option(help="File of regular expressions whose named groups are fields of it."),
    ] = None,
    page_seconds: PageSeconds = 120.0,
    page_memory_mb: PageMemory = 6144,
    speed: Speed = None,
    gain: Gain = None,
    layout: Annotated[str | None, typer.Option(help="Layout of all pages, such as 3x4+1.")] = None,
    max_megapixels: MaxMegapixels = Options.max_megapixels,
) -> None:
    """Read every page under the folders into a store; started again, it continues.

    Each page ends as good, needs a look, or failed with its reason. Sources are only read, and
    printing outside the traces is covered on every picture in the store.
    """
    if again not in (None, "failed"):
        raise typer.BadParameter(f"'{again}' is not known here: give failed")
    try:
        options = Options(
            speed_mm_s=speed, gain_mm_mv=gain, layout=layout, max_megapixels=max_megapixels
        )
    except ValueError as error:
        raise typer.BadParameter(str(error)) from None
    from digitize.archive.alone import Limits
    from digitize.archive.engines import engine_for
    from digitize.archive.reading import read_for_store
    from digitize.archive.run import run_archive

    limits = Limits(page_seconds, page_memory_mb)
    kept = _kept(manifest, name_pattern, header_fields, keep_header=keep_header)
    failed = run_archive(
        folders,
        store,
        options,
        limits,
        engine_for(cluster, processes),
        read=partial(read_for_store, header=kept.header),
        preload=("digitize.archive.warm", "digitize.cli"),
        kept=kept,
        again_failed=again == "failed",
    )
    raise typer.Exit(1 if failed else 0)


@app.command()
def redact(
    files: Annotated[list[Path], typer.Argument(help="Scans, faxes, photos.")],
    output: Annotated[
        Path | None,
        typer.Option("-o", "--output", help="Folder for the copies; else beside each file."),
    ] = None,
    replace: Annotated[bool, typer.Option("--replace", help="Write over earlier copies.")] = False,
) -> None:
    """Write NAME.redacted.png: all printing covered but lead names and the run, no metadata.

    Writing that runs through a trace may stay: look at each copy before you pass it on.
    """
    from digitize.redact_command import redact_files

    with console(len(files)) as shown_on:
        failed = redact_files(files, Options(), shown_on, folder=output, replace=replace)
    raise typer.Exit(1 if failed else 0)


def _kept(
    manifest: Path | None, pattern: str | None, fields: Path | None, *, keep_header: bool
) -> "Kept":
    """What the store holds beside what the pages say."""
    from digitize.archive.charts import Charts, name_pattern, read_manifest
    from digitize.archive.header import read_patterns
    from digitize.archive.run import Kept

    if fields is not None and not keep_header:
        raise typer.BadParameter("--header-fields looks into the header: give --keep-header too")
    try:
        rows = {} if manifest is None else read_manifest(manifest)
        names = None if pattern is None else name_pattern(pattern)
        header = () if fields is None else read_patterns(fields)
    except ValueError as error:
        raise typer.BadParameter(str(error)) from None
    except InputError as error:
        print(error, file=sys.stderr)
        raise typer.Exit(1) from None
    said = Charts(rows, names) if manifest or names else None
    return Kept(said, header if keep_header else None)

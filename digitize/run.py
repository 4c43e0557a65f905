"""Files read one after another, their results written; one bad page never stops the others."""

from pathlib import Path

from digitize import CAUTION
from digitize.console import Console
from digitize.errors import InputError, OutputExists, at, shown
from digitize.explain import PICTURES, draw_stage
from digitize.options import Options
from digitize.overlay import draw_overlay
from digitize.read import Stages, read_stages
from digitize.safe_write import refuse_existing, write_files
from digitize.tracing import Known
from digitize.tracing_files import output_stem, tracing_files

OVERLAY_ENDING = ".overlay.png"
EXPLAINED = ".explain-"


def read_files(
    files: list[Path],
    options: Options,
    console: Console,
    *,
    folder: Path | None = None,
    replace: bool = False,
    timings: bool = False,
    explain: bool = False,
) -> int:
    """Read every page of every file and write its CSV, JSON and overlay.

    Parameters
    ----------
    files : list of Path
        Pictures that this program drew are left out: they are results.
    options : Options
        What a person knows better than the pages.
    console : Console
        Takes results, errors and progress.
    folder : Path, optional
        Where the results go; beside each file if not given.
    replace : bool
        Whether earlier results may be replaced.
    timings : bool
        Whether to say how long each stage took.
    explain : bool
        Whether to write one picture per stage as well.

    Returns
    -------
    int
        How many files and pages could not be used.
    """
    done = 0
    written: set[Path] = set()

    for file in files:
        console.begin(shown(file.name))
        if file.name.endswith(OVERLAY_ENDING) or EXPLAINED in file.name:
            console.line(f"{shown(file.name)}: left out, it is a result and not a scan")
            console.end()
            continue
        try:
            for stages in read_stages(file, options, on_error=console.fail, on_stage=console.stage):
                console.stage("files")
                try:
                    stem = _write(
                        stages,
                        file.parent if folder is None else folder,
                        written,
                        replace=replace,
                        explain=explain,
                    )
                except InputError as error:
                    console.fail(at(error, file.name, stages.page.source.page))
                    continue
                done += 1
                console.result(_summary(stages, stem))
                if timings:
                    console.line(f"{shown(stem.name)}, {console.timings()}")
        except InputError as error:
            console.fail(at(error, file.name))
        console.end()
    if done:
        console.result(CAUTION)
    return console.failed


def _write(
    stages: Stages, folder: Path, written: set[Path], *, replace: bool, explain: bool
) -> Path:
    """Write the files of a page; their common name, which is added to `written`."""
    stem = folder / output_stem(stages.page.source)
    if stem in written:
        raise OutputExists("another file of the same name was read before it: use -o")
    files = {folder / name: data for name, data in tracing_files(stages.tracing, stem.name).items()}
    overlay = folder / f"{stem.name}{OVERLAY_ENDING}"
    wanted = {folder / f"{stem.name}{EXPLAINED}{name}.png": name for name in PICTURES if explain}
    # Before the drawing, which takes time.
    refuse_existing([overlay, *wanted, *files], replace=replace)
    pictures = {path: draw_stage(stages, name) for path, name in wanted.items()}
    overlay_png = draw_overlay(stages.page, stages.tracing)
    write_files({**pictures, overlay: overlay_png, **files}, replace=replace)
    written.add(stem)
    return stem


def _summary(stages: Stages, stem: Path) -> str:
    """What was read on one page, in a few lines."""
    tracing = stages.tracing
    source = tracing.source
    lines = [
        f"{shown(source.file_name)}, page {source.page}: {len(tracing.leads)} leads, "
        f"layout {_how(tracing.layout)}, {_how(tracing.speed_mm_s, 'mm/s')}, "
        f"{_how(tracing.gain_mm_mv, 'mm/mV')}, columns {_how(tracing.timing)}"
    ]
    lines += [f"  look: {check.message}" for check in tracing.checks if check.passed is False]
    return "\n".join([*lines, f"  {shown(stem)}.csv, .json, {OVERLAY_ENDING}"])


def _how(known: Known, unit: str = "") -> str:
    """A value with its unit and origin: "25 mm/s (printed)"."""
    value = f"{known.value:g}" if isinstance(known.value, float) else str(known.value)
    return f"{value} {unit}".rstrip() + f" ({known.source})"

"""Whatever a person points at, as tracings: a page to digitise, a tracing, a digital ECG."""

import json
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from digitize.errors import InputError, UnreadableFile, at
from digitize.options import Options
from digitize.tracing import Tracing

DIGITAL_ENDINGS = (".hea", ".edf", ".dcm")
TABLE_ENDINGS = (".csv", ".json")


@dataclass(frozen=True, eq=False)
class Given:
    """One ECG with the files that its digitising adds: name to content, none for a digital one."""

    tracing: Tracing
    stem: str
    extra_files: dict[str, bytes]
    overlay_png: bytes | None


def open_ecgs(
    path: Path,
    options: Options,
    *,
    unit: str | None = None,
    on_error: Callable[[InputError], None],
) -> Iterator[Given]:
    """Every ECG in a file, pages digitised first.

    Parameters
    ----------
    path : Path
        An image or PDF; the CSV or JSON of a tracing; a WFDB header, EDF, DICOM waveform or CSV.
    options : Options
        What the person knows better than the page; used for pages alone.
    unit : str, optional
        "mV" or "uV" of a digital CSV that does not say it.
    on_error : callable
        Called with the error of a page that cannot be used; the pages after it still come.

    Raises
    ------
    InputError
        The file cannot be used at all.
    """
    if not path.is_file():
        what = "it is a folder: give its files" if path.is_dir() else "there is no such file"
        raise at(UnreadableFile(what), path.name)
    ending = path.suffix.lower()
    if ending in TABLE_ENDINGS:
        yield _from_table(path, unit)
    elif holds_samples(path):
        from measure.sources import read_digital

        yield Given(read_digital(path, unit=unit), path.stem, {}, None)
    else:
        yield from _from_pages(path, options, on_error)


def holds_samples(path: Path) -> bool:
    """Whether a file holds samples rather than a page, by its ending and where that is not enough.

    A tracing and a digital ECG do.
    """
    ending = path.suffix.lower()
    return ending in TABLE_ENDINGS or (ending in DIGITAL_ENDINGS and not _is_picture(path))


def _from_table(path: Path, unit: str | None) -> Given:
    """A tracing of ours where its JSON stands beside it, else a digital ECG as CSV."""
    from digitize.tracing_files import FORMAT, read_tracing

    described = path.with_suffix(".json")
    if described.is_file() and _format_of(described) == FORMAT:
        overlay = path.with_suffix(".overlay.png")
        picture = overlay.read_bytes() if overlay.is_file() else None
        return Given(read_tracing(path), path.stem, {}, picture)
    if path.suffix.lower() == ".json":
        raise at(UnreadableFile("this JSON is no tracing; give NAME.json or NAME.csv"), path.name)
    from measure.sources import read_digital

    return Given(read_digital(path, unit=unit), path.stem, {}, None)


def _from_pages(
    path: Path, options: Options, on_error: Callable[[InputError], None]
) -> Iterator[Given]:
    from digitize.overlay import draw_overlay
    from digitize.read import read_stages
    from digitize.tracing_files import output_stem, tracing_files

    for stages in read_stages(path, options, on_error=on_error):
        stem = output_stem(stages.page.source)
        overlay = draw_overlay(stages.page, stages.tracing)
        files = {f"{stem}.overlay.png": overlay, **tracing_files(stages.tracing, stem)}
        yield Given(stages.tracing, stem, files, overlay)


def _is_picture(path: Path) -> bool:
    """A DICOM file that holds a picture rather than a waveform."""
    if path.suffix.lower() != ".dcm":
        return False
    from importlib.util import find_spec

    if find_spec("pydicom") is None:
        return False  # the reader of waveforms says which package is missing
    import pydicom

    try:
        header = pydicom.dcmread(path, stop_before_pixels=True)
    except (pydicom.errors.InvalidDicomError, OSError, EOFError):
        return False  # and that it cannot be read
    return "WaveformSequence" not in header


def _format_of(path: Path) -> str | None:
    try:
        content = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return None
    return content.get("format") if isinstance(content, dict) else None

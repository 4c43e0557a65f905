"""One call of `digitize export`: tracings in, files of an open format out."""

from pathlib import Path

from digitize import CAUTION
from digitize.console import Console
from digitize.errors import CannotExport, InputError, at, shown
from digitize.formats import export
from digitize.safe_write import write_files
from digitize.tracing import Tracing
from digitize.tracing_files import read_tracing

SCAN = "dicom-scan"
_ENDINGS = (".csv", ".json")


def export_files(
    names: list[Path], form: str, console: Console, *, folder: Path | None, replace: bool
) -> int:
    """Write each tracing in one format and return how many could not be.

    Parameters
    ----------
    names : list of Path
        Tracings: NAME.csv, NAME.json or NAME alone.
    form : str
        One of `digitize.formats.FORMATS`, or `SCAN` for the page itself, which then lies beside
        the tracing under its own name.
    folder : Path, optional
        Where the files go; beside each tracing if not given.
    replace : bool
        Whether earlier files may be replaced.
    """
    for name in names:
        json_file = name.with_name(_stem(name) + ".json")
        place = name.parent if folder is None else folder
        try:
            tracing = read_tracing(json_file)
            if form == SCAN:
                contents = _scan(tracing, name.parent, _stem(name))
            else:
                contents = export(tracing, _stem(name), form)
            paths = {place / file: content for file, content in contents.items()}
            write_files(paths, replace=replace)
        except InputError as error:
            console.fail(at(error, name.name))
        else:
            console.result(" ".join(shown(path) for path in paths))
    if console.failed < len(names):
        console.result(CAUTION)
    return console.failed


def _scan(tracing: Tracing, folder: Path, stem: str) -> dict[str, bytes]:
    """The page that a tracing was read from, if it still lies there unchanged."""
    from digitize.formats import dicom_scan
    from digitize.pages import open_pages

    source = tracing.source
    path = folder / source.file_name
    if Path(source.file_name).name != source.file_name or not path.is_file():
        raise CannotExport(f"its scan is not beside it: put {shown(source.file_name)} there")
    page = next(open_pages(path, only=source.page), None)
    if page is None or page.source.sha256 != source.sha256:
        raise CannotExport(f"{shown(source.file_name)} is not the scan that it was read from")
    return dicom_scan.files(page, stem)


def _stem(name: Path) -> str:
    """The name of a tracing without its endings."""
    return name.stem if name.suffix.lower() in _ENDINGS else name.name

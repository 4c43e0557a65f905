"""One call of `digitize export`: tracings in, files of an open format out."""

from pathlib import Path

from digitize import CAUTION
from digitize.console import Console
from digitize.errors import InputError, at, shown
from digitize.formats import export
from digitize.safe_write import write_files
from digitize.tracing_files import read_tracing

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
        One of `digitize.formats.FORMATS`.
    folder : Path, optional
        Where the files go; beside each tracing if not given.
    replace : bool
        Whether earlier files may be replaced.
    """
    failed = 0
    for name in names:
        json_file = name.with_name(_stem(name) + ".json")
        place = name.parent if folder is None else folder
        try:
            contents = export(read_tracing(json_file), _stem(name), form)
            paths = {place / file: content for file, content in contents.items()}
            write_files(paths, replace=replace)
        except InputError as error:
            failed += 1
            console.line(str(at(error, name.name)))
        else:
            console.result(" ".join(shown(path) for path in paths))
    if failed < len(names):
        console.result(CAUTION)
    return failed


def _stem(name: Path) -> str:
    """The name of a tracing without its endings."""
    return name.stem if name.suffix.lower() in _ENDINGS else name.name

"""Files written beside their place, then renamed into it: a whole set, never over another file."""

import os
import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import IO

from digitize.errors import CannotWrite, OutputExists, shown


def refuse_existing(paths: list[Path], *, replace: bool) -> None:
    """Raise `OutputExists` where a result is there already and may not be replaced."""
    for path in paths:
        if not replace and os.path.lexists(path):
            raise OutputExists(
                f"{shown(path)} is there already: give --replace, or another folder with -o"
            )


def write_files(files: Mapping[Path, bytes], *, replace: bool) -> None:
    """Write a set of files that belong together.

    Parameters
    ----------
    files : mapping of Path to bytes
        The last is renamed last: where it stands, the others do.
    replace : bool
        Whether files of these names may be replaced.

    Raises
    ------
    OutputExists
        One of them is there and `replace` is not given; nothing is written.
    CannotWrite
        The folder is missing or closed, the disk full; nothing half-written is left.
    """
    refuse_existing(list(files), replace=replace)
    beside: dict[Path, Path] = {}
    try:
        for path, content in files.items():
            path.parent.mkdir(parents=True, exist_ok=True)
            beside[path] = _write_beside(path, content)
        for path, written in beside.items():
            written.replace(path)
    except OSError as error:
        reason = error.strerror or "input error"
        raise CannotWrite(
            f"cannot write to {shown(next(iter(files)).parent)} ({reason}): "
            "give another folder with -o"
        ) from None
    finally:
        for written in beside.values():
            written.unlink(missing_ok=True)


@contextmanager
def written(path: Path, *, replace: bool) -> Iterator[IO[bytes]]:
    """A file to write piece by piece; it takes its name when it is complete, and only then.

    Raises
    ------
    OutputExists
        One of that name is there and `replace` is not given.
    CannotWrite
        The folder is missing or closed, the disk full; nothing half-written is left.
    """
    refuse_existing([path], replace=replace)
    beside = None
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        beside = _write_beside(path, b"")
        with beside.open("wb") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        beside.replace(path)
    except OSError as error:
        reason = error.strerror or "input error"
        raise CannotWrite(f"cannot write {shown(path)} ({reason}): give another place") from None
    finally:
        if beside is not None:
            beside.unlink(missing_ok=True)


def _write_beside(path: Path, content: bytes) -> Path:
    """A complete, synced file with that content in the same folder, under a name of its own."""
    number, name = tempfile.mkstemp(dir=path.parent, prefix=".", suffix=".part")
    try:
        with os.fdopen(number, "wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        Path(name).chmod(0o666 & ~_umask())  # mkstemp keeps everyone else out
    except OSError:
        Path(name).unlink(missing_ok=True)
        raise
    return Path(name)


def _umask() -> int:
    """What this process takes from the permissions of new files; asking means setting it."""
    mask = os.umask(0)
    os.umask(mask)
    return mask

"""The folder of a store: one writer at a time, names by content, nothing half-written.

Names hold no part of the source's name, which may name a patient. Temporary files live in `tmp/`
and are removed at the next start.
"""

import fcntl
import os
import shutil
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from digitize.errors import CannotWrite, shown
from digitize.safe_write import write_files

CATALOGUE = "catalogue.sqlite"
_NAME_DIGITS = 32  # of the hash: two contents will not meet in 128 bits


@contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold a store for one writer; what a crash left behind is removed first.

    Raises
    ------
    CannotWrite
        Another run writes to it, or it cannot be made or written.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with (folder / ".lock").open("w") as lock:
            try:
                fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
            except BlockingIOError:
                raise CannotWrite(
                    f"another run writes to the store {shown(folder)}: wait for its end"
                ) from None
            _clean(folder)
            yield
    except OSError as error:
        reason = error.strerror or "input error"
        raise CannotWrite(
            f"the store {shown(folder)} cannot be written ({reason}): free space or name another"
        ) from None


def stem_of(sha256: str, options: str, page: int) -> str:
    """Where the results of a page stand below the store, without their endings."""
    return f"pages/{sha256[:2]}/{sha256[:_NAME_DIGITS]}-{options[:8]}.p{page}"


def put(folder: Path, stem: str, files: Mapping[str, bytes]) -> None:
    """Write a page's files (ending to content) and make their names last through a power cut."""
    place = folder / stem
    write_files(
        {place.with_name(place.name + end): content for end, content in files.items()},
        replace=True,  # of the same content and options, left by a run that was cut short
    )
    for parent in (place.parent, place.parent.parent, folder):
        _sync(parent)


def temporary(folder: Path) -> Path:
    """The folder for files that end with the run."""
    place = folder / "tmp"
    place.mkdir(exist_ok=True)
    return place


def _clean(folder: Path) -> None:
    shutil.rmtree(folder / "tmp", ignore_errors=True)
    for left in (folder / "pages").glob("*/.*.part"):
        left.unlink()


def _sync(folder: Path) -> None:
    """Have the system write a folder's entries to the disk."""
    number = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(number)
    finally:
        os.close(number)

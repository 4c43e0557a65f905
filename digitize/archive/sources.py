"""Every supported file under the folders given, also within zip files, known by its content.

Nothing is written beside the sources. The name of a member of a zip file is shown and stored, never
used as a path; what it unpacks to is limited, whatever its header says.
"""

import hashlib
import os
import stat
import zipfile
import zlib
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import IO

from digitize.archive.catalogue import Catalogue
from digitize.errors import InputError, UnreadableFile, at

ENDINGS = (
    *(".png", ".jpg", ".jpeg", ".tif", ".tiff", ".bmp", ".gif", ".webp"),
    *(".pdf", ".heic", ".heif", ".dcm"),
)
LARGEST_MEMBER_BYTES = 512 * 2**20
MOST_MEMBERS = 100_000
_RESULTS = ".overlay.png"
_BLOCK = 2**20
_ZIP_DAMAGE = (zipfile.BadZipFile, zlib.error, EOFError, NotImplementedError, RuntimeError)


@dataclass(frozen=True)
class Source:
    """One content to read: a file, or a member of a zip file."""

    path: Path
    sha256: str
    member: str | None = None

    @property
    def name(self) -> str:
        """Its own name, without folders."""
        return self.path.name if self.member is None else Path(self.member).name

    @property
    def key(self) -> bytes:
        """Whole path, with the member after it, as the system has it."""
        inside = b"" if self.member is None else b"/" + os.fsencode(self.member)
        return os.fsencode(self.path.resolve()) + inside


def find_files(folders: list[Path]) -> Iterator[Path]:
    """Files with a known ending under the folders, in order of their names; links are not followed.

    A file may be given in place of a folder.
    """
    for folder in folders:
        if not folder.is_dir():
            yield folder
            continue
        for place, below, names in os.walk(folder):
            below.sort()
            for name in sorted(names):
                path = Path(place, name)
                if _wanted(name, (*ENDINGS, ".zip")) and not path.is_symlink():
                    yield path


def identify(path: Path, catalogue: Catalogue) -> Iterator[Source | InputError]:
    """The contents of a file, each noted in the catalogue; an error for what cannot be read."""
    try:
        status = path.stat()
        if not stat.S_ISREG(status.st_mode):
            raise UnreadableFile("this is not a regular file")
        if path.suffix.lower() == ".zip":
            yield from _members(path, status.st_mtime_ns, catalogue)
            return
        key = os.fsencode(path.resolve())
        sha256 = catalogue.known_source(key, status.st_size, status.st_mtime_ns)
        if sha256 is None:
            with path.open("rb") as file:
                sha256 = hashlib.file_digest(file, "sha256").hexdigest()
            catalogue.add_source(key, status.st_size, status.st_mtime_ns, sha256)
        yield Source(path, sha256)
    except UnreadableFile as error:
        yield at(error, path.name)
    except OSError as error:
        reason = error.strerror or "input error"
        yield at(UnreadableFile(f"it cannot be read ({reason})"), path.name)
    except _ZIP_DAMAGE:
        yield at(UnreadableFile("the zip file is damaged or locked with a password"), path.name)


def unpack(source: Source, folder: Path) -> Path:
    """A member of a zip file as a file of its own in `folder`, under a name that is ours."""
    target = folder / f"{source.sha256}.member"
    with zipfile.ZipFile(source.path) as archive, target.open("wb") as file:
        member = archive.getinfo(source.member or "")
        for block in _blocks(archive.open(member)):
            file.write(block)
    return target


def _members(path: Path, changed_ns: int, catalogue: Catalogue) -> Iterator[Source | InputError]:
    with zipfile.ZipFile(path) as archive:
        members = [m for m in archive.infolist() if not m.is_dir() and _wanted(m.filename, ENDINGS)]
        if len(members) > MOST_MEMBERS:
            raise UnreadableFile(f"it holds more than {MOST_MEMBERS} files: split it")
        for member in members:
            source = Source(path, "", member.filename)
            try:
                sha256 = catalogue.known_source(source.key, member.file_size, changed_ns)
                if sha256 is None:
                    sha256 = _digest(archive.open(member))
                    catalogue.add_source(source.key, member.file_size, changed_ns, sha256)
                yield Source(path, sha256, member.filename)
            except UnreadableFile as error:
                yield at(error, source.name)
            except _ZIP_DAMAGE:
                reason = UnreadableFile("this file in a zip file is damaged or locked")
                yield at(reason, source.name)


def _digest(file: IO[bytes]) -> str:
    digest = hashlib.sha256()
    for block in _blocks(file):
        digest.update(block)
    return digest.hexdigest()


def _blocks(file: IO[bytes]) -> Iterator[bytes]:
    """The content piece by piece, up to the limit."""
    total = 0
    with file:
        while block := file.read(_BLOCK):
            total += len(block)
            if total > LARGEST_MEMBER_BYTES:
                most = LARGEST_MEMBER_BYTES // 2**20
                raise UnreadableFile(f"it unpacks to more than {most} MB: unpack it by hand")
            yield block


def _wanted(name: str, endings: tuple[str, ...]) -> bool:
    low = name.lower()
    return low.endswith(endings) and not low.endswith(_RESULTS)


def remove(path: Path) -> None:
    """Take a temporary file away."""
    with suppress(OSError):
        path.unlink()

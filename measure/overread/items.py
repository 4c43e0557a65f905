"""What a worklist is made of: files, and the files of a folder.

Only names are looked at here; what a file holds is found when it is its turn.
"""

import os
from dataclasses import dataclass
from pathlib import Path

from digitize.archive.sources import ENDINGS, find_files
from digitize.errors import UnreadableFile, shown

JOURNAL_ENDING = ".overread.json"
_DIGITAL = (".hea", ".edf")


@dataclass(frozen=True)
class Item:
    """One page of a file.

    `journal` is where the over-reading is kept. `tracing` is the page's tracing in a store, under
    whose options it is read again.
    """

    name: str
    file: Path
    journal: Path
    page: int = 1
    tracing: Path | None = None
    sha256: str | None = None  # what the file must hold still


def file_items(place: Path, folder: Path | None) -> list[Item]:
    """Return the item of a file, or those under a folder: its pages and digital ECGs.

    Parameters
    ----------
    place : Path
        Whether a file is there is found when it is its turn.
    folder : Path, optional
        Where the journals go; beside each file where it is not given.

    Raises
    ------
    UnreadableFile
        A folder holds no ECG.
    """
    if not place.is_dir():
        return [_of_file(place, folder)]
    found = [_of_file(file, folder) for file in _below(place)]
    if not found:
        raise UnreadableFile(f"there is no ECG in the folder {shown(place)}")
    return found


def page_item(item: Item, page: int) -> Item:
    """Return the item of a later page of the same file."""
    stem = f"{item.file.stem}.p{page}"
    name = f"{item.file.name}, page {page}"
    return Item(name, item.file, item.journal.with_name(stem + JOURNAL_ENDING), page)


def _of_file(file: Path, folder: Path | None) -> Item:
    place = file.parent if folder is None else folder
    return Item(file.name, file, place / (file.stem + JOURNAL_ENDING))


def _below(folder: Path) -> list[Path]:
    """Pages and digital ECGs under a folder; results of this program are none."""
    pages = (file for file in find_files([folder]) if file.suffix.lower() in ENDINGS)
    digital = (
        Path(place, name)
        for place, _, names in os.walk(folder)
        for name in names
        if name.lower().endswith(_DIGITAL)
    )
    return sorted({*pages, *(file for file in digital if not file.is_symlink())})

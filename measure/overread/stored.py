"""From the pages of a store back to their sources, so that a person can over-read them."""

import os
import sqlite3
from collections.abc import Iterator, Sequence
from pathlib import Path

from digitize.archive.catalogue import LOOK, opened
from digitize.archive.store import CATALOGUE
from digitize.errors import UnreadableFile, at, shown

JOURNALS = "overread"  # folder of a store for what a person did: sources are only read


def sources_of(given: Sequence[Path]) -> tuple[list[Path], Path | None]:
    """Return the files to over-read, and where the journals go if any of them is of a store.

    Parameters
    ----------
    given : sequence of Path
        A store stands for all its pages that need a look, the JSON of a page in a store for that
        page; every other file stands for itself.

    Raises
    ------
    UnreadableFile
        The catalogue cannot be read, or a source is no longer where it was.
    """
    files: list[Path] = []
    folder = None
    for path in given:
        store = _store_of(path)
        if store is None:
            files.append(path)
            continue
        folder = store / JOURNALS
        stem = None if path.resolve() == store else _stem(path, store)
        with opened(store / CATALOGUE, read_only=True) as catalogue:
            files += _found(catalogue.db, stem, path)
    return list(dict.fromkeys(files)), folder


def _store_of(path: Path) -> Path | None:
    """The store that a path is, or lies in as the JSON of a page."""
    whole = path.resolve()
    if (whole / CATALOGUE).is_file():
        return whole
    above = whole.parents
    inside = path.suffix == ".json" and len(above) > 2 and above[1].name == "pages"
    return above[2] if inside and (above[2] / CATALOGUE).is_file() else None


def _stem(path: Path, store: Path) -> str:
    return path.resolve().relative_to(store).as_posix().removesuffix(".json")


def _found(db: sqlite3.Connection, stem: str | None, path: Path) -> Iterator[Path]:
    """The source of one page, or of all that need a look, each once."""
    where, value = ("p.status = ?", LOOK) if stem is None else ("p.stem = ?", stem)
    sql = f"""
        SELECT p.sha256, max(s.path) FROM page p LEFT JOIN source s USING (sha256)
        WHERE {where} GROUP BY p.sha256 ORDER BY min(p.page), p.sha256
    """
    for sha256, name in db.execute(sql, (value,)):
        source = Path(os.fsdecode(name or b""))
        if name is None or not source.is_file():
            reason = (
                f"the source of page {sha256[:12]} is not where it was, or in a zip file: "
                "give the scan itself"
            )
            raise at(UnreadableFile(reason), shown(path))
        yield source

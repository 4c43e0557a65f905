"""From tracings, in a store or beside their page, back to the pages that a person over-reads."""

import hashlib
import os
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

from digitize.archive.catalogue import LOOK, Catalogue, opened
from digitize.archive.store import CATALOGUE
from digitize.errors import UnreadableFile
from digitize.tracing_files import read_tracing
from measure.inputs import TABLE_ENDINGS
from measure.overread.items import JOURNAL_ENDING, Item

JOURNALS = "overread"  # folder of a store for what a person did: sources are only read


def stored_items(path: Path, folder: Path | None) -> list[Item] | None:
    """Return the pages of a store to over-read, or None for a path that is of no store.

    A page is read from its source once more, under the options that the store read it with. Where
    the source is no longer there, or lies in a zip file, its tracing in the store is taken.

    Parameters
    ----------
    path : Path
        A store stands for all its pages that need a look, the JSON of a page in a store for that
        page.
    folder : Path, optional
        Where the journals go; in the store where it is not given.

    Raises
    ------
    UnreadableFile
        The catalogue cannot be read.
    """
    store = _store_of(path)
    if store is None:
        return None
    wanted = None if path.resolve() == store else _stem(path, store)
    place = store / JOURNALS if folder is None else folder
    with opened(store / CATALOGUE, read_only=True) as catalogue:
        sources = _sources(catalogue)
        return [
            _item(row, store, sources.get(row["sha256"]), place)
            for row in catalogue.rows()
            if row["stem"] and (row["status"] == LOOK if wanted is None else row["stem"] == wanted)
        ]


def with_page(item: Item) -> Item:
    """Return an item that is a tracing as the page it was read from, where that lies beside it."""
    if item.file.suffix.lower() not in TABLE_ENDINGS or item.tracing is not None:
        return item
    try:
        source = read_tracing(item.file.with_suffix(".json")).source
        page = item.file.with_name(Path(source.file_name).name)
        with page.open("rb") as file:
            same = hashlib.file_digest(file, "sha256").hexdigest() == source.sha256
    except (UnreadableFile, OSError):
        return item  # no tracing of this program, or its page is elsewhere
    if not same:
        return item
    return replace(item, file=page, page=source.page, tracing=item.file, sha256=source.sha256)


def _sources(catalogue: Catalogue) -> dict[str, Path]:
    """Where each content was met."""

    def rows() -> Iterator[tuple[str, Path]]:
        for path, sha256 in catalogue.db.execute("SELECT path, sha256 FROM source ORDER BY path"):
            yield sha256, Path(os.fsdecode(path))

    return dict(rows())


def _item(row: dict[str, Any], store: Path, source: Path | None, place: Path) -> Item:
    tracing = store / f"{row['stem']}.json"
    there = source is not None and source.is_file()
    name = tracing.stem if source is None else source.name
    return Item(
        name=name if row["page"] == 1 else f"{name}, page {row['page']}",
        file=source if there and source is not None else tracing,
        journal=place / f"{tracing.stem}{JOURNAL_ENDING}",
        page=row["page"],
        tracing=tracing,
        sha256=row["sha256"] if there else None,
    )


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

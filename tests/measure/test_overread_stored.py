"""From a store to the files that a person over-reads."""

import os

import pytest

from digitize.archive.catalogue import PageRow, opened
from digitize.errors import UnreadableFile
from measure.overread.stored import JOURNALS, sources_of


@pytest.fixture
def store(tmp_path):
    """Two files: one of two pages that both need a look, one that is good."""
    scans, folder = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    folder.mkdir()
    with opened(folder / "catalogue.sqlite") as catalogue:
        for sha256, name, statuses in (("a", "1.tif", ("look", "look")), ("b", "2.tif", ("good",))):
            (scans / name).write_bytes(b"x")
            catalogue.add_source(os.fsencode(scans / name), 1, 1, sha256)
            for page, status in enumerate(statuses, start=1):
                stem = f"pages/{sha256}/{sha256}-o.p{page}"
                catalogue.add_page(sha256, "o", PageRow(page, status, stem=stem))
    return folder


def test_a_store_stands_for_the_pages_that_need_a_look(store):
    scans = store.parent / "scans"
    assert sources_of([store]) == ([scans / "1.tif"], store / JOURNALS)


def test_the_json_of_a_page_stands_for_its_source(store):
    scans = store.parent / "scans"
    page = store / "pages" / "b" / "b-o.p1.json"
    assert sources_of([page]) == ([scans / "2.tif"], store / JOURNALS)


def test_other_files_stand_for_themselves(store):
    scans = store.parent / "scans"
    given = [scans / "2.tif", scans / "x.json"]
    assert sources_of(given) == (given, None)


def test_a_source_that_was_moved_is_told(store):
    (store.parent / "scans" / "1.tif").unlink()
    with pytest.raises(UnreadableFile, match="is not where it was"):
        sources_of([store])

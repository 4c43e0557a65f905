"""What a worklist is made of, and how its entries are read one after the other."""

import json
import os
import shutil

import numpy as np
import pytest
from PIL import Image

from digitize.archive.catalogue import GOOD, LOOK, PageRow, opened
from digitize.archive.store import CATALOGUE
from digitize.errors import UnreadableFile
from digitize.options import Options
from digitize.tracing_files import tracing_files
from measure.overread.chain import Chain
from measure.overread.corrections import Gain, Patient
from measure.overread.items import page_item
from measure.overread.serve import find_items
from measure.overread.session import Session
from measure.overread.stored import with_page
from measure.overread.view import overview
from measure.overread.worklist import AT_HAND, Worklist
from measure.reading import Person
from measure.reading_files import to_json
from tests.measure.overread.made import (
    NOON,
    SAMPLES,
    digital_chain,
    page_chain,
    page_stages,
    worklist,
    write_csv,
)


def listed(*places, options=None, folder=None):
    return Worklist(find_items(places, folder), options or Options(), Person())


def test_a_folder_gives_its_pages_and_digital_ecgs_but_no_results(tmp_path):
    for name in (
        "b.png",
        "a.JPG",
        "sub/c.tif",
        "d.hea",
        "d.dat",
        "a.overlay.png",
        "a.json",
        "x.txt",
    ):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_bytes(b"x")
    (tmp_path / "link.png").symlink_to(tmp_path / "b.png")
    names = [item.name for item in find_items([tmp_path], None)]
    assert sorted(names) == ["a.JPG", "b.png", "c.tif", "d.hea"]


def test_an_empty_folder_is_told(tmp_path):
    with pytest.raises(UnreadableFile, match="no ECG in the folder"):
        find_items([tmp_path], None)


def test_journals_lie_beside_the_file_or_where_they_are_asked_for(tmp_path):
    (item,) = find_items([tmp_path / "scan.tif"], None)
    assert item.journal == tmp_path / "scan.overread.json"
    assert page_item(item, 3).journal == tmp_path / "scan.p3.overread.json"
    (item,) = find_items([tmp_path / "scan.tif"], tmp_path / "out")
    assert item.journal == tmp_path / "out" / "scan.overread.json"


@pytest.fixture
def store(tmp_path):
    """A store of three pages: two to look at, of one the source is gone; a good one."""
    place, there = tmp_path / "store", tmp_path / "sources" / "there.png"
    place.mkdir()
    there.parent.mkdir()
    there.write_bytes(b"page")
    with opened(place / CATALOGUE) as catalogue:
        for k, (name, status) in enumerate((("there", LOOK), ("gone", LOOK), ("good", GOOD))):
            path = os.fsencode(there.with_name(name + ".png"))
            catalogue.add_source(path, 4, 0, f"{k}" * 64)
            row = PageRow(1, status, "why", stem=f"pages/{k}{k}/{name}-x.p1")
            catalogue.add_page(f"{k}" * 64, "x", row)
    return place


def test_a_store_stands_for_its_pages_that_need_a_look(store):
    there, gone = find_items([store], None)
    assert (there.name, gone.name) == ("there.png", "gone.png")
    assert there.file == store.parent / "sources" / "there.png"
    assert there.tracing == store / "pages/00/there-x.p1.json"
    assert there.sha256 == "0" * 64
    assert there.journal == store / "overread" / "there-x.p1.overread.json"
    assert gone.file == gone.tracing == store / "pages/11/gone-x.p1.json"


def test_the_json_of_a_page_in_a_store_stands_for_that_page(store):
    (page,) = find_items([store / "pages/22/good-x.p1.json"], store / "out")
    assert page.name == "good.png"
    assert page.journal == store / "out" / "good-x.p1.overread.json"


def test_a_store_without_a_page_to_look_at_is_told(tmp_path):
    with opened(tmp_path / CATALOGUE):
        pass
    with pytest.raises(UnreadableFile, match="needs a look"):
        find_items([tmp_path], None)


def test_a_page_that_is_no_longer_what_the_store_read_is_refused(store):
    made = listed(store)
    page = made.entries[0]
    Image.fromarray(np.full((60, 90), 255, np.uint8)).save(page.item.file)
    page.item.tracing.parent.mkdir(parents=True)
    tracing = digital_chain().reading().tracing
    for name, content in tracing_files(tracing, page.item.tracing.stem).items():
        (page.item.tracing.parent / name).write_bytes(content)
    made.read_next(page)
    assert (page.state, page.session) == ("failed", None)
    assert "no longer what the store read" in page.message


def test_each_page_of_a_file_becomes_an_entry_of_its_own(tmp_path):
    """Two white pages of a fax: neither has a grid, and each can be given its scale."""
    white = Image.fromarray(np.full((600, 1000), 255, np.uint8))
    white.save(tmp_path / "two.tif", save_all=True, append_images=[white], dpi=(200, 100))
    write_csv(tmp_path / "after.csv")
    made = listed(tmp_path / "two.tif", tmp_path / "after.csv")
    made.read_next(made.entries[0])
    names = [entry.item.name for _, entry in made.in_order()]
    assert names == ["two.tif", "two.tif, page 2", "after.csv"]
    made.read_next(made.entries[2])
    assert [entry.state for entry in made.entries] == ["no scale", "waiting", "no scale"]
    assert made.entries[2].pictures.tile("scan", 0, 0, 0)
    assert made.entries[2].source.page == 2


def test_the_scale_kept_in_a_journal_is_used_again(tmp_path):
    Image.fromarray(np.full((600, 1000), 255, np.uint8)).save(tmp_path / "bare.png")
    (tmp_path / "bare.overread.json").write_text(json.dumps({"px_per_mm": [8.0, 4.0]}))
    made = listed(tmp_path / "bare.png")
    made.read_next(made.entries[0])
    assert "journal" not in made.entries[0].message
    assert made._options_for(made.entries[0]).px_per_mm == (8.0, 4.0)


def test_only_a_few_are_kept_at_hand_and_what_was_done_is_not_lost(tmp_path):
    write_csv(tmp_path / "0.csv")
    files = [tmp_path / f"{k}.csv" for k in range(AT_HAND + 2)]
    for file in files[1:]:
        shutil.copy(files[0], file)
    made = listed(*files)
    made.read_next(made.entries[0])
    made.entries[0].session.correct(Patient("male", 70.0), "A. Reader")
    for entry in made.entries[1:]:
        made.read_next(entry)
        made.want(entry)
    ready = [entry.state for entry in made.entries]
    assert ready == ["waiting"] * 2 + ["ready"] * AT_HAND
    made.want(made.entries[0])
    made.read_next(made.wanted.get_nowait())
    assert made.entries[0].session.steps[0].correction == Patient("male", 70.0)


def test_a_tracing_whose_page_lies_beside_it_is_read_from_its_page(tmp_path):
    stages = page_stages()
    page = tmp_path / stages.page.source.file_name
    shutil.copy(SAMPLES / page.name, page)
    for name, content in tracing_files(stages.tracing, page.stem).items():
        (tmp_path / name).write_bytes(content)
    (given,) = find_items([page.with_suffix(".json")], None)
    item = with_page(given)
    assert (item.file, item.page, item.journal) == (page, 1, given.journal)
    assert item.tracing == page.with_suffix(".json")
    page.write_bytes(b"another page")
    assert with_page(given) == given


def test_a_tracing_without_its_page_is_shown_on_paper_of_its_own(tmp_path):
    tracing = page_stages().tracing
    over = Session(Chain(tracing, None, Person()), tmp_path / "x.overread.json", lambda: NOON)
    shown = overview(over)
    assert shown["paper"]["flat"]["px"] is None
    assert shown["paper"]["ruled_mm"] == pytest.approx(tracing.geometry["ruled_mm"], abs=1e-4)
    assert all(panel["y_mm"] for panel in shown["panels"])


def test_the_picture_does_not_wait_for_what_is_computed(tmp_path):
    made = worklist(tmp_path, page_chain())
    (entry,) = made.entries
    entry.session.correct(Gain(5.0), "A. Reader")
    with entry.lock:  # as while a correction is computed
        assert entry.pictures.scan is page_stages().page.pixels
        assert entry.pictures is entry.pictures


def test_a_saved_reading_can_be_compared_and_no_more(tmp_path):
    (tmp_path / "old.reading.json").write_bytes(to_json(digital_chain().reading()))
    made = listed(tmp_path / "old.reading.json")
    made.read_next(made.entries[0])
    assert (made.entries[0].state, made.entries[0].session) == ("to compare", None)
    assert made.entries[0].document()["format"] == "millivellum reading"


def test_one_file_that_cannot_be_used_costs_itself_alone(tmp_path):
    (tmp_path / "bad.png").write_bytes(b"no picture")
    write_csv(tmp_path / "good.csv")
    made = listed(tmp_path / "bad.png", tmp_path / "good.csv", tmp_path / "none.csv")
    for entry in list(made.entries):
        made.read_next(entry)
    assert [entry.state for entry in made.entries] == ["failed", "ready", "failed"]
    assert "bad.png" in made.entries[0].message

"""Hostile and broken files through a whole run: each ends in rows, none stops the others.

`MILLIVELLUM_VARIANTS` asks for more seeded variants of each kind than the quick suite makes.
"""

import errno
import hashlib
import os
import shutil
import sqlite3
import subprocess
import time
from contextlib import closing

import pytest

from digitize.archive.alone import Limits
from digitize.archive.engines import this_machine
from digitize.archive.run import run_archive
from digitize.options import Options
from tests.digitize.archive import hostile
from tests.digitize.archive import stand_in as made

VARIANTS = int(os.environ.get("MILLIVELLUM_VARIANTS", "4"))


def run(scans, store, seconds=20.0):
    options, limits = Options(max_megapixels=20), Limits(seconds, 3072)
    return run_archive([scans], store, options, limits, this_machine(2), read=made.read)


def rows(store):
    with closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
        return db.execute("SELECT sha256, page, status, reason FROM page").fetchall()


def outside(tmp_path, store):
    return {
        path: path.read_bytes()
        for path in tmp_path.rglob("*")
        if path.is_file() and store not in path.parents
    }


def keep(scans, kind, contents):
    scans.mkdir(exist_ok=True)
    for number, content in enumerate(contents):
        (scans / f"{number}.{kind.split('.')[0]}").write_bytes(content)


@pytest.mark.parametrize("kind", hostile.whole_files())
def test_damaged_files_end_in_rows(tmp_path, kind, capfd):
    """Each content has a row, what failed has a reason, and nothing is written elsewhere."""
    scans, store = tmp_path / "scans", tmp_path / "store"
    keep(scans, kind, hostile.variants(kind, VARIANTS))
    before = outside(tmp_path, store)
    run(scans, store)
    found = rows(store)
    if kind != "zip":  # whose members are the contents
        contents = {path.read_bytes() for path in scans.iterdir()}
        assert len({sha256 for sha256, *_ in found}) == len(contents)
    assert all(reason for *_, status, reason in found if status == "failed")
    assert outside(tmp_path, store) == before
    assert "Traceback" not in capfd.readouterr().err


@pytest.mark.parametrize("kind", ["png", "jpg", "tif.fax", "pdf.scanned", "heic", "dcm"])
def test_cut_at_every_tenth_ends_in_rows(tmp_path, kind):
    scans, store = tmp_path / "scans", tmp_path / "store"
    keep(scans, kind, hostile.cuts(kind))
    run(scans, store)
    assert len({sha256 for sha256, *_ in rows(store)}) == 9


def test_sound_files_of_every_kind_are_read(tmp_path):
    """The whole files that the damage is done to: otherwise it would prove nothing."""
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    for kind, content in hostile.whole_files().items():
        (scans / f"{kind.replace('.', '-')}.{kind.split('.')[0]}").write_bytes(content)
    assert run(scans, store) == 0
    assert {status for _, _, status, _ in rows(store)} == {"good"}


def test_bombs_and_oddities_each_end_in_a_clear_row(tmp_path, capfd):
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    refused, odd = hostile.refused_files(), hostile.odd_files()
    for name, content in {**refused, **odd}.items():
        (scans / name).write_bytes(content)
    (scans / "folder.png").mkdir()
    os.mkfifo(scans / "queue.png")
    before = {path for path in tmp_path.rglob("*") if store not in path.parents}
    run(scans, store)
    by_content = {}
    for sha256, _, status, _ in rows(store):
        by_content.setdefault(sha256, set()).add(status)
    for name, content in refused.items():
        if not name.endswith(".zip"):
            assert by_content[hashlib.sha256(content).hexdigest()] == {"failed"}, name
    for name, content in odd.items():
        assert "good" in by_content[hashlib.sha256(content).hexdigest()], name
    assert all("\n" not in reason for *_, reason in rows(store))
    assert not any("the program failed" in reason for *_, reason in rows(store))
    said = capfd.readouterr().err
    assert "queue.png: this is not a regular file" in said
    assert "Traceback" not in said
    assert {p for p in tmp_path.rglob("*") if store not in p.parents} - before == {store}


def test_page_that_unpacks_for_ever_is_given_up(tmp_path):
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    (scans / "inflating.pdf").write_bytes(hostile.inflating_pdf())
    made.save(scans / "sound.png", made.READ)
    began = time.monotonic()
    run(scans, store, seconds=2.0)
    assert time.monotonic() - began < 60
    assert sorted(row[1] for row in rows(store)) == [1, 1]


def test_full_disk_ends_the_run_in_one_line_and_later_it_continues(tmp_path, monkeypatch, capsys):
    scans, store = tmp_path / "scans", tmp_path / "store"
    for number in range(3):
        made.save(scans / f"{number}.png", made.READ, number=number)
    with monkeypatch.context() as patch:

        def full(path, content):
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

        patch.setattr("digitize.safe_write._write_beside", full)
        assert run(scans, store) == 1
    assert "No space left on device" in capsys.readouterr().err.splitlines()[-1]
    assert rows(store) == []
    assert run(scans, store) == 0
    assert len(rows(store)) == 3


@pytest.fixture
def small_disk(tmp_path):
    """A file system of 300 KB of its own."""
    place = tmp_path / "disk"
    place.mkdir()
    words = ["mount", "-t", "tmpfs", "-o", "size=300k", "tmpfs", str(place)]
    if shutil.which("mount") is None or subprocess.run(words, check=False, stderr=-3).returncode:
        pytest.skip("no file system can be mounted here")
    yield place
    subprocess.run(["umount", str(place)], check=True)


def test_disk_that_runs_full_in_the_middle(tmp_path, small_disk, capsys):
    """What was written before stands and has its rows; nothing half-written is left."""
    scans, store = tmp_path / "scans", small_disk / "store"
    made.save(scans / "many.tiff", *[made.READ] * 40)
    assert run(scans, store) == 1
    said = capsys.readouterr().err.splitlines()[-1]  # of the file or of the catalogue
    assert "No space left on device" in said or "disk is full" in said
    assert not list(store.rglob("*.part"))
    for _, page, status, _ in rows(store):
        (kept,) = store.glob(f"pages/*/*.p{page}.json")
        assert (status, kept.stat().st_size > 0) == ("good", True)


def test_store_that_may_only_be_read(tmp_path, small_disk, capsys):
    scans, store = tmp_path / "scans", small_disk / "store"
    made.save(scans / "1.png", made.READ)
    subprocess.run(["mount", "-o", "remount,ro", str(small_disk)], check=True)
    assert run(scans, store) == 1
    assert "cannot be written (Read-only file system)" in capsys.readouterr().err


def test_clock_going_backwards_changes_nothing(tmp_path, monkeypatch):
    scans, store = tmp_path / "scans", tmp_path / "store"
    made.save(scans / "one.png", made.READ)
    os.utime(scans / "one.png", ns=(0, 4_000_000_000_000_000_000))
    run(scans, store)
    os.utime(scans / "one.png", ns=(0, 0))
    assert run(scans, store) == 0
    assert len(rows(store)) == 1


def test_damaged_catalogue_is_one_line(tmp_path, capsys):
    scans, store = tmp_path / "scans", tmp_path / "store"
    made.save(scans / "one.png", made.READ)
    store.mkdir()
    (store / "catalogue.sqlite").write_bytes(b"no database" * 99)
    assert run(scans, store) == 1
    assert "cannot be used" in capsys.readouterr().err
    assert (store / "catalogue.sqlite").read_bytes() == b"no database" * 99


def test_catalogue_of_a_later_version_is_left_alone(tmp_path, capsys):
    scans, store = tmp_path / "scans", tmp_path / "store"
    made.save(scans / "one.png", made.READ)
    run(scans, store)
    with closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
        db.execute("PRAGMA user_version = 99")
    assert run(scans, store) == 1
    assert "later version" in capsys.readouterr().err

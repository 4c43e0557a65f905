"""Whole runs over an archive, with a reader that needs no time."""

import os
import sqlite3
import subprocess
import sys
import time
import zipfile
from collections import Counter
from contextlib import closing
from pathlib import Path

import numpy as np
import pytest

from digitize.archive.alone import Limits
from digitize.archive.contact import sheet_name
from digitize.archive.engines import this_machine
from digitize.archive.run import run_archive
from digitize.options import Options
from tests.digitize.archive import stand_in as made

ROOT = Path(__file__).parents[3]


@pytest.fixture
def scans(tmp_path):
    return tmp_path / "scans"


@pytest.fixture
def store(tmp_path):
    return tmp_path / "store"


def run(scans, store, *, seconds=20.0, options=None, again_failed=False):
    return run_archive(
        [scans],
        store,
        options or Options(),
        Limits(seconds, 4096),
        this_machine(2),
        read=made.read,
        again_failed=again_failed,
    )


def rows(store, columns="page, status, reason"):
    with sqlite3.connect(store / "catalogue.sqlite") as db:
        found = db.execute(f"SELECT {columns} FROM page ORDER BY 1").fetchall()
    db.close()
    return found


def test_every_page_ends_as_good_look_or_failed(scans, store, capsys):
    made.save(scans / "a" / "one.png", made.READ)
    made.save(scans / "b.tiff", made.READ, made.NO_GRID, made.DOUBTFUL, number=1)
    (scans / "notes.txt").write_text("no scan")
    assert run(scans, store) == 1
    assert sorted(rows(store)) == [
        (1, "good", ""),
        (1, "good", ""),
        (2, "failed", "no grid was found"),
        (3, "look", "paper speed not found"),
    ]
    said = capsys.readouterr()
    assert "2 files to read, 0 done before" in said.err
    assert "b.tiff, page 2: no grid was found" in said.err
    assert "1 needs a look, 1 failed, 2 good" in said.out
    for sha256, stem in rows(store, "sha256, stem"):
        if stem is not None:
            assert (store / f"{stem}.csv").read_text().startswith(sha256)


def test_started_again_there_is_nothing_to_do(scans, store, capsys):
    made.save(scans / "one.png", made.READ)
    made.save(scans / "none.png", made.NO_GRID)
    run(scans, store)
    before = _stamps(store)
    capsys.readouterr()
    assert run(scans, store) == 0
    assert "0 files to read, 2 done before" in capsys.readouterr().err
    assert _stamps(store) == before


def _stamps(store):
    return {path: path.stat().st_mtime_ns for path in (store / "pages").rglob("*.*")}


def test_same_content_under_another_name_is_read_once(scans, store, capsys):
    made.save(scans / "one.png", made.READ)
    (scans / "two.png").write_bytes((scans / "one.png").read_bytes())
    run(scans, store)
    assert "1 files to read, 0 done before, 1 of the same content" in capsys.readouterr().err
    assert len(rows(store)) == 1
    (scans / "one.png").rename(scans / "three.png")
    run(scans, store)
    assert "0 files to read, 1 done before" in capsys.readouterr().err


def test_other_options_are_new_work_and_the_old_results_stay(scans, store, capsys):
    made.save(scans / "one.png", made.READ)
    run(scans, store)
    run(scans, store, options=Options(speed_mm_s=50.0))
    assert "1 were read with other options and are read anew" in capsys.readouterr().err
    stems = [stem for (stem,) in rows(store, "stem")]
    assert len(set(stems)) == 2
    assert all((store / f"{stem}.json").is_file() for stem in stems)


@pytest.mark.parametrize(
    ("level", "said"),
    [
        (made.CRASH, "the program failed on it, or it took too much memory"),
        (made.EAT, "the program failed on it, or it took too much memory"),
        (made.HANG, "it took more than 2 s"),
    ],
)
def test_a_page_that_ends_its_process_costs_itself_alone(scans, store, level, said):
    made.save(scans / "b.tiff", made.READ, level, made.READ)
    made.save(scans / "c.png", made.READ, number=7)
    assert run(scans, store, seconds=2.0) == 1
    assert Counter(rows(store)) == Counter(
        {(1, "good", ""): 2, (2, "failed", said): 1, (3, "good", ""): 1}
    )


def test_failed_pages_alone_are_taken_up_again(scans, store, capsys):
    made.save(scans / "b.tiff", made.READ, made.NO_GRID)
    made.save(scans / "c.png", made.READ, number=7)
    run(scans, store)
    before = _stamps(store)
    capsys.readouterr()
    assert run(scans, store, again_failed=True) == 1
    assert "1 files to read, 1 done before" in capsys.readouterr().err
    assert _stamps(store) == before
    assert len(rows(store)) == 3


def test_what_cannot_be_opened_is_one_failed_row(scans, store):
    scans.mkdir()
    (scans / "words.png").write_bytes(b"no picture" * 99)
    (scans / "empty.pdf").write_bytes(b"")
    assert run(scans, store) == 2
    assert [status for _, status, _ in rows(store)] == ["failed", "failed"]
    assert not any("words" in reason for _, _, reason in rows(store))


# ---- zip files -------------------------------------------------------------------------------


def test_members_of_a_zip_file_are_read_and_their_names_lead_nowhere(scans, store, tmp_path):
    inside = made.save(tmp_path / "x.png", made.READ).read_bytes()
    scans.mkdir()
    with zipfile.ZipFile(scans / "charts.zip", "w") as archive:
        archive.writestr("../../evil.png", inside)
        archive.writestr(
            "/etc/evil\n.png", made.save(tmp_path / "y.png", made.DOUBTFUL).read_bytes()
        )
        archive.writestr("notes.txt", "no scan")
    before = {path for path in tmp_path.rglob("*") if store not in path.parents}
    assert run(scans, store) == 0
    assert sorted(status for _, status, _ in rows(store)) == ["good", "look"]
    assert {p for p in tmp_path.rglob("*") if store not in p.parents} - before == {store}
    assert not list((store / "tmp").iterdir())


def test_zip_bomb_is_given_up(scans, store, monkeypatch, capsys):
    monkeypatch.setattr("digitize.archive.sources.LARGEST_MEMBER_BYTES", 2**21)
    scans.mkdir()
    with zipfile.ZipFile(scans / "bomb.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("bomb.png", bytes(2**24))
    assert run(scans, store) == 1
    assert "bomb.png: it unpacks to more than 2 MB" in capsys.readouterr().err


@pytest.mark.parametrize("share", np.arange(0.1, 1.0, 0.1).round(1))
def test_cut_zip_files_are_refused(scans, store, tmp_path, share, capsys):
    scans.mkdir()
    whole = tmp_path / "whole.zip"
    with zipfile.ZipFile(whole, "w") as archive:
        archive.writestr("a.png", made.save(tmp_path / "x.png", made.READ).read_bytes())
    content = whole.read_bytes()
    (scans / "cut.zip").write_bytes(content[: int(len(content) * share)])
    assert run(scans, store) == 1
    assert "cut.zip: the zip file is damaged" in capsys.readouterr().err


def test_what_cannot_be_opened_at_all_is_noted_until_it_can_be(scans, store, tmp_path):
    scans.mkdir()
    (scans / "box.zip").write_bytes(b"no zip file")
    assert run(scans, store) == 1
    assert refused(store) == ["box.zip: the zip file is damaged or locked with a password"]
    with zipfile.ZipFile(scans / "box.zip", "w") as archive:
        archive.writestr("a.png", made.save(tmp_path / "x.png", made.READ).read_bytes())
    assert run(scans, store) == 0
    assert refused(store) == []


def refused(store):
    with closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
        return [reason for (reason,) in db.execute("SELECT reason FROM refused")]


# ---- the store -------------------------------------------------------------------------------


def test_names_of_sources_are_in_no_name_of_the_store_and_not_on_the_sheet(scans, store):
    made.save(scans / "Doe_Jane_1950.png", made.READ)
    run(scans, store)
    assert not any("Doe" in str(path.relative_to(store)) for path in store.rglob("*"))
    assert "Doe" not in (store / sheet_name(1)).read_text()


def test_one_writer_at_a_time(scans, store, capsys):
    from digitize.archive.store import locked

    made.save(scans / "one.png", made.READ)
    with locked(store):
        assert run(scans, store) == 1
    assert "another run writes to the store" in capsys.readouterr().err


def test_store_that_cannot_be_written(scans, tmp_path, capsys):
    made.save(scans / "one.png", made.READ)
    (tmp_path / "file").write_bytes(b"")
    assert run(scans, tmp_path / "file" / "store") == 1
    assert "cannot be written" in capsys.readouterr().err


def test_names_that_are_no_text(scans, store):
    scans.mkdir()
    content = made.save(scans / "one.png", made.READ).read_bytes()
    (scans / "one.png").unlink()
    for name in (b"caf\xe9.png", b"two\nlines.png"):
        (scans / os.fsdecode(name)).write_bytes(content)
        content = made.save(scans.parent / "x.png", made.DOUBTFUL).read_bytes()
    assert run(scans, store) == 0
    assert len(rows(store)) == 2


# ---- killed at any moment --------------------------------------------------------------------

PROGRAM = """
import sys
from pathlib import Path
from digitize.archive.engines import this_machine
from digitize.archive.run import run_archive
from digitize.archive.alone import Limits
from digitize.options import Options
from tests.digitize.archive.stand_in import read
if __name__ == "__main__":
    folder, store = map(Path, sys.argv[1:])
    limits = Limits(20.0, 4096)
    sys.exit(run_archive([folder], store, Options(), limits, this_machine(2), read=read))
"""


def test_killed_again_and_again_no_page_is_lost_or_doubled(scans, store, tmp_path):
    """Kills at seeded moments, more of them where `MILLIVELLUM_KILLS` asks for it.

    After each, files stand where rows say; at the end every page has one row.
    """
    for number in range(12):
        made.save(scans / f"{number}.tiff", *[made.SLOW] * 10, number=number)
    program = tmp_path / "program.py"
    program.write_text(PROGRAM)
    words = [sys.executable, str(program), str(scans), str(store)]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    rng = np.random.default_rng(6)
    for _ in range(int(os.environ.get("MILLIVELLUM_KILLS", "2"))):
        with subprocess.Popen(words, env=environment, stderr=-3, stdout=-3) as process:
            _wait_for_rows(store, process)
            time.sleep(rng.uniform(0, 0.15))
            process.kill()
        _check(store)
    assert subprocess.run(words, env=environment, stderr=-3, stdout=-3, check=False).returncode == 0
    _check(store)
    found = rows(store, "sha256, page, status")
    assert len(found) == len(set(found)) == 120
    assert not list(store.rglob("*.part"))


def _wait_for_rows(store, process):
    """Until the run has added a row, or is at its end."""
    count = len(rows(store)) if (store / "catalogue.sqlite").is_file() else 0
    for _ in range(300):
        time.sleep(0.05)
        if process.poll() is not None:
            return
        if (store / "catalogue.sqlite").is_file() and len(_rows_if_any(store)) > count:
            return


def _rows_if_any(store):
    try:
        return rows(store)
    except sqlite3.OperationalError:  # not yet made
        return []


def _check(store):
    for sha256, page, stem in _stems(store):
        for end in (".csv", ".json", ".overlay.png"):
            assert (store / f"{stem}{end}").read_text().startswith(f"{sha256} {page}")


def _stems(store):
    try:
        return rows(store, "sha256, page, stem")
    except sqlite3.OperationalError:
        return []

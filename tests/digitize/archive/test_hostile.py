"""Hostile and broken files through a whole run: each ends in rows, none stops the others.

`MILLIVELLUM_VARIANTS` asks for more seeded variants of each kind than the quick suite makes.
"""

import errno
import io
import os
import sqlite3
import time
import zlib
from contextlib import closing

import numpy as np
import pytest
from PIL import Image

from digitize.archive.engines import this_machine
from digitize.archive.run import run_archive
from digitize.archive.worker import Limits
from digitize.options import Options
from tests.digitize import made_files
from tests.digitize.archive import stand_in as made

KINDS = {
    "png": {},
    "jpeg": {},
    "tiff": {"compression": "tiff_lzw"},
    "bmp": {},
    "gif": {},
    "webp": {},
    "pdf": {},
}
VARIANTS = int(os.environ.get("MILLIVELLUM_VARIANTS", "4"))


def run(scans, store, seconds=20.0):
    options, limits = Options(max_megapixels=20), Limits(seconds, 3072)
    return run_archive([scans], store, options, limits, this_machine(2), read=made.read)


def rows(store):
    with closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
        return db.execute("SELECT sha256, page, status, reason FROM page").fetchall()


def whole(kind):
    buffer = io.BytesIO()
    image = Image.fromarray(np.full((120, 200, 3), made.READ, np.uint8))
    image.putpixel((100, 60), (10, 20, 30))
    image.save(buffer, kind, **KINDS[kind])
    return buffer.getvalue()


def outside(tmp_path, store):
    return {
        path: path.read_bytes()
        for path in tmp_path.rglob("*")
        if path.is_file() and store not in path.parents
    }


@pytest.mark.parametrize("kind", KINDS)
def test_flipped_bits_end_in_rows(tmp_path, kind, capfd):
    rng = np.random.default_rng([7, *kind.encode()])
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    for variant in range(VARIANTS):
        content = np.frombuffer(whole(kind), np.uint8).copy()
        where = rng.integers(0, min(len(content), 400 if variant % 2 else len(content)), 4)
        content[where] ^= rng.integers(1, 256, 4).astype(np.uint8)
        (scans / f"{variant}.{kind}").write_bytes(content.tobytes())
    before = outside(tmp_path, store)
    run(scans, store)
    found = rows(store)
    contents = {path.read_bytes() for path in scans.iterdir()}
    assert len({sha256 for sha256, *_ in found}) == len(contents)
    assert all(reason for *_, status, reason in found if status == "failed")
    assert outside(tmp_path, store) == before
    assert "Traceback" not in capfd.readouterr().err


@pytest.mark.parametrize("kind", KINDS)
def test_cut_at_every_tenth_ends_in_rows(tmp_path, kind):
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    content = whole(kind)
    for tenth in range(1, 10):
        (scans / f"{tenth}.{kind}").write_bytes(content[: len(content) * tenth // 10])
    run(scans, store)
    assert len({sha256 for sha256, *_ in rows(store)}) == 9


def bomb_tiff():
    """A TIFF that promises 60000 x 60000 pixels in one strip (TIFF 6.0, section 2)."""
    buffer = io.BytesIO()
    Image.new("L", (8, 8)).save(buffer, "TIFF")
    content = buffer.getvalue()
    for tag in (b"\x00\x01", b"\x01\x01"):  # ImageWidth, ImageLength, little-endian
        at = content.index(tag + b"\x04\x00\x01\x00\x00\x00") + 8
        content = content[:at] + (60_000).to_bytes(4, "little") + content[at + 4 :]
    return content


def bomb_pdf():
    """A PDF whose image states 30000 x 30000 pixels."""
    return made_files.image_pdf(
        np.zeros((4, 4, 3), np.uint8),
        page_pt=(800, 600),
        place=b"800 0 0 600 0 0",
        declared_px=(30_000, 30_000),
    )


def inflating_pdf():
    """A PDF whose content unpacks to 400 MB of nothing."""
    packed = zlib.compressobj(9)
    data = b"".join([*(packed.compress(b" " * 2**20) for _ in range(400)), packed.flush()])
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 99 99] /Contents 4 0 R>>",
        made_files.stream(b"/Filter/FlateDecode", data),
    )


def circular_pdf():
    """A PDF whose page tree is its own child."""
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>", b"<</Type/Pages /Kids[2 0 R 2 0 R] /Count 2>>"
    )


def sliver():
    """A picture of 1 x 30000 pixels."""
    buffer = io.BytesIO()
    Image.new("L", (30_000, 1), made.NO_GRID).save(buffer, "PNG")
    return buffer.getvalue()


def test_bombs_and_oddities_each_end_in_a_clear_row(tmp_path, capfd):
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    hostile = {
        "bomb.png": made_files.bomb_png(),
        "bomb.tiff": bomb_tiff(),
        "bomb.pdf": bomb_pdf(),
        "circular.pdf": circular_pdf(),
        "locked.pdf": made_files.locked_pdf(),
        "sliver.png": sliver(),
        "empty.jpg": b"",
        "noise.heic": np.random.default_rng(1).bytes(5000),
        "cut.dcm": bytes(128) + b"DICM\x08\0",
    }
    for name, content in hostile.items():
        (scans / name).write_bytes(content)
    made.save(scans / "sound.png", made.READ)
    (scans / "lies.jpg").write_bytes(made.save(tmp_path / "x.png", made.DOUBTFUL).read_bytes())
    run(scans, store)
    found = rows(store)
    assert len({sha256 for sha256, *_ in found}) == len(hostile) + 2
    assert {status for _, _, status, _ in found} == {"good", "look", "failed"}
    assert sum(status == "failed" for _, _, status, _ in found) >= len(hostile)
    assert all("\n" not in reason for *_, reason in found)
    assert "Traceback" not in capfd.readouterr().err


def test_page_that_unpacks_for_ever_is_given_up(tmp_path):
    scans, store = tmp_path / "scans", tmp_path / "store"
    scans.mkdir()
    (scans / "inflating.pdf").write_bytes(inflating_pdf())
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

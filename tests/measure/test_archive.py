"""Readings of every page of a store."""

import json
import sqlite3
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import dask
import numpy as np
import pytest
from distributed import LocalCluster

from digitize.archive.alone import Limits
from digitize.archive.catalogue import Chart, PageRow, opened
from digitize.archive.engines import cluster, this_machine
from digitize.archive.reading import row_of
from digitize.archive.store import CATALOGUE, put, stem_of
from digitize.errors import UnreadableFile
from digitize.tracing import FS_HZ, LEADS
from digitize.tracing_files import read_tracing, tracing_files
from measure.archive import measure_archive, measure_page
from measure.find import Question, find
from measure.reading import Person, read
from measure.sources import tracing_from_samples
from tests.digitize.made_tracing import panel, tracing
from tests.drawn.heart import HeartSpec, record_model

OPTIONS = "0" * 16
LIMITS = Limits(60.0, 4096)


def whole():
    """Twelve leads over ten seconds, of the model heart."""
    return tracing_from_samples(record_model(HeartSpec()).mv.T, LEADS, FS_HZ)


def flat():
    """A page without a beat."""
    return tracing((panel("V1", np.zeros(5000)),))


@pytest.fixture
def store(tmp_path):
    """A store of two pages that were read and one that failed."""
    with opened(tmp_path / CATALOGUE) as catalogue:
        for number, made in enumerate((whole(), flat()), start=1):
            sha256 = str(number) * 64
            stem = stem_of(sha256, OPTIONS, 1)
            files = tracing_files(made, "x")
            put(tmp_path, stem, {name.removeprefix("x"): data for name, data in files.items()})
            catalogue.add_page(sha256, OPTIONS, replace(row_of(made), stem=stem))
        catalogue.add_page("f" * 64, OPTIONS, PageRow(1, "failed", "no grid was found"))
    return tmp_path


def measured(store, again=False, limits=LIMITS):
    return measure_archive(store, limits, this_machine(1), again=again)


def table(store, sql):
    with closing(sqlite3.connect(store / CATALOGUE)) as db:
        return db.execute(sql).fetchall()


def row_of_reading(store, sha256):
    with closing(sqlite3.connect(store / CATALOGUE)) as db:
        db.row_factory = sqlite3.Row
        return dict(db.execute("SELECT * FROM reading WHERE sha256 = ?", (sha256,)).fetchone())


# ---- measuring -------------------------------------------------------------------------------


def test_rows_are_those_of_the_reading(store, capsys):
    assert measured(store) == 1
    assert "1 pages measured, 1 could not be" in capsys.readouterr().out
    stem = stem_of("1" * 64, OPTIONS, 1)
    wanted = read(read_tracing(store / f"{stem}.json"))
    found = row_of_reading(store, "1" * 64)
    for name, quantity in wanted.intervals.items():
        assert found[name] == (quantity.value if quantity.known else None)
        assert found[f"{name}_se"] == (quantity.se if quantity.known else None)
    assert {f.key: found[f.key] for f in wanted.findings} == {
        f.key: f.result for f in wanted.findings
    }
    document = json.loads((store / f"{stem}.reading.json").read_bytes())
    assert document["intervals"]["qrs_ms"]["value"] == pytest.approx(found["qrs_ms"], abs=0.01)


def test_page_without_a_beat_says_so_and_started_again_there_is_nothing_to_do(store, capsys):
    measured(store)
    assert len(table(store, "SELECT reason FROM reading WHERE reason != ''")) == 1
    capsys.readouterr()
    assert measured(store) == 0
    assert "0 pages to measure" in capsys.readouterr().err
    measured(store, again=True)
    assert "2 pages to measure" in capsys.readouterr().err


def test_page_beyond_its_limit_costs_itself_and_can_be_taken_up_again(store):
    assert measured(store, limits=Limits(60.0, 1)) == 2
    assert "emory" in row_of_reading(store, "1" * 64)["reason"]
    assert not list(store.rglob("*.reading.json"))
    assert measured(store, again=True) == 1
    assert len(list(store.rglob("*.reading.json"))) == 1


def test_what_is_said_of_one_page_comes_before_what_is_said_of_its_file(store):
    with opened(store / CATALOGUE) as catalogue:
        charts = {0: Chart(sex="male", age_years=50.0), 1: Chart(sex="female", age_years=71.0)}
        catalogue.set_charts("1" * 64, charts)
    measured(store)
    document = json.loads((store / f"{stem_of('1' * 64, OPTIONS, 1)}.reading.json").read_bytes())
    assert document["person"] == {"sex": "female", "age_years": 71.0}


def test_workers_of_a_cluster_measure_the_same(store):
    measured(store)
    here = table(store, "SELECT * FROM reading")
    with (
        dask.config.set({"distributed.worker.daemon": False}),
        LocalCluster(
            n_workers=2, threads_per_worker=1, dashboard_address=":0", memory_limit=0
        ) as workers,
    ):
        assert measure_archive(store, LIMITS, cluster(workers.scheduler_address), again=True) == 1
    assert table(store, "SELECT * FROM reading") == here


def test_sex_and_age_of_the_manifest_count(store):
    with opened(store / CATALOGUE) as catalogue:
        catalogue.set_charts("1" * 64, {0: Chart("K1", None, "female", 71.0)})
    measured(store)
    document = json.loads((store / f"{stem_of('1' * 64, OPTIONS, 1)}.reading.json").read_bytes())
    assert document["person"] == {"sex": "female", "age_years": 71.0}


def test_every_table_of_the_catalogue_is_described(store):
    measured(store)
    described = (Path(__file__).parents[2] / "DEVELOPERS.md").read_text("utf-8")
    section = described.split("**A store**")[1].split("\n## ")[0]
    for (name,) in table(store, "SELECT name FROM sqlite_master WHERE type = 'table'"):
        assert f"`{name}`" in section, name


def test_damaged_tracing_is_a_reason(tmp_path):
    (tmp_path / "x.json").write_text("{")
    assert "damaged" in measure_page(tmp_path / "x.json", Person()).reason


def test_no_store(tmp_path, capsys):
    assert measured(tmp_path / "none") == 1
    assert "is no store" in capsys.readouterr().err


VERSION_1 = """
    CREATE TABLE measure_version (version INTEGER NOT NULL);
    INSERT INTO measure_version VALUES (1);
    CREATE TABLE reading (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, page INTEGER NOT NULL,
        reason TEXT NOT NULL, version TEXT NOT NULL, PRIMARY KEY (sha256, options, page)
    ) WITHOUT ROWID;
    CREATE TABLE measured (
        sha256 TEXT NOT NULL, options TEXT NOT NULL, page INTEGER NOT NULL,
        name TEXT NOT NULL, number REAL, se REAL, word TEXT,
        PRIMARY KEY (sha256, options, page, name)
    ) WITHOUT ROWID;
    CREATE INDEX measured_name ON measured (name, number, word);
    INSERT INTO reading VALUES ('a', 'o', 1, '', '0.1'), ('b', 'o', 1, 'no beat', '0.1');
    INSERT INTO measured VALUES
        ('a', 'o', 1, 'qrs_ms', 164, 3, NULL), ('a', 'o', 1, 'lbbb_strict', NULL, NULL, 'met');
"""


def test_readings_of_an_earlier_version_are_brought_up(tmp_path):
    with opened(tmp_path / CATALOGUE) as catalogue:
        catalogue.db.executescript(VERSION_1)
    old = pytest.raises(UnreadableFile, match="run measure archive once")
    with old, find(tmp_path, Question()):
        pass
    assert measured(tmp_path) == 0
    row = row_of_reading(tmp_path, "a")
    assert (row["qrs_ms"], row["qrs_ms_se"], row["lbbb_strict"]) == (164, 3, "met")
    assert (row["pr_ms"], row["version"]) == (None, "0.1")
    assert row_of_reading(tmp_path, "b")["reason"] == "no beat"
    assert not table(tmp_path, "SELECT 1 FROM sqlite_master WHERE name = 'measured'")


def test_readings_of_a_later_version_are_left_alone(tmp_path, capsys):
    with opened(tmp_path / CATALOGUE) as catalogue:
        catalogue.db.executescript(VERSION_1)
        catalogue.db.execute("UPDATE measure_version SET version = 9")
    assert measured(tmp_path) == 1
    assert "later version" in capsys.readouterr().err
    assert len(table(tmp_path, "SELECT * FROM measured")) == 2

"""Readings of a store, and questions to it."""

import csv
import io
import json
import sqlite3
from contextlib import closing
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from typer.testing import CliRunner

from digitize.archive.catalogue import PageRow, opened
from digitize.archive.reading import row_of
from digitize.archive.store import CATALOGUE, put, stem_of
from digitize.tracing import FS_HZ, LEADS
from digitize.tracing_files import read_tracing, tracing_files
from measure.archive import measure_archive, measure_page, open_tables
from measure.cli import app
from measure.find import FINDINGS, INTERVALS, Question, QuestionError, find, understand
from measure.reading import read
from measure.sources import tracing_from_samples
from tests.digitize.made_tracing import panel, tracing
from tests.drawn.heart import HeartSpec, record_model

OPTIONS = "0" * 16


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


def table(store, sql):
    with closing(sqlite3.connect(store / CATALOGUE)) as db:
        return db.execute(sql).fetchall()


def ask(store, where, **more):
    return find(store, understand(where), **more)[1]


# ---- measuring -------------------------------------------------------------------------------


def test_rows_are_those_of_the_reading(store, capsys):
    assert measure_archive(store, processes=1) == 1
    assert "1 pages measured, 1 could not be" in capsys.readouterr().out
    stem = stem_of("1" * 64, OPTIONS, 1)
    wanted = read(read_tracing(store / f"{stem}.json"))
    found = dict(table(store, "SELECT name, number FROM measured WHERE number IS NOT NULL"))
    known = {name: q.value for name, q in wanted.intervals.items() if q.known}
    assert found == known
    words = dict(table(store, "SELECT name, word FROM measured WHERE word IS NOT NULL"))
    assert words == {f.key: f.result for f in wanted.findings}
    document = json.loads((store / f"{stem}.reading.json").read_bytes())
    assert document["intervals"]["qrs_ms"]["value"] == pytest.approx(found["qrs_ms"], abs=0.01)


def test_page_without_a_beat_says_so_and_started_again_there_is_nothing_to_do(store, capsys):
    measure_archive(store, processes=1)
    assert len(table(store, "SELECT reason FROM reading WHERE reason != ''")) == 1
    capsys.readouterr()
    assert measure_archive(store, processes=1) == 0
    assert "0 pages to measure" in capsys.readouterr().err
    measure_archive(store, processes=1, again=True)
    assert "2 pages to measure" in capsys.readouterr().err


def test_damaged_tracing_is_a_reason(tmp_path):
    (tmp_path / "x.json").write_text("{")
    assert "damaged" in measure_page(tmp_path / "x.json").reason


def test_no_store(tmp_path, capsys):
    assert measure_archive(tmp_path / "none", processes=1) == 1
    assert "is no store" in capsys.readouterr().err


# ---- asking ----------------------------------------------------------------------------------

VALUES = {
    "a": ({"qrs_ms": (164.0, 3.0)}, {"lbbb_strict": "met"}),
    "b": ({"qrs_ms": (90.0, 2.0), "pr_ms": (210.0, 4.0)}, {"lbbb_strict": "not met"}),
    "c": ({}, {"lbbb_strict": "undecided"}),
}


@pytest.fixture
def asked(tmp_path):
    """A store of three pages with values of our choice; the third has no QRS duration."""
    with opened(tmp_path / CATALOGUE) as catalogue:
        open_tables(catalogue.db)
        for sha256, (numbers, words) in VALUES.items():
            catalogue.add_page(sha256, OPTIONS, PageRow(1, "good", leads=12, layout="3x4+1"))
            rows = [(sha256, OPTIONS, 1, n, value, se, None) for n, (value, se) in numbers.items()]
            rows += [(sha256, OPTIONS, 1, n, None, None, word) for n, word in words.items()]
            catalogue.db.executemany("INSERT INTO measured VALUES (?,?,?,?,?,?,?)", rows)
    return tmp_path


@pytest.mark.parametrize(
    ("where", "pages"),
    [
        ("qrs_ms >= 150 and lbbb_strict = 'met'", "a"),
        ("qrs_ms < 150", "b"),
        ("not qrs_ms >= 150", "b"),  # what was not measured meets neither
        ("qrs_ms is missing", "c"),
        ("qrs_ms is known AND NOT lbbb_strict = 'met'", "b"),
        ("lbbb_strict = 'undecided' or pr_ms > 200 and qrs_ms < 100", "bc"),
        ("(lbbb_strict = 'undecided' or pr_ms > 200) and qrs_ms < 100", "b"),
        ("lbbb_strict != 'met'", "bc"),
        ("qrs_ms_se > 2.5", "a"),
        ("layout = '3x4+1' and leads = 12", "abc"),
        ("layout = 'it''s'", ""),
    ],
)
def test_questions(asked, where, pages):
    assert "".join(row[0] for row in ask(asked, where)) == pages


@pytest.mark.parametrize(
    ("where", "said"),
    [
        ("qrs_m > 1", "'qrs_m' is not known here: qrs_ms"),
        ("qrs_ms > 1; DROP TABLE page", "'; DROP TABLE page' is not understood"),
        ("qrs_ms > 'wide'", "qrs_ms is compared with a number"),
        ("lbbb_strict = 1", "a word in quotes"),
        ("lbbb_strict = met", "a word in quotes"),
        ("qrs_ms", "a comparison after qrs_ms is missing"),
        ("qrs_ms >", "a value after qrs_ms > is missing"),
        ("qrs_ms like 1", "not 'like'"),
        ("qrs_ms is big", "'known' or 'missing'"),
        ("(qrs_ms > 1", "not closed"),
        ("qrs_ms > 1 qrs_ms", "not expected"),
        ("1 = 1", "a name is expected"),
        ("status = 'x' -- y", "is not understood"),
        ("(" * 5000 + "qrs_ms > 1", "too many brackets"),
        ("not " * 5000 + "qrs_ms > 1", "too many brackets"),
        ("sqlite_master = 'x'", "is not known here"),
        ("", "is missing at the end"),
    ],
)
def test_what_is_no_question(where, said):
    with pytest.raises(QuestionError, match=said.replace("(", r"\(")):
        understand(where)


def test_words_of_a_question_are_never_sql(asked):
    hostile = "x' OR 1=1 --"
    question = understand("lbbb_strict = '" + hostile.replace("'", "''") + "'")
    assert hostile not in question.sql
    assert find(asked, question)[1] == []
    with pytest.raises(QuestionError, match="not known"):
        find(asked, Question(), sort="1; DROP TABLE page")
    with pytest.raises(QuestionError, match="not known"):
        find(asked, Question(), columns=["p.sha256"])


def test_every_name_of_a_reading_can_be_asked(asked):
    reading = read(whole())
    assert set(INTERVALS) == set(reading.intervals)
    assert {finding.key for finding in reading.findings} <= set(FINDINGS)
    for name in INTERVALS:
        ask(asked, f"{name} > 0")


def test_sorted_with_the_missing_last(asked):
    for order, pages in (("qrs_ms", "bac"), ("-qrs_ms", "abc")):
        assert "".join(row[0] for row in find(asked, Question(), sort=order)[1]) == pages


def test_asking_writes_nothing(asked):
    before = {path: path.read_bytes() for path in asked.iterdir()}
    ask(asked, "qrs_ms > 1")
    assert {path: path.read_bytes() for path in asked.iterdir()} == before


# ---- the command -----------------------------------------------------------------------------


def run(*words):
    return CliRunner().invoke(app, ["find", *map(str, words)])


def test_csv_is_read_by_pandas(asked):
    result = run(asked, "--where", "lbbb_strict != 'met'", "--columns", "qrs_ms,pr_ms")
    assert result.exit_code == 0
    frame = pd.read_csv(io.StringIO(result.stdout), keep_default_na=True)
    assert frame["qrs_ms"].tolist()[0] == 90.0
    assert frame["qrs_ms"].isna().tolist() == [False, True]
    assert len(list(csv.reader(io.StringIO(result.stdout)))) == 3


def test_count_and_wrong_usage(asked, tmp_path):
    assert run(asked, "--where", "qrs_ms > 0", "--to", "count").stdout == "2\n"
    assert run(asked, "--where", "qrs > 0").exit_code == 2
    assert run(asked, "--to", "xml").exit_code == 2
    nothing = run(tmp_path / "none")
    assert nothing.exit_code == 1
    assert "there is no catalogue" in nothing.stderr


def test_store_that_was_not_measured(store):
    result = run(store)
    assert result.exit_code == 1
    assert "run measure archive first" in result.stderr

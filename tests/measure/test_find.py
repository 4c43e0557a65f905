"""Questions to a store, and the answers as tables, numbers and histograms."""

import csv
import io

import pandas as pd
import pytest
from typer.testing import CliRunner

from digitize.archive.catalogue import Chart, PageRow, opened
from digitize.archive.store import CATALOGUE
from measure.catalogue import FINDINGS, INTERVALS, Measured, keep, open_tables
from measure.cli import app
from measure.find import NAMES, Question, QuestionError, find, understand
from measure.reading import read
from tests.measure.test_archive import OPTIONS, whole


def listed(store, question, **more):
    """All rows at once."""
    with find(store, question, **more) as (_, rows):
        return list(rows)


def ask(store, where, **more):
    return listed(store, understand(where), **more)


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
            keep(catalogue.db, (sha256, OPTIONS, 1), Measured("", b"", numbers, words))
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
    assert listed(asked, question) == []
    with pytest.raises(QuestionError, match="not known"):
        listed(asked, Question(), sort="1; DROP TABLE page")
    with pytest.raises(QuestionError, match="not known"):
        listed(asked, Question(), columns=["p.sha256"])


def test_every_name_of_a_reading_can_be_asked(asked):
    reading = read(whole())
    assert set(INTERVALS) == set(reading.intervals)
    assert {finding.key for finding in reading.findings} <= set(FINDINGS)
    for name in INTERVALS:
        ask(asked, f"{name} > 0")


def test_sorted_with_the_missing_last(asked):
    for order, pages in (("qrs_ms", "bac"), ("-qrs_ms", "abc")):
        assert "".join(row[0] for row in listed(asked, Question(), sort=order)) == pages


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


def test_store_that_was_not_measured(tmp_path):
    with opened(tmp_path / CATALOGUE) as catalogue:
        catalogue.add_page("f" * 64, OPTIONS, PageRow(1, "failed", "no grid was found"))
    result = run(tmp_path)
    assert result.exit_code == 1
    assert "run measure archive first" in result.stderr


def test_whole_catalogue_as_parquet_is_read_by_pandas(asked, tmp_path):
    """Types by column; what could not be measured is missing, not zero and not blank."""
    file = tmp_path / "all.parquet"
    assert run(asked, "--columns", "all", "--to", "parquet", "-o", file).exit_code == 0
    frame = pd.read_parquet(file)
    assert set(frame.columns) == set(NAMES)
    assert frame["qrs_ms"].tolist()[:2] == [164.0, 90.0]
    assert frame["qrs_ms"].isna().tolist() == [False, False, True]
    assert frame["leads"].tolist() == [12, 12, 12]
    assert frame["lbbb_strict"].tolist() == ["met", "not met", "undecided"]


def test_same_table_as_csv_and_parquet(asked, tmp_path):
    for to in ("csv", "parquet"):
        run(asked, "--columns", "qrs_ms,lbbb_strict", "--to", to, "-o", tmp_path / f"t.{to}")
    left, right = pd.read_csv(tmp_path / "t.csv"), pd.read_parquet(tmp_path / "t.parquet")
    pd.testing.assert_frame_equal(left[right.columns], right, check_dtype=False)


def test_what_a_manifest_said_can_be_asked(asked):
    with opened(asked / CATALOGUE) as catalogue:
        catalogue.set_charts("a", {0: Chart("K1", "2024-03-01", "female", 71.0)})
        catalogue.set_charts("b", {1: Chart("K2"), 2: Chart("K3")})
    assert ask(asked, "patient = 'K1' and date < '2025' and age_years > 70")[0][0] == "a"
    assert ask(asked, "patient = 'K2'")[0][0] == "b"
    assert ask(asked, "patient = 'K3'") == []
    assert ask(asked, "patient is missing")[0][0] == "c"


def test_files_are_not_written_over_and_parquet_is_no_text(asked, tmp_path):
    file = tmp_path / "t.csv"
    file.write_text("mine")
    refused = run(asked, "-o", file)
    assert (refused.exit_code, file.read_text()) == (1, "mine")
    assert "--replace" in refused.stderr
    assert run(asked, "-o", file, "--replace").exit_code == 0
    assert file.read_text().startswith("sha256,page")
    assert run(asked, "--to", "parquet").exit_code == 2
    assert run(asked, "-o", tmp_path / "t.csv" / "x.csv").exit_code == 1
    assert not list(tmp_path.glob(".*.part"))


def test_histogram_in_the_terminal_and_as_a_page(asked, tmp_path):
    shown = run(asked, "--plot", "lbbb_strict", "--where", "qrs_ms is known")
    assert [line.split()[:-1] for line in shown.stdout.splitlines()[1:3]] == [
        ["met", "1"],
        ["not", "met", "1"],
    ]
    assert run(asked, "--plot", "qrs_ms").stdout.splitlines()[-1].split()[:2] == ["missing", "1"]
    page = tmp_path / "qrs.html"
    assert run(asked, "--plot", "qrs_ms", "-o", page).exit_code == 0
    assert "3 pages, 1 of them without a value" in page.read_text()
    assert "clinician" in page.read_text()
    assert run(asked, "--plot", "qrs").exit_code == 2

"""Whose a page is: as a table or file names say it, and never otherwise."""

import sqlite3
import zipfile
from contextlib import closing

import pytest
from typer.testing import CliRunner

from digitize.archive.alone import Limits
from digitize.archive.catalogue import Chart, opened
from digitize.archive.charts import Charts, name_pattern, read_manifest
from digitize.archive.engines import this_machine
from digitize.archive.plan import options_key
from digitize.archive.run import Kept, run_archive
from digitize.archive.sources import Source
from digitize.cli import app
from digitize.errors import UnreadableFile
from digitize.options import Options
from tests.digitize.archive import stand_in as made


def manifest(tmp_path, *rows, columns="file,patient,date"):
    path = tmp_path / "charts.csv"
    path.write_text("\n".join([columns, *rows]) + "\n")
    return path


def source(path, member=None):
    return Source(path, "a" * 64, member)


# ---- the table -------------------------------------------------------------------------------


def test_rows_fit_the_end_of_a_path_the_longest_first(tmp_path):
    rows = read_manifest(
        manifest(tmp_path, "1.png,K1,2024-03-01", "ward3/1.png,K2,20240302", "box.zip/in/1.png,K3,")
    )
    charts = Charts(rows)
    assert charts.of(source(tmp_path / "ward1" / "1.png")) == {0: Chart("K1", "2024-03-01")}
    assert charts.of(source(tmp_path / "ward3" / "1.png")) == {0: Chart("K2", "2024-03-02")}
    assert charts.of(source(tmp_path / "box.zip", "in/1.png")) == {0: Chart("K3", None)}
    assert charts.of(source(tmp_path / "11.png")) == {}


def test_pages_of_one_file_may_belong_to_different_people(tmp_path):
    columns = "file,page,patient,date,sex,age"
    rows = ("b.pdf,1,K1,,female,71", "b.pdf,2,K2,,male,")
    charts = Charts(read_manifest(manifest(tmp_path, *rows, columns=columns)))
    assert charts.of(source(tmp_path / "b.pdf")) == {
        1: Chart("K1", None, "female", 71.0),
        2: Chart("K2", None, "male", None),
    }


@pytest.mark.parametrize(
    ("row", "said"),
    [
        ("1.png,K,2024-02-30,1,,", "row 3: its date is not of the form"),
        ("1.png,K,1.3.2024,1,,", "row 3: its date is not of the form"),
        (",K,,1,,", "row 3: it names no file"),
        ("../1.png,K,,1,,", "row 3: it names no file"),
        ("1.png,K,,0,,", "row 3: its page is no number from 1"),
        ("1.png,K,,1,f,", "row 3: its sex"),
        ("1.png,K,,1,,old", "row 3: its age"),
        ("1.png,K,,1,,nan", "row 3: its age"),
        ("1.png,K", "row 3: it has more or fewer cells"),
        ("1.png,K,,1,,,,", "row 3: it has more or fewer cells"),
        (f"1.png,{'K' * 201},,1,,", "row 3: its patient key"),
        ("0.png,K,,1,,", "row 2: another row speaks of the same page"),
        ("0.png,K,,,,", "row 2: another row speaks of the same page"),
    ],
)
def test_wrong_rows_are_named_and_nothing_is_taken(tmp_path, row, said):
    path = manifest(tmp_path, "0.png,K,,1,,", row, columns="file,patient,date,page,sex,age")
    with pytest.raises(UnreadableFile, match=f"charts.csv: .*{said}"):
        read_manifest(path)


@pytest.mark.parametrize(
    "columns", ["file,patient", "file,patient,date,name", "file,file,date", ""]
)
def test_columns_are_those_and_no_others(tmp_path, columns):
    with pytest.raises(UnreadableFile, match="its first row must name the columns"):
        read_manifest(manifest(tmp_path, columns=columns))


def test_a_spreadsheets_mark_and_spaces_do_no_harm(tmp_path):
    path = tmp_path / "charts.csv"
    path.write_bytes("\ufeffFile, Patient ,Date\r\n 1.png , K 1 ,\r\n".encode())
    assert Charts(read_manifest(path)).of(source(tmp_path / "1.png")) == {0: Chart("K 1")}


# ---- names of files --------------------------------------------------------------------------


def test_names_are_split_only_where_they_fit_as_a_whole(tmp_path):
    charts = Charts(pattern=name_pattern(r"(?P<patient>\d+)_(?P<date>\d{8})\.png"))
    assert charts.of(source(tmp_path / "417_20240301.png")) == {0: Chart("417", "2024-03-01")}
    assert charts.of(source(tmp_path / "417_20249901.png")) == {0: Chart("417", None)}
    assert charts.of(source(tmp_path / "417_20240301_b.png")) == {}


@pytest.mark.parametrize("text", ["(", r"\d+", "(?P<name>.*)"])
def test_what_is_no_pattern(text):
    with pytest.raises(ValueError, match=r"regular expression|needs the groups"):
        name_pattern(text)


# ---- a whole run -----------------------------------------------------------------------------


def run(scans, store, rows):
    return run_archive(
        [scans],
        store,
        Options(),
        Limits(20.0, 4096),
        this_machine(2),
        read=made.read,
        kept=Kept(Charts(rows)),
    )


def charts_of(store):
    with closing(sqlite3.connect(store / "catalogue.sqlite")) as db:
        return db.execute("SELECT page, patient, date FROM chart ORDER BY patient").fetchall()


def test_what_is_said_is_in_the_catalogue_and_doubts_are_told(tmp_path, capsys):
    scans, store = tmp_path / "scans", tmp_path / "store"
    made.save(scans / "a" / "1.png", made.READ, number=1)
    made.save(scans / "b" / "1.png", made.READ, number=2)
    with zipfile.ZipFile(scans / "box.zip", "w") as box:
        box.write(made.save(tmp_path / "x.png", made.READ, number=3), "3.png")
    rows = ("a/1.png,K1,2024-03-01", "box.zip/3.png,K3,", "none.png,K4,", "1.png,K5,")
    assert run(scans, store, read_manifest(manifest(tmp_path, *rows))) == 0
    assert charts_of(store) == [(0, "K1", "2024-03-01"), (0, "K3", None), (0, "K5", None)]
    said = capsys.readouterr()
    assert "a patient or a date is known of 3" in said.err
    assert "row 4 of the manifest fits no file" in said.err
    assert not any(key in said.err + said.out for key in ("K1", "K3", "K4", "K5"))
    # said again otherwise, nothing is read again, and what is said last counts
    assert run(scans, store, read_manifest(manifest(tmp_path, "1.png,K6,"))) == 0
    said = capsys.readouterr().err
    assert "0 files to read, 3 done before" in said
    assert "row 2 of the manifest fits 2 files of different content" in said
    assert charts_of(store) == [(0, "K6", None), (0, "K6", None)]


def test_one_content_said_to_be_of_two_people_is_of_nobody(tmp_path, capsys):
    scans, store = tmp_path / "scans", tmp_path / "store"
    made.save(scans / "1.png", made.READ)
    (scans / "2.png").write_bytes((scans / "1.png").read_bytes())
    run(scans, store, read_manifest(manifest(tmp_path, "1.png,K1,", "2.png,K2,")))
    assert "are said to be of different patients" in capsys.readouterr().err
    assert charts_of(store) == []


def test_a_store_of_the_first_version_is_brought_up(tmp_path):
    from digitize.archive import catalogue

    path = tmp_path / "catalogue.sqlite"
    with closing(sqlite3.connect(path)) as db:
        db.executescript(catalogue._STEPS[0] + "PRAGMA user_version = 1;")
        db.execute(
            "INSERT INTO page (sha256, options, page, status, reason) VALUES (1,2,3,'good','')"
        )
        db.commit()
    with pytest.raises(UnreadableFile, match="earlier version"), opened(path, read_only=True):
        pass
    with opened(path) as after:
        assert next(after.rows())["header"] is None
        after.set_charts("1", {0: Chart("K1")})


def test_header_kept_is_other_work():
    plain = options_key(Options())
    assert plain == options_key(Options(max_megapixels=5))
    assert len({plain, options_key(Options(), ()), options_key(Options(), ("(?P<id>.)",))}) == 3


def test_wrong_usage_is_told_before_anything_is_read(tmp_path):
    def call(*words):
        store = tmp_path / "store"
        result = CliRunner().invoke(app, ["archive", str(tmp_path), "--to", str(store), *words])
        assert not store.exists()
        return result

    assert call("--name-pattern", "(").exit_code == 2
    assert call("--header-fields", "x.txt").exit_code == 2
    wrong = call("--manifest", str(manifest(tmp_path, "1.png,K,never")))
    assert wrong.exit_code == 1
    assert "row 2: its date" in wrong.stderr

"""The command `measure`: files in and out, exit codes, one line for each input that fails."""

import json
import subprocess
import sys
from pathlib import Path

import pytest
from typer.testing import CliRunner

from measure.cli import app

pydicom_data = pytest.importorskip("pydicom.data", reason="the DICOM extra is not installed")


@pytest.fixture(scope="module")
def recording():
    """A real 12-lead recording in the DICOM waveform standard that comes with pydicom."""
    return Path(pydicom_data.get_testdata_file("waveform_ecg.dcm"))


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


@pytest.fixture(scope="module")
def done(recording, tmp_path_factory):
    folder = tmp_path_factory.mktemp("read")
    return folder, run("read", recording, "-o", folder, "--sex", "male", "--age", 60)


def test_read_prints_a_table_and_writes_json_and_page(done):
    folder, result = done
    assert result.exit_code == 0, result.output
    assert sorted(path.name for path in folder.iterdir()) == [
        "waveform_ecg.reading.html",
        "waveform_ecg.reading.json",
    ]
    assert "How wide is the QRS" in result.stdout
    assert "no diagnosis" in result.stdout
    assert result.stderr == ""
    content = json.loads((folder / "waveform_ecg.reading.json").read_text())
    assert content["person"] == {"sex": "male", "age_years": 60.0}
    # the recorder's own measurements in the file: RR 982, PR 161, QRS 75, QT 368 ms
    assert content["intervals"]["rr_ms"]["value"] == pytest.approx(982, abs=10)
    assert not any(
        f["result"] == "met" for f in content["findings"] if f["key"].startswith(("lbbb", "rbbb"))
    )


def test_read_does_not_overwrite_unasked(done, recording):
    folder, _ = done
    before = (folder / "waveform_ecg.reading.json").read_bytes()
    again = run("read", recording, "-o", folder)
    assert again.exit_code == 1
    assert again.stderr.startswith("waveform_ecg.dcm")
    assert "--replace" in again.stderr
    assert (folder / "waveform_ecg.reading.json").read_bytes() == before
    replaced = run("read", recording, "-o", folder, "--sex", "male", "--age", 60, "--replace")
    assert replaced.exit_code == 0
    assert (folder / "waveform_ecg.reading.json").read_bytes() == before


def test_bad_inputs_give_one_line_each_and_the_others_go_on(recording, tmp_path):
    empty = tmp_path / "empty.csv"
    empty.touch()
    words = tmp_path / "words.json"
    words.write_text('{"format": "something else"}')
    result = run(
        "read", tmp_path / "absent.png", tmp_path, empty, words, recording, "-o", tmp_path / "out"
    )
    assert result.exit_code == 1
    lines = result.stderr.splitlines()
    assert len(lines) == 4
    assert lines[0] == "absent.png: there is no such file"
    assert lines[1] == f"{tmp_path.name}: it is a folder: give its files"
    assert lines[2].startswith("empty.csv: ")
    assert lines[3] == "words.json: this JSON is no tracing; give NAME.json or NAME.csv"
    assert (tmp_path / "out" / "waveform_ecg.reading.json").is_file()


@pytest.mark.parametrize(
    "arguments",
    [
        ["read", "x.png", "--sex", "unknown"],
        ["read", "x.png", "--age", "-3"],
        ["read", "x.png", "--speed", "0"],
        ["read", "x.png", "--px-per-mm", "a,b"],
        ["read"],
        ["compare", "one.reading.json"],
        ["compare", "a", "b", "--date", "2024-01-01"],
        ["compare", "a", "b", "--date", "2024-01-01", "--date", "2020-01-01"],
        ["compare", "a", "b", "--date", "first", "--date", "second"],
        ["measure-everything"],
    ],
)
def test_wrong_usage_is_exit_code_2(arguments):
    result = run(*arguments)
    assert result.exit_code == 2
    assert "Traceback" not in result.output


def test_compare_reads_saved_and_new_ecgs(done, recording, tmp_path):
    folder, _ = done
    saved = folder / "waveform_ecg.reading.json"
    dates = ["--date", "2020-01-01", "--date", "2024-01-01"]
    result = run("compare", saved, recording, "-o", tmp_path, *dates)
    assert result.exit_code == 0, result.output
    assert "QRS has not surely changed" in result.stdout
    content = json.loads((tmp_path / "waveform_ecg.compare.json").read_text())
    assert [r["date"] for r in content["readings"]] == ["2020-01-01", "2024-01-01"]
    assert {c["verdict"] for c in content["changes"]} <= {"no sure change", "not comparable"}
    assert (tmp_path / "waveform_ecg.compare.html").is_file()
    again = run("compare", saved, recording, "-o", tmp_path)
    assert again.exit_code == 1
    assert "--replace" in again.stderr


def test_compare_with_an_unusable_side_writes_nothing(done, tmp_path):
    folder, _ = done
    other = tmp_path / "other.reading.json"
    other.write_text("{}")
    result = run("compare", folder / "waveform_ecg.reading.json", other, "-o", tmp_path / "out")
    assert result.exit_code == 1
    assert result.stderr.startswith("other.reading.json: ")
    assert not (tmp_path / "out").exists()


def test_version_and_help():
    assert run("--version").stdout.startswith("measure ")
    assert "no diagnosis" in run("--help").stdout


def test_starting_loads_no_image_or_signal_library():
    code = "import sys, measure.cli; print(sorted({m.split('.')[0] for m in sys.modules}))"
    loaded = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    for heavy in ("scipy", "cv2", "skimage", "numba", "pandas"):
        assert f"'{heavy}'" not in loaded.stdout

"""The command `digitize export`: files, refusals in one line, exit codes."""

import numpy as np
import pytest
from typer.testing import CliRunner

from digitize.cli import app
from digitize.tracing_files import tracing_files
from measure.sources import read_digital
from tests.digitize.made_tracing import panel, tracing


@pytest.fixture
def chart(tmp_path):
    for name, content in tracing_files(tracing(), "chart.p2").items():
        (tmp_path / name).write_bytes(content)
    return tmp_path / "chart.p2.json"


def run(*words):
    return CliRunner().invoke(app, ["export", *map(str, words)])


def test_files_go_to_the_folder_asked_for(chart, tmp_path):
    result = run(chart, "--as", "fhir", "-o", tmp_path / "out")
    assert result.exit_code == 0
    assert [p.name for p in (tmp_path / "out").iterdir()] == ["chart.p2.fhir.json"]
    assert "no diagnosis" in result.stdout


@pytest.mark.filterwarnings("ignore:The inplace keyword")  # pandas, of the reader's own code
def test_what_was_written_can_be_measured(chart, tmp_path):
    assert run(chart.with_suffix(".csv"), "--as", "wfdb").exit_code == 0
    read = read_digital(tmp_path / "chart_p2.hea")
    assert np.isnan(read.lead("V1").mv).sum() == 3750


def test_refusal_is_one_line_and_the_others_are_written(chart, tmp_path):
    whole = tracing((panel("V1", np.ones(5000)),))
    for name, content in tracing_files(whole, "whole").items():
        (tmp_path / name).write_bytes(content)
    result = run(chart, tmp_path / "whole", tmp_path / "none.json", "--as", "edf")
    assert result.exit_code == 1
    first, second = result.stderr.splitlines()
    assert first.startswith("chart.p2.json: EDF cannot say that a sample is missing")
    assert second.startswith("none.json: ")
    assert (tmp_path / "whole.edf").stat().st_size > 10_000


def test_earlier_files_are_kept_unless_asked(chart):
    assert run(chart, "--as", "dicom").exit_code == 0
    assert "--replace" in run(chart, "--as", "dicom").stderr
    assert run(chart, "--as", "dicom", "--replace").exit_code == 0


def test_csv_is_not_written_over_itself(chart):
    result = run(chart, "--as", "csv")
    assert result.exit_code == 1
    assert "is there already" in result.stderr


def test_unknown_format_is_wrong_usage(chart):
    result = run(chart, "--as", "pdf")
    assert result.exit_code == 2
    assert "aecg" in result.stderr

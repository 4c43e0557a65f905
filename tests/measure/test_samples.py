"""A sample page from the picture to its findings: left bundle branch block with early beats."""

import json
from pathlib import Path

import pytest

from digitize.options import Options
from digitize.read import read_stages
from measure.reading import Person, Reading, read

_SAMPLE = Path(__file__).parents[2] / "sample_scans" / "lbbb_early_atrial_3x4_1.jpg"

# Largest differences of calibration ECGs, IEC 60601-2-25:2011 (from memory), in ms.
_TOLERANCE_MS = {"p_ms": 10, "pr_ms": 10, "qrs_ms": 6, "qt_ms": 12}


@pytest.fixture(scope="module")
def reading() -> Reading:
    (stages,) = read_stages(_SAMPLE, Options())
    return read(stages.tracing, Person("male"))


@pytest.fixture(scope="module")
def expected() -> dict:
    return json.loads(_SAMPLE.with_suffix(".expected.json").read_text("utf-8"))


@pytest.mark.parametrize(("key", "tolerance_ms"), _TOLERANCE_MS.items())
def test_intervals_are_those_of_the_model(
    reading: Reading, expected: dict, key: str, tolerance_ms: float
) -> None:
    assert reading.intervals[key].value == pytest.approx(expected[key], abs=tolerance_ms)


def test_axis_and_rate_are_those_of_the_model(reading: Reading, expected: dict) -> None:
    for key, tolerance in (("qrs_axis_deg", 5.0), ("rate_bpm", 1.5)):
        assert reading.intervals[key].value == pytest.approx(expected[key], abs=tolerance)


def test_early_beats_are_named_and_set_aside(reading: Reading, expected: dict) -> None:
    assert reading.beats.kind.count("early") == expected["early_beats"]
    assert not reading.beats.dominant[[kind == "early" for kind in reading.beats.kind]].any()
    assert reading.rhythm.statement == "sinus P waves"


def test_the_block_is_found_by_its_definitions_with_evidence(reading: Reading) -> None:
    found = {finding.key: finding for finding in reading.findings}
    for key in ("lbbb_european_2013", "lbbb_strict"):
        assert found[key].result == "met"
        assert all(c.evidence for c in found[key].clauses if c.text.startswith("QRS"))
    for key in ("rbbb_complete", "lafb", "lpfb", "nonspecific_delay"):
        assert found[key].result == "not met"


def test_the_shapes_are_those_of_the_block(reading: Reading) -> None:
    for lead in ("I", "V5", "V6"):
        assert reading.waves[lead].shape == "R, R notched"
        assert reading.waves[lead].find("Q") is None
    assert reading.waves["V1"].deflections[-1].name in ("QS", "S")


def test_voltage_is_withheld(reading: Reading) -> None:
    found = {finding.key: finding.result for finding in reading.findings}
    assert found["voltage_sokolow_lyon"] == found["voltage_cornell"] == "undecided"

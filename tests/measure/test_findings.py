"""Whole readings of model hearts whose conduction is known, and of a real recording.

The models are built from the published criteria (see `tests/drawn/conduction.py`), so this tests
the way from samples to findings, not the definitions.
"""

from functools import cache

import pytest

from digitize.tracing import LEADS
from measure.questions import BLOCK_FAMILIES, FAMILIES
from measure.reading import Person, read
from measure.sources import tracing_from_samples
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.records import read_dicom_example

LEFT = {"lbbb_european_2013", "lbbb_european_2021", "lbbb_strict", "lbbb_aha", "lbbb_bedside"}
BLOCKS = {key for name, keys in FAMILIES if name in BLOCK_FAMILIES for key in keys}


@cache
def results(conduction, seed=1, rhythm="sinus", qrs_ms=None):
    """Result of every definition by key."""
    model = record_model(HeartSpec(conduction=conduction, rhythm=rhythm, qrs_ms=qrs_ms, seed=seed))
    tracing = tracing_from_samples(model.mv.T, LEADS, model.fs_hz, file_name="model")
    return {f.key: f.result for f in read(tracing, Person("male")).findings}


def met(found):
    return {key for key in BLOCKS if found[key] == "met"}


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize(
    ("conduction", "expected"),
    [
        ("normal", set()),
        ("lbbb", LEFT),
        ("rbbb", {"rbbb_complete"}),
        ("lafb", {"lafb"}),
        ("nonspecific", {"nonspecific_delay"}),
    ],
)
def test_model_hearts_read_as_what_they_are(conduction, seed, expected):
    assert met(results(conduction, seed)) == expected


def test_model_block_in_fibrillation_is_still_a_block():
    found = results("lbbb", rhythm="fibrillation")
    assert found["lbbb_european_2013"] == "met"
    assert found["pr_long"] == found["pr_short"] == "undecided"


def test_paced_model_is_never_called_a_block():
    assert met(results("paced", rhythm="paced")) == set()


def test_qrs_at_the_threshold_leaves_the_block_open():
    found = results("lbbb", qrs_ms=120.0)
    assert found["lbbb_european_2013"] in ("undecided", "met")
    assert found["rbbb_complete"] == "not met"


def test_real_normal_recording_meets_no_block():
    # the 12-lead recording that comes with pydicom; its recorder measured a QRS of 75 ms
    real = read_dicom_example()
    tracing = tracing_from_samples(real.mv.T, LEADS, real.fs_hz, file_name="waveform_ecg.dcm")
    found = {f.key: f.result for f in read(tracing).findings}
    assert {found[key] for key in BLOCKS} == {"not met"}

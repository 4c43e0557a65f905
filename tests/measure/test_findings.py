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
from tests.criteria_benchmark import records
from tests.drawn.heart import HeartSpec, record_model
from tests.drawn.records import read_dicom_example, read_ptbxl
from tests.measure.open_data import folder

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


def labelled(statement, count):
    """Results of some PTB-XL records with one statement and no pacing, evenly taken."""
    ptbxl = folder("PTBXL_DIR")
    members = [
        label
        for label in records(ptbxl)
        if statement in label.statements and "PACE" not in label.statements
    ]
    for label in members[:: len(members) // count][:count]:
        real = read_ptbxl(int(label.record.removesuffix("_lr")))
        tracing = tracing_from_samples(real.mv.T, LEADS, real.fs_hz, file_name=label.record)
        findings = read(tracing, label.person).findings
        yield {f.key: f.result for f in findings}


# PTB-XL (Wagner et al., Sci Data 7:154): statements by cardiologists or a recorder, some wrong.
def test_ptbxl_left_block_is_met_or_open_and_never_right():
    found = list(labelled("CLBBB", 15))
    assert sum(f["lbbb_european_2013"] == "met" for f in found) >= 9  # 10, and 4 open
    assert sum(f["lbbb_european_2013"] == "not met" for f in found) <= 1
    strict, aha = (sum(f[k] == "met" for f in found) for k in ("lbbb_strict", "lbbb_aha"))
    assert strict >= aha  # as in Netherlands Heart Journal 2021;29:643, table 2
    assert sum(f["rbbb_complete"] == "met" for f in found) <= 1


def test_ptbxl_right_block_is_met_and_never_left():
    found = list(labelled("CRBBB", 15))
    assert sum(f["rbbb_complete"] == "met" for f in found) >= 9
    assert all(f[key] != "met" for f in found for key in LEFT - {"lbbb_bedside"})


def test_ptbxl_normal_meets_no_bundle_branch_block():
    found = list(labelled("NORM", 15))
    for key in (LEFT | {"rbbb_complete", "rbbb_lafb"}) - {"lbbb_bedside"}:
        assert all(f[key] != "met" for f in found)

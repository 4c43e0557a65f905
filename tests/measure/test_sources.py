"""Digital ECGs as tracings."""

from pathlib import Path

import numpy as np
import pydicom.data
import pytest

from digitize.errors import NoTrace, UnreadableFile
from digitize.formats import export
from measure.sources import read_digital, tracing_from_samples


def sine(fs_hz: float, seconds: float = 4.0) -> np.ndarray:
    time_s = np.arange(round(fs_hz * seconds)) / fs_hz
    return np.sin(2 * np.pi * 3 * time_s)


@pytest.mark.parametrize("fs_hz", [100.0, 250.0, 360.0, 500.0, 1000.0])
def test_every_rate_becomes_500_per_second(fs_hz: float) -> None:
    panel = tracing_from_samples(sine(fs_hz)[:, None], ["II"], fs_hz).lead("II")
    assert panel.fs_hz == 500.0
    inner = slice(100, 1800)
    np.testing.assert_allclose(panel.mv[inner], sine(500.0)[inner], atol=0.01)


def test_a_gap_stays_missing() -> None:
    mv = sine(100.0)
    mv[100:150] = np.nan
    panel = tracing_from_samples(mv[:, None], ["II"], 100.0).lead("II")
    assert np.isnan(panel.mv[505:740]).all()
    assert np.isfinite(panel.mv[760:]).all()
    assert np.isnan(panel.sigma_mv[600])


def test_lead_names_in_any_case_and_foreign_ones_as_they_are() -> None:
    tracing = tracing_from_samples(
        np.ones((600, 3)) * sine(500, 1.2)[:, None], ["avf", "V4R", "i"], 500
    )
    assert tracing.leads == ("I", "aVF", "V4R")


def test_noise_of_the_samples_is_estimated() -> None:
    rng = np.random.default_rng(3)
    mv = sine(500.0) + 0.02 * rng.standard_normal(2000)
    sigma = tracing_from_samples(mv[:, None], ["II"], 500.0).lead("II").sigma_mv[0]
    assert sigma == pytest.approx(0.02, rel=0.1)


def test_too_slow_a_recording_is_refused() -> None:
    with pytest.raises(UnreadableFile, match="50 samples per second are too few"):
        tracing_from_samples(np.zeros((100, 1)), ["II"], 50.0)


def test_a_recording_without_samples_is_refused() -> None:
    with pytest.raises(NoTrace):
        tracing_from_samples(np.full((600, 1), np.nan), ["II"], 500.0)


def write_csv(path: Path, header: str, scale: float = 1.0) -> Path:
    rows = [f"{k / 500:.3f},{scale * value:.5f}" for k, value in enumerate(sine(500.0, 1.0))]
    path.write_text("\n".join([header, *rows]) + "\n")
    return path


def test_csv_in_millivolts_and_microvolts(tmp_path: Path) -> None:
    in_mv = read_digital(write_csv(tmp_path / "a.csv", "time_s,V1_mV"))
    in_uv = read_digital(write_csv(tmp_path / "b.csv", "time_s,V1 (uV)", 1000.0))
    given = read_digital(write_csv(tmp_path / "c.csv", "time_s,V1", 1000.0), unit="uV")
    for tracing in (in_uv, given):
        np.testing.assert_allclose(tracing.lead("V1").mv, in_mv.lead("V1").mv, atol=1e-5)
    assert in_mv.source.file_name == "a.csv"
    assert len(in_mv.source.sha256) == 64


def test_csv_without_a_unit_says_what_to_do(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFile, match="name it V1_mV or give the unit"):
        read_digital(write_csv(tmp_path / "a.csv", "time_s,V1"))


@pytest.mark.parametrize("text", ["", "a,b\nc,d\n", "time_s,V1_mV\n0,1\n0.002,x\n0.004,1\n"])
def test_csv_that_is_no_table(tmp_path: Path, text: str) -> None:
    path = tmp_path / "bad.csv"
    path.write_text(text)
    with pytest.raises(UnreadableFile, match=r"bad\.csv"):
        read_digital(path)


def test_unknown_file_and_missing_file(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFile, match="not a digital ECG"):
        read_digital(tmp_path / "a.xyz")
    with pytest.raises(UnreadableFile, match="no such file"):
        read_digital(tmp_path / "a.hea")


def test_damaged_dicom(tmp_path: Path) -> None:
    path = tmp_path / "a.dcm"
    path.write_bytes(b"nothing")
    with pytest.raises(UnreadableFile, match=r"a\.dcm"):
        read_digital(path)


def test_wfdb_record(tmp_path: Path) -> None:
    # written by the format's own description: 16 bits, two interleaved signals, 200 units per mV
    pytest.importorskip("wfdb")
    counts = np.round(200 * np.column_stack([sine(360.0), -sine(360.0)])).astype("<i2")
    (tmp_path / "r.dat").write_bytes(counts.tobytes())
    lines = [
        f"r 2 360 {len(counts)}",
        "r.dat 16 200/mV 16 0 0 0 0 MLII",
        "r.dat 16 200/mV 16 0 0 0 0 V5",
    ]
    (tmp_path / "r.hea").write_text("\n".join(lines) + "\n")
    tracing = read_digital(tmp_path / "r.hea")
    assert tracing.leads == ("V5", "MLII")
    np.testing.assert_allclose(tracing.lead("V5").mv[100:1800], -sine(500.0)[100:1800], atol=0.01)


def test_dicom_waveform_of_pydicom() -> None:
    path = Path(pydicom.data.get_testdata_file("waveform_ecg.dcm"))
    tracing = read_digital(path)
    assert len(tracing.leads) == 12
    assert len(tracing.lead("V6").mv) == 5000
    # Einthoven: the recorder's own samples keep it within one step of 1.25 uV per lead
    rest = tracing.lead("II").mv - tracing.lead("I").mv - tracing.lead("III").mv
    assert np.abs(rest).max() < 0.003


def test_padding_of_a_dicom_waveform_is_a_gap(tmp_path: Path) -> None:
    """DICOM PS3.3 C.10.9: Waveform Padding Value (5400,100A) stands for no sample."""
    mv = np.stack([sine(500.0), sine(500.0)], axis=1)
    mv[:900, 1] = np.nan
    tracing = tracing_from_samples(mv, ["II", "V1"], 500.0)
    ((name, content),) = export(tracing, "gap", "dicom").items()
    path = tmp_path / name
    path.write_bytes(content)
    read_back = read_digital(path)
    # Next to a gap resampling and rounding may touch a few samples; 1 uV steps elsewhere.
    assert np.isnan(read_back.lead("V1").mv[:890]).all()
    np.testing.assert_allclose(read_back.lead("V1").mv[910:1990], mv[910:1990, 1], atol=0.002)
    np.testing.assert_allclose(read_back.lead("II").mv[10:1990], mv[10:1990, 0], atol=0.002)


@pytest.mark.parametrize(("fs_hz", "enough"), [(100.0, False), (299.0, False), (300.0, True)])
def test_a_low_rate_is_a_caution(fs_hz: float, enough: bool) -> None:
    """150 Hz, AHA/ACC/HRS 2007 part I (from memory): twice as many samples hold it."""
    (check,) = tracing_from_samples(sine(fs_hz)[:, None], ["II"], fs_hz).checks
    assert check.passed is enough
    assert ("a narrow notch" in check.message) is not enough

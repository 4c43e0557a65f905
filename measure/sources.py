"""Digital ECGs as tracings: WFDB records, DICOM waveforms, EDF and plain CSV.

All leads of a digital recording start together. Each becomes one panel of a `Tracing`, resampled
to 500 samples per second where it was recorded at another rate. What the file leaves out stays
missing.
"""

import csv
import hashlib
import importlib
import math
from collections.abc import Callable, Sequence
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np

from digitize.errors import NoTrace, UnreadableFile, needs_extra
from digitize.tracing import FS_HZ, LEADS, Check, Known, PageSource, Panel, Tracing
from measure.resampling import resampled

_MV_PER_UNIT = {"mv": 1.0, "uv": 1e-3, "µv": 1e-3, "μv": 1e-3, "v": 1e3, "nv": 1e-6}
_SLOWEST_HZ = 100.0  # below this a QRS has too few samples to be measured
_FINEST_HZ = 150.0  # what a diagnostic recording holds (AHA/ACC/HRS 2007 part I, from memory)
_USUAL_NAMES = {lead.lower(): lead for lead in LEADS}


def read_digital(path: Path, *, unit: str | None = None) -> Tracing:
    """Return the digital ECG in a file as a tracing.

    Parameters
    ----------
    path : Path
        A WFDB header (`.hea`), a DICOM waveform (`.dcm`), EDF (`.edf`) or a CSV (`.csv`) whose
        first column is the time in seconds and whose others are named for their leads.
    unit : str, optional
        "mV" or "uV" of a CSV whose column names do not say it (as in `V1_uV`).

    Raises
    ------
    UnreadableFile
        The file cannot be read, is sampled too slowly, or does not say its unit.
    NoTrace
        There is no lead of an ECG in it.
    """
    readers: dict[str, Callable[[], Tracing]] = {
        ".hea": lambda: _read_wfdb(path),
        ".dcm": lambda: _read_dicom(path),
        ".edf": lambda: _read_edf(path),
        ".csv": lambda: _read_csv(path, unit),
    }
    reader = readers.get(path.suffix.lower())
    if reader is None:
        raise UnreadableFile(
            f"{path.name}: not a digital ECG that can be read; give one of {', '.join(readers)}."
        )
    if not path.is_file():
        raise UnreadableFile(f"{path.name}: there is no such file.")
    return reader()


def tracing_from_samples(
    mv: np.ndarray,
    leads: Sequence[str],
    fs_hz: float,
    *,
    file_name: str = "",
    sha256: str = "",
) -> Tracing:
    """Return simultaneous samples as a tracing at 500 samples per second.

    Parameters
    ----------
    mv : ndarray, (n, len(leads))
        Millivolts, NaN where a sample is missing.
    leads : sequence of str
        Lead names; the usual twelve are recognised in any case of letters.
    fs_hz : float
        Samples per second, 100 or more.

    Raises
    ------
    UnreadableFile
        Fewer than 100 samples per second.
    """
    if not fs_hz >= _SLOWEST_HZ:
        raise UnreadableFile(
            f"{file_name}: {fs_hz:g} samples per second are too few to measure a QRS; "
            f"{_SLOWEST_HZ:g} or more are needed."
        )
    panels = tuple(
        _panel(name, row, column, fs_hz)
        for row, (name, column) in enumerate(zip(leads, np.asarray(mv, float).T, strict=True))
        if np.isfinite(column).any()
    )
    if not panels:
        raise NoTrace(f"{file_name}: no lead holds any sample.")
    return Tracing(
        source=PageSource(file_name, sha256, 1, 0, 0, None),
        panels=panels,
        speed_mm_s=Known(25.0, "assumed"),
        gain_mm_mv=Known(10.0, "assumed"),
        layout=Known("digital", "given"),
        timing=Known("simultaneous", "given"),
        checks=(_check_rate(fs_hz),),
    )


def _check_rate(fs_hz: float) -> Check:
    """Whether the samples can hold what a diagnostic recording holds."""
    enough = fs_hz >= 2 * _FINEST_HZ
    message = f"Recorded at {fs_hz:g} samples per second."
    if not enough:
        message += (
            f" Nothing above {fs_hz / 2:g} Hz is in it: a narrow notch or small q may be missing, "
            f"and the ends of a QRS are surer at {2 * _FINEST_HZ:g} or more."
        )
    return Check("sampling_rate", enough, message, fs_hz, 2 * _FINEST_HZ)


def _panel(name: str, row: int, mv: np.ndarray, fs_hz: float) -> Panel:
    """One lead on the common 2 ms raster, with the noise of its samples."""
    mv = resampled(mv, fs_hz)
    sigma = np.where(np.isfinite(mv), _noise_mv(mv), np.nan)
    return Panel(
        lead=_USUAL_NAMES.get(name.strip().lower(), name.strip()),
        strip=False,
        row=row,
        start_s=0.0,
        fs_hz=FS_HZ,
        mv=mv,
        sigma_mv=sigma,
        box_mm=(0.0, 0.0, 0.0, 0.0),
        speed_mm_s=25.0,
        gain_mm_mv=10.0,
        lead_source="given",
    )


def _noise_mv(mv: np.ndarray) -> float:
    """Robust standard deviation of the white part of the noise, from third differences."""
    third = np.diff(mv, 3)
    third = third[np.isfinite(third)]
    if len(third) == 0:
        return math.nan
    # third differences of white noise have 20 times its variance; 0.6745 makes MAD a deviation
    return float(np.median(np.abs(third)) / 0.6745 / math.sqrt(20))


def _read_wfdb(path: Path) -> Tracing:
    wfdb = _library("wfdb", "WFDB records")
    try:
        record = wfdb.rdrecord(str(path.with_suffix("")))
    except (OSError, ValueError, IndexError) as error:
        raise UnreadableFile(f"{path.name}: not a readable WFDB record ({error}).") from error
    scale = [_mv_per(unit, path) for unit in record.units]
    return _tracing(record.p_signal * scale, record.sig_name, float(record.fs), path)


def _read_dicom(path: Path) -> Tracing:
    pydicom = _library("pydicom", "DICOM waveforms")
    try:
        dataset = pydicom.dcmread(path)
    except (OSError, pydicom.errors.InvalidDicomError) as error:
        raise UnreadableFile(f"{path.name}: not a readable DICOM file ({error}).") from error
    groups = dataset.get("WaveformSequence", ())
    if not groups:
        raise NoTrace(f"{path.name}: this DICOM file holds no waveform.")
    # The rhythm recording is the longest group; a second one often holds an averaged beat.
    longest = max(range(len(groups)), key=lambda k: int(groups[k].NumberOfWaveformSamples))
    group = groups[longest]
    channels = group.ChannelDefinitionSequence
    units = [
        channel.ChannelSensitivityUnitsSequence[0].CodeValue
        if "ChannelSensitivityUnitsSequence" in channel
        else ""
        for channel in channels
    ]
    names = [_dicom_lead(str(ch.ChannelSourceSequence[0].CodeMeaning)) for ch in channels]
    values = dataset.waveform_array(longest) * [_mv_per(unit, path) for unit in units]
    values[_padding(group)] = np.nan
    return _tracing(values, names, float(group.SamplingFrequency), path)


def _padding(group: Any) -> np.ndarray:
    """Samples of a waveform group that stand for none, (samples, channels), by (5400,100A)."""
    if "WaveformPaddingValue" not in group:
        return np.zeros(
            (int(group.NumberOfWaveformSamples), len(group.ChannelDefinitionSequence)), bool
        )
    kind = {"SS": "<i2", "US": "<u2", "SB": "<i1", "UB": "<u1", "SL": "<i4", "UL": "<u4"}
    dtype = np.dtype(kind[group.WaveformSampleInterpretation])
    stored = np.frombuffer(group.WaveformData, dtype)
    channels = int(group.NumberOfWaveformChannels)
    stored = stored[: int(group.NumberOfWaveformSamples) * channels].reshape(-1, channels)
    padding = group.WaveformPaddingValue
    if isinstance(padding, bytes):
        padding = np.frombuffer(padding[: dtype.itemsize], dtype)[0]
    return stored == padding


def _dicom_lead(meaning: str) -> str:
    """Lead name out of a code meaning such as "Lead I (Einthoven)" or "aVR, augmented"."""
    words = meaning.replace(",", " ").replace("(", " ").split()
    named = (_USUAL_NAMES[w.lower()] for w in words if w.lower() in _USUAL_NAMES)
    return next(named, meaning)


def _read_edf(path: Path) -> Tracing:
    edfio = _library("edfio", "EDF")
    try:
        edf = edfio.read_edf(path)
    except (OSError, ValueError) as error:
        raise UnreadableFile(f"{path.name}: not a readable EDF file ({error}).") from error
    wanted = [
        (_edf_lead(signal.label), signal)
        for signal in edf.signals
        if _edf_lead(signal.label).lower() in _USUAL_NAMES
    ]
    if not wanted:
        raise NoTrace(f"{path.name}: no signal is named for a lead of the ECG.")
    rates = {float(signal.sampling_frequency) for _, signal in wanted}
    if len(rates) > 1:
        raise UnreadableFile(
            f"{path.name}: its leads have different sampling rates "
            f"({', '.join(f'{rate:g}' for rate in sorted(rates))}); give one rate for all."
        )
    scale = [_mv_per(signal.physical_dimension, path) for _, signal in wanted]
    mv = np.column_stack([signal.data for _, signal in wanted]) * scale
    return _tracing(mv, [name for name, _ in wanted], rates.pop(), path)


def _edf_lead(label: str) -> str:
    """Lead name of an EDF label; the standard text says "ECG V1"."""
    return label.strip().removeprefix("ECG ").removeprefix("EKG ").strip()


def _read_csv(path: Path, unit: str | None) -> Tracing:
    with path.open(newline="", encoding="utf-8-sig", errors="replace") as file:
        rows = list(csv.reader(file))
    if len(rows) < 3 or len(rows[0]) < 2:
        raise UnreadableFile(f"{path.name}: no table of a time column and leads.")
    header = [cell.strip() for cell in rows[0]]
    try:
        table = np.array([[float(c) if c.strip() else math.nan for c in row] for row in rows[1:]])
    except ValueError as error:
        raise UnreadableFile(f"{path.name}: a cell is not a number ({error}).") from error
    if table.ndim != 2 or table.shape[1] != len(header):
        raise UnreadableFile(f"{path.name}: rows and header differ in length.")
    step_s = float(np.median(np.diff(table[:, 0])))
    if not step_s > 0 or np.abs(np.diff(table[:, 0]) - step_s).max() > step_s / 2:
        raise UnreadableFile(f"{path.name}: the first column is not an even time in seconds.")
    names, scale = zip(*(_csv_lead(cell, unit, path) for cell in header[1:]), strict=True)
    return _tracing(table[:, 1:] * scale, names, 1 / step_s, path)


def _csv_lead(cell: str, unit: str | None, path: Path) -> tuple[str, float]:
    """Lead name and millivolts per unit of a column such as "V1", "V1_uV" or "V1 (mV)"."""
    name, _, stated = cell.replace("(", "_").replace(")", "").replace(" ", "").partition("_")
    stated = stated or unit or ""
    if not stated:
        raise UnreadableFile(
            f"{path.name}: column {cell} does not say mV or uV; name it {cell}_mV or give the unit."
        )
    return name, _mv_per(stated, path)


def _mv_per(unit: str, path: Path) -> float:
    try:
        return _MV_PER_UNIT[unit.strip().lower()]
    except KeyError:
        raise UnreadableFile(
            f"{path.name}: its unit is {unit or 'not stated'}; mV, uV or V are understood."
        ) from None


def _tracing(mv: np.ndarray, names: Sequence[str], fs_hz: float, path: Path) -> Tracing:
    digest = hashlib.sha256(path.read_bytes()).hexdigest()
    return tracing_from_samples(mv, names, fs_hz, file_name=path.name, sha256=digest)


def _library(name: str, feature: str) -> ModuleType:
    try:
        return importlib.import_module(name)
    except ImportError:
        raise needs_extra(f"reading {feature}", "digital") from None

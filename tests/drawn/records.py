"""Real records from open collections, where a folder of them is at hand.

`LUDB_DIR` names the Lobachevsky University Electrocardiography Database (PhysioNet, 1.0.1),
`PTBXL_DIR` a folder of PTB-XL records at 100/s (PhysioNet, 1.0.3). Neither is ever committed.
LUDB's digital counts are taken as microvolts: the header's gains scale every lead to the same
height, while in counts II = I + III holds exactly.
"""

import os
import warnings
from pathlib import Path
from types import ModuleType

import numpy as np
import pydicom
import scipy as sp
from pydicom.data import get_testdata_file

from digitize.tracing import LEADS
from tests.drawn.heart import FS_HZ, Recording, twelve_leads


def ludb_folder() -> Path | None:
    """Folder of the LUDB records, None where there is none."""
    return _folder("LUDB_DIR", "data")


def ptbxl_folder() -> Path | None:
    """Folder of the PTB-XL records, None where there is none."""
    return _folder("PTBXL_DIR", "")


def read_ludb(number: int) -> Recording:
    """Return one LUDB record, 10 s at 500/s, in mV."""
    folder = ludb_folder()
    if folder is None:
        raise FileNotFoundError("LUDB_DIR is not set to a folder of LUDB records")
    record = _wfdb().rdrecord(str(folder / str(number)), physical=False)
    names = [name.lower() for name in record.sig_name]
    counts = np.stack([record.d_signal[:, names.index(lead.lower())] for lead in LEADS])
    mv = _without_drift(counts / 1000.0, float(record.fs))
    return Recording(mv, float(record.fs), name=f"ludb {number}")


def read_dicom_example() -> Recording:
    """Return the 12-lead recording that comes with pydicom, 10 s, from 1000/s to 500/s, in mV.

    Its recorder's own annotations say RR 982, PR 161, QRS 75 and QT 368 ms.
    """
    data = pydicom.dcmread(str(get_testdata_file("waveform_ecg.dcm")))
    microvolts = data.waveform_array(0).T
    mv = sp.signal.resample_poly(microvolts / 1000.0, 1, 2, axis=1)
    return Recording(mv, FS_HZ, name="pydicom waveform_ecg")


def read_ptbxl(number: int) -> Recording:
    """Return one PTB-XL record, 10 s, brought from 100/s to 500/s, in mV."""
    folder = ptbxl_folder()
    if folder is None:
        raise FileNotFoundError("PTBXL_DIR is not set to a folder of PTB-XL records")
    record = _wfdb().rdrecord(str(folder / f"{number:05d}_lr"))
    names = [name.lower() for name in record.sig_name]
    leads = {lead: record.p_signal[:, names.index(lead.lower())] for lead in LEADS}
    up = round(FS_HZ / record.fs)
    eight = {lead: sp.signal.resample_poly(leads[lead], up, 1) for lead in ("I", "II", *LEADS[6:])}
    return Recording(twelve_leads(eight), FS_HZ, name=f"ptbxl {number}")


def _without_drift(mv: np.ndarray, fs_hz: float) -> np.ndarray:
    """Leads behind a recorder's lower limit of 0.05 Hz, settled before the first sample."""
    b, a = sp.signal.butter(1, 0.05, "highpass", fs=fs_hz)
    level_mv = np.median(mv[:, : round(fs_hz)], axis=1, keepdims=True)
    return sp.signal.lfilter(b, a, mv - level_mv, axis=1)


def _wfdb() -> ModuleType:
    """The library of PhysioNet's formats; its import speaks of what pandas will drop one day."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        warnings.simplefilter("ignore", FutureWarning)
        import wfdb
    return wfdb


def _folder(variable: str, inside: str) -> Path | None:
    value = os.environ.get(variable)
    folder = Path(value) / inside if value else None
    return folder if folder is not None and folder.is_dir() else None

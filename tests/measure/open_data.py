"""Open recordings for the tests, found through environment variables, never committed."""

import os
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from digitize.tracing import LEADS, Tracing
from measure.sources import tracing_from_samples


def folder(variable: str) -> Path:
    """Folder named by an environment variable; skips the test where it is not set."""
    value = os.environ.get(variable)
    if not value:
        pytest.skip(f"{variable} is not set: the open data are not on this machine")
    return Path(value)


@cache
def ludb_tracing(record: int) -> Tracing:
    """One LUDB record; 1 count is taken as 1 microvolt (the header's gains are per lead)."""
    data = folder("LUDB_DIR") / "data"
    counts = np.fromfile(data / f"{record}.dat", "<i2").reshape(-1, 12)
    return tracing_from_samples(counts / 1000.0, LEADS, 500.0, file_name=f"ludb-{record}")


def ludb_marks(record: int) -> dict[str, tuple[np.ndarray, np.ndarray]]:
    """Sample numbers and symbols of one LUDB record's marks, lead by lead."""
    import wfdb

    data = folder("LUDB_DIR") / "data"
    marks = {lead: wfdb.rdann(str(data / str(record)), lead.lower()) for lead in LEADS}
    return {lead: (ann.sample, np.array(ann.symbol)) for lead, ann in marks.items()}


def ptbxl_tracing(record: str) -> Tracing:
    """One PTB-XL record of 100 samples per second, such as "00003_lr"."""
    import wfdb

    read = wfdb.rdrecord(str(folder("PTBXL_DIR") / record))
    return tracing_from_samples(
        read.p_signal, read.sig_name, float(read.fs), file_name=f"ptbxl-{record}"
    )

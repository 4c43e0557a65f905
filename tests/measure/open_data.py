"""Open recordings for the tests, found through environment variables, never committed."""

import os
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from digitize.tracing import LEADS, Tracing
from measure.sources import tracing_from_samples

_SYMBOLS = {1: "N", 24: "p", 27: "t", 39: "(", 40: ")"}
_SKIP, _AUX = 59, 63


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
    data = folder("LUDB_DIR") / "data"
    return {lead: _marks(data / f"{record}.{lead.lower()}") for lead in LEADS}


def _marks(path: Path) -> tuple[np.ndarray, np.ndarray]:
    """Marks of a WFDB annotation file in the MIT format (6 bits of kind, 10 of time)."""
    words = np.fromfile(path, "<u2")
    at, symbols, sample, k = [], [], 0, 0
    while k < len(words) and words[k]:
        kind, value = divmod(int(words[k]), 1024)
        k += 1
        if kind == _SKIP:
            sample += (int(words[k]) << 16) + int(words[k + 1])
            k += 2
        elif kind == _AUX:
            k += (value + 1) // 2
        elif kind in _SYMBOLS:
            sample += value
            at.append(sample)
            symbols.append(_SYMBOLS[kind])
    return np.array(at), np.array(symbols)


def ptbxl_tracing(record: str) -> Tracing:
    """One PTB-XL record of 100 samples per second, such as "00003_lr"."""
    header = (folder("PTBXL_DIR") / f"{record}.hea").read_text().splitlines()
    leads = [line.split()[-1] for line in header[1:13]]
    units = np.fromfile(folder("PTBXL_DIR") / f"{record}.dat", "<i2").reshape(-1, 12)
    # All records: 16 bits, 1000 units per mV, zero at 0 (as their headers say).
    return tracing_from_samples(units / 1000.0, leads, 100.0, file_name=f"ptbxl-{record}")

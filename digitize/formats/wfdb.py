"""A WFDB record: NAME.hea and NAME.dat in signal format 16.

Samples are interleaved little-endian 16-bit numbers of 1 µV; the lowest of them means "no sample".

References
----------
PhysioNet, header(5) and signal(5) of the WFDB Applications Guide.
"""

import re

import numpy as np

from digitize.formats.leads import DERIVED, NO_SAMPLE, LeadTable, lead_table
from digitize.tracing import Tracing

_GAIN = 1000  # steps per mV


def files(tracing: Tracing, stem: str) -> dict[str, bytes]:
    """Header and signal file of one record, whose name keeps letters, digits, - and _ alone."""
    table = lead_table(tracing)
    record = re.sub(r"[^A-Za-z0-9_-]", "_", stem)
    return {
        f"{record}.dat": table.steps.astype("<i2").tobytes(),
        f"{record}.hea": _header(table, record).encode("ascii", "replace"),
    }


def _header(table: LeadTable, record: str) -> str:
    count = len(table.names)
    lines = [f"{record} {count} {table.fs_hz:g} {len(table.steps)}"]
    for name, steps in zip(table.names, table.steps.T, strict=True):
        description = " ".join(name.split()) or "unnamed"
        checksum = int(np.int64(steps.astype(np.int64).sum()).astype(np.int16))
        lines.append(
            f"{record}.dat 16 {_GAIN}(0)/mV 16 0 {int(steps[0])} {checksum} 0 {description}"
        )
    notes = [DERIVED, f"The value {NO_SAMPLE} stands where nothing was printed or read."]
    if table.start_s:
        notes.append(f"Begins {table.start_s:.3f} s after the beginning of the printed recording.")
    return "\n".join([*lines, *(f"# {note}" for note in notes)]) + "\n"

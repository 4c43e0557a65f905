"""The leads of a tracing as one table of whole microvolts, from which every format is written.

A step of one microvolt is finer than any pen, and sixteen bits of them hold 32 mV, more than any
ECG. What was not printed or could not be read is marked beside the table, never filled in. A lead
printed both as a short panel and as a rhythm strip takes the strip, as in NAME.csv.
"""

from dataclasses import dataclass

import numpy as np

from digitize.errors import CannotExport
from digitize.tracing import FS_HZ, Panel, Tracing

STEP_MV = 0.001
LARGEST_STEPS = 32767  # the lowest sixteen-bit value is kept for "no sample"
NO_SAMPLE = -32768
DERIVED = (
    "Derived from a scanned document, not recorded from a patient by this device. No diagnosis: "
    "a qualified clinician reads the original tracing."
)

# Codes of ISO/IEEE 11073-10101, partition 2 (SCP-ECG); the tests hold them against DICOM CID 3001.
LEAD_CODES = {
    **{"I": 1, "II": 2, "III": 61, "aVR": 62, "aVL": 63, "aVF": 64},
    **{f"V{n}": 2 + n for n in range(1, 7)},
    **{"V7": 9, "V8": 66, "V9": 67, "V3R": 11, "V4R": 12, "V5R": 13, "V6R": 14},
}


@dataclass(frozen=True, eq=False)
class LeadTable:
    """Leads side by side on one raster.

    `steps` is (n, len(names)) int16 in steps of 1 µV, `NO_SAMPLE` where nothing is known; row k
    stands at `start_s + k / fs_hz` seconds from the beginning of the printed recording.
    """

    names: tuple[str, ...]
    steps: np.ndarray
    start_s: float
    fs_hz: float = FS_HZ

    @property
    def missing(self) -> np.ndarray:
        """Where no sample is known, bool of the shape of `steps`."""
        return self.steps == NO_SAMPLE

    def code(self, name: str) -> int:
        """The lead's code in partition 2 of ISO/IEEE 11073-10101.

        Raises
        ------
        CannotExport
            The standard has no code for a lead of that name.
        """
        if name not in LEAD_CODES:
            raise CannotExport(
                f"lead '{name}' has no code in ISO/IEEE 11073-10101: correct its name, or export "
                "as csv, wfdb or edf"
            )
        return LEAD_CODES[name]


def lead_table(tracing: Tracing) -> LeadTable:
    """Return the leads that hold any sample, from the first sample of any to the last.

    Raises
    ------
    CannotExport
        No lead holds a sample, or one holds a voltage of more than 32 mV.
    """
    names = tuple(n for n in tracing.leads if any(map(_holds, _of_lead(tracing, n))))
    if not names:
        raise CannotExport("no lead of it holds a sample")
    panels = [panel for name in names for panel in _of_lead(tracing, name) if _holds(panel)]
    first = min(round(p.start_s * FS_HZ) for p in panels)
    last = max(round(p.start_s * FS_HZ) + len(p.mv) for p in panels)
    mv = np.full((last - first, len(names)), np.nan)
    for panel in panels:
        start = round(panel.start_s * FS_HZ) - first
        column = mv[start : start + len(panel.mv), names.index(panel.lead)]
        column[:] = np.where(np.isnan(column), panel.mv, column)
    known = np.flatnonzero(np.isfinite(mv).any(axis=1))
    mv = mv[known[0] : known[-1] + 1]
    return LeadTable(names, _in_steps(mv), (first + int(known[0])) / FS_HZ)


def _of_lead(tracing: Tracing, name: str) -> list[Panel]:
    """The panels that fill a lead's column: its strips where they hold anything, else the rest."""
    panels = [panel for panel in tracing.panels if panel.lead == name]
    return [panel for panel in panels if panel.strip and _holds(panel)] or panels


def _holds(panel: Panel) -> bool:
    return bool(np.isfinite(panel.mv).any())


def _in_steps(mv: np.ndarray) -> np.ndarray:
    """Millivolts as whole steps."""
    steps = np.rint(mv / STEP_MV)
    if np.nanmax(np.abs(steps)) > LARGEST_STEPS:
        raise CannotExport(
            f"a sample of {np.nanmax(np.abs(mv)):.0f} mV is no ECG and does not fit 16 bits: "
            "check the gain"
        )
    return np.where(np.isnan(steps), NO_SAMPLE, steps).astype(np.int16)

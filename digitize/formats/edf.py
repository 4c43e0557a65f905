"""An EDF+ file (continuous), NAME.edf, in steps of 1 µV.

EDF has no value that means "no sample", so leads with gaps are refused rather than filled. Patient
and date fields stay anonymous, as the EDF+ rules ask where they are unknown.

References
----------
Kemp and Olivan, "European data format 'plus' (EDF+)", Clin Neurophysiol 114:1755-1761 (2003);
standard texts of EDF+ for the labels of ECG leads.
"""

import numpy as np

from digitize.errors import CannotExport, needs_extra
from digitize.formats.leads import LARGEST_STEPS, NO_SAMPLE, lead_table
from digitize.tracing import Tracing

_LARGEST_RECORD_BYTES = 61440  # advised upper limit of one data record (EDF, 1992)


def files(tracing: Tracing, stem: str) -> dict[str, bytes]:
    """One EDF+ file.

    Raises
    ------
    CannotExport
        A lead has a gap, as every lead of a page with several columns has.
    UnreadableFile
        The package that writes EDF is not installed.
    """
    table = lead_table(tracing)
    with_gaps = [name for k, name in enumerate(table.names) if table.missing[:, k].any()]
    if with_gaps:
        raise CannotExport(
            f"EDF cannot say that a sample is missing, and {', '.join(with_gaps)} do not fill "
            "the whole recording: export as wfdb, dicom, fhir or aecg"
        )
    try:
        import edfio
    except ImportError:
        raise needs_extra("writing EDF", "digital") from None
    signals = [
        edfio.EdfSignal.from_digital(
            np.ascontiguousarray(steps),
            table.fs_hz,
            label=f"ECG {name}"[:16],
            physical_dimension="uV",
            physical_range=(NO_SAMPLE, LARGEST_STEPS),
            digital_range=(NO_SAMPLE, LARGEST_STEPS),
        )
        for name, steps in zip(table.names, table.steps.T, strict=True)
    ]
    recording = edfio.Recording(
        equipment_code="millivellum", additional=("derived_from_a_scanned_document",)
    )
    edf = edfio.Edf(
        signals,
        recording=recording,
        data_record_duration=_record_samples(len(table.steps), len(signals)) / table.fs_hz,
        annotations=[edfio.EdfAnnotation(0, None, "Derived from a scanned document")],
    )
    return {f"{stem}.edf": edf.to_bytes()}


def _record_samples(samples: int, signals: int) -> int:
    """Samples of one data record: the largest divisor that keeps it within the advised size."""
    most = _LARGEST_RECORD_BYTES // (2 * signals)
    return max(n for n in range(1, min(samples, most) + 1) if samples % n == 0)

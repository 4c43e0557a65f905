"""A DICOM 12-lead ECG waveform object, NAME.dcm, in steps of 1 µV.

The waveform is marked DERIVED. Where nothing was printed or read stands the Waveform Padding Value.
The standard demands an acquisition time, which no page tells reliably: a placeholder stands there.
Measurements are waveform annotations: a number with its code and unit, its standard error and what
could not be measured as text.

References
----------
DICOM PS3.3 A.34.3 (12-lead ECG), C.10.9 (waveform), C.10.10 (annotation); PS3.16 CID 3001 (leads).
"""

import hashlib
from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from digitize.errors import CannotExport
from digitize.formats.dicom_object import PLACEHOLDER, code, new_object, to_bytes, without_person
from digitize.formats.leads import DERIVED, NO_SAMPLE, LeadTable, lead_table
from digitize.formats.measurements import NOTHING, Measurements, Number, rounded
from digitize.tracing import Tracing

if TYPE_CHECKING:
    from pydicom.dataset import Dataset

TWELVE_LEAD_ECG = "1.2.840.10008.5.1.4.1.1.9.1.1"
MOST_CHANNELS = 13  # PS3.3 A.34.3.4.4
OWN_SCHEME = "99MILLIVELLUM"  # of concepts without a standard code: "99" marks it as local (PS3.16)
NUMBERS, REMARKS, FINDINGS = 1, 2, 3  # annotation groups

_LONGEST_TEXT = 1024  # bytes of a value of ST (PS3.5 6.2)
_MEANINGS = {
    "aVR": "aVR, augmented voltage, right",
    "aVL": "aVL, augmented voltage, left",
    "aVF": "aVF, augmented voltage, foot",
}
_UNITS = {"ms": "millisecond", "deg": "degree", "/min": "per minute", "uV": "microvolt"}


def files(tracing: Tracing, stem: str, measurements: Measurements = NOTHING) -> dict[str, bytes]:
    """One DICOM file.

    Raises
    ------
    CannotExport
        There are more leads than the object may hold, or one without a code.
    UnreadableFile
        The package that writes DICOM is not installed.
    """
    table = lead_table(tracing)
    if len(table.names) > MOST_CHANNELS:
        raise CannotExport(
            f"a 12-lead ECG object holds {MOST_CHANNELS} leads, this has {len(table.names)}: "
            "export as wfdb"
        )
    said = repr((table.names, measurements)).encode()
    content = hashlib.sha256(table.steps.tobytes() + said).hexdigest()
    dataset = new_object(tracing.source, TWELVE_LEAD_ECG, "ECG", content)
    without_person(dataset)
    dataset.AcquisitionDateTime = "".join(PLACEHOLDER)
    dataset.AcquisitionContextSequence = []
    dataset.WaveformSequence = [_group(table)]
    if measurements != NOTHING:
        dataset.WaveformAnnotationSequence = list(_annotations(measurements))
    return {f"{stem}.dcm": to_bytes(dataset)}


def _group(table: LeadTable) -> "Dataset":
    """The multiplex group of all leads (PS3.3 C.10.9)."""
    from pydicom.dataset import Dataset

    group = Dataset()
    group.MultiplexGroupTimeOffset = 0
    group.WaveformOriginality = "DERIVED"
    group.NumberOfWaveformChannels = len(table.names)
    group.NumberOfWaveformSamples = len(table.steps)
    group.SamplingFrequency = table.fs_hz
    group.MultiplexGroupLabel = "RHYTHM"
    group.WaveformBitsAllocated = 16
    group.WaveformSampleInterpretation = "SS"
    padding = np.array(NO_SAMPLE, "<i2").tobytes()
    group.add_new((0x5400, 0x100A), "OW", padding)  # Waveform Padding Value
    group.add_new((0x5400, 0x1010), "OW", table.steps.astype("<i2").tobytes())  # Waveform Data
    group.ChannelDefinitionSequence = [
        _channel(number, name, table) for number, name in enumerate(table.names, start=1)
    ]
    return group


def _channel(number: int, name: str, table: LeadTable) -> "Dataset":
    """One lead: its code, and 1 µV to a step."""
    from pydicom.dataset import Dataset

    channel = Dataset()
    channel.WaveformChannelNumber = number
    channel.ChannelSourceSequence = [
        code(f"2:{table.code(name)}", "MDC", _MEANINGS.get(name, f"Lead {name}"))
    ]
    channel.ChannelSensitivity = 1
    channel.ChannelSensitivityUnitsSequence = [code("uV", "UCUM", _UNITS["uV"])]
    channel.ChannelSensitivityCorrectionFactor = 1
    channel.ChannelBaseline = 0
    channel.ChannelSampleSkew = 0
    channel.WaveformBitsStored = 16
    return channel


def _annotations(measurements: Measurements) -> Iterator["Dataset"]:
    """Each number, then what belongs to it in words, then the findings."""
    for remark in (DERIVED, *measurements.remarks):
        yield _text(remark, REMARKS)
    for number in measurements.numbers:
        if number.value is None:
            words = f"{number.concept.words} not measured: {number.reason or 'reason unknown'}"
            yield _text(words, REMARKS)
            continue
        yield _number(number, number.value)
        if number.se is not None:
            error = f"{rounded(number.se):g} {number.concept.unit}"
            yield _text(f"{number.concept.words}: standard error {error}", REMARKS)
    for finding in measurements.findings:
        yield _text(f"{finding.definition} ({finding.source}): {finding.result}", FINDINGS)


def _number(number: Number, value: float) -> "Dataset":
    """A number under its code, of all leads together."""
    concept = number.concept
    item = _annotation(NUMBERS)
    item.ConceptNameCodeSequence = [
        code(number.key[:16].upper(), OWN_SCHEME, concept.words)
        if concept.mdc is None
        else code(f"2:{concept.mdc}", "MDC", concept.words)
    ]
    item.NumericValue = f"{rounded(value):g}"
    item.MeasurementUnitsCodeSequence = [code(concept.unit, "UCUM", _UNITS[concept.unit])]
    return item


def _text(words: str, group: int) -> "Dataset":
    item = _annotation(group)
    item.UnformattedTextValue = words.encode()[:_LONGEST_TEXT].decode(errors="ignore")
    return item


def _annotation(group: int) -> "Dataset":
    from pydicom.dataset import Dataset

    item = Dataset()
    item.ReferencedWaveformChannels = [1, 0]  # of the one multiplex group, every channel
    item.AnnotationGroupNumber = group
    return item

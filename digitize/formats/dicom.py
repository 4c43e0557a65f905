"""A DICOM 12-lead ECG waveform object, NAME.dcm, in steps of 1 µV.

The waveform is marked DERIVED. Where nothing was printed or read stands the Waveform Padding Value.
Patient and study stay anonymous. The standard demands an acquisition time, which no page tells
reliably: a placeholder stands there, and the object says that dates were removed. The same
tracing gives the same identifiers and the same bytes.

References
----------
DICOM PS3.3 A.34.3 (12-lead ECG), C.10.9 (waveform), C.7.1.1 (patient); PS3.16 CID 3001 (leads);
PS3.5 B.2 (identifiers under 2.25).
"""

import hashlib
import io
import uuid
from typing import TYPE_CHECKING

import numpy as np

from digitize import program_version
from digitize.errors import CannotExport, UnreadableFile
from digitize.formats.leads import NO_SAMPLE, LeadTable, lead_table
from digitize.tracing import Tracing

if TYPE_CHECKING:
    from pydicom.dataset import Dataset

TWELVE_LEAD_ECG = "1.2.840.10008.5.1.4.1.1.9.1.1"
MOST_CHANNELS = 13  # PS3.3 A.34.3.4.4
PLACEHOLDER = ("19000101", "000000")

_MEANINGS = {
    "aVR": "aVR, augmented voltage, right",
    "aVL": "aVL, augmented voltage, left",
    "aVF": "aVF, augmented voltage, foot",
}


def files(tracing: Tracing, stem: str) -> dict[str, bytes]:
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
    try:
        from pydicom.dataset import Dataset, FileMetaDataset
        from pydicom.uid import UID, ExplicitVRLittleEndian
    except ImportError:
        raise UnreadableFile(
            "writing DICOM needs one more package: install millivellum[dicom]"
        ) from None
    content = hashlib.sha256(table.steps.tobytes() + repr(table.names).encode()).hexdigest()
    name = f"{tracing.source.sha256}/{tracing.source.page}/{content}"
    dataset = Dataset()
    _identify(dataset, name)
    dataset.WaveformSequence = [_group(table)]
    dataset.file_meta = FileMetaDataset()
    dataset.file_meta.MediaStorageSOPClassUID = UID(TWELVE_LEAD_ECG)
    dataset.file_meta.MediaStorageSOPInstanceUID = dataset.SOPInstanceUID
    dataset.file_meta.TransferSyntaxUID = ExplicitVRLittleEndian
    buffer = io.BytesIO()
    dataset.save_as(buffer, enforce_file_format=True)
    return {f"{stem}.dcm": buffer.getvalue()}


def _identify(dataset: "Dataset", name: str) -> None:
    """Everything but the waveform: PS3.3 modules of patient, study, series, equipment, instance."""
    for keyword in (
        *("PatientName", "PatientID", "PatientBirthDate", "PatientSex"),
        *("StudyDate", "StudyTime", "StudyID", "AccessionNumber", "ReferringPhysicianName"),
        "AcquisitionContextSequence",
    ):
        setattr(dataset, keyword, [] if keyword.endswith("Sequence") else "")
    dataset.PatientIdentityRemoved = "YES"
    dataset.DeidentificationMethod = "Header of the page not read"
    dataset.LongitudinalTemporalInformationModified = "REMOVED"
    dataset.StudyInstanceUID = _uid(f"study {name}")
    dataset.SeriesInstanceUID = _uid(f"series {name}")
    dataset.SOPInstanceUID = _uid(name)
    dataset.SOPClassUID = TWELVE_LEAD_ECG
    dataset.Modality = "ECG"
    dataset.SeriesDescription = "Derived from a scanned document, no diagnosis"
    dataset.SeriesNumber = dataset.InstanceNumber = 1
    dataset.Manufacturer = "millivellum"
    dataset.ManufacturerModelName = "millivellum"
    dataset.DeviceSerialNumber = "none"
    dataset.SoftwareVersions = program_version()
    dataset.ContentDate, dataset.ContentTime = PLACEHOLDER
    dataset.AcquisitionDateTime = "".join(PLACEHOLDER)


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
        _code(f"2:{table.code(name)}", "MDC", _MEANINGS.get(name, f"Lead {name}"))
    ]
    channel.ChannelSensitivity = 1
    channel.ChannelSensitivityUnitsSequence = [_code("uV", "UCUM", "microvolt")]
    channel.ChannelSensitivityCorrectionFactor = 1
    channel.ChannelBaseline = 0
    channel.ChannelSampleSkew = 0
    channel.WaveformBitsStored = 16
    return channel


def _code(value: str, scheme: str, meaning: str) -> "Dataset":
    """A coded entry (PS3.3 8.8)."""
    from pydicom.dataset import Dataset

    code = Dataset()
    code.CodeValue, code.CodingSchemeDesignator, code.CodeMeaning = value, scheme, meaning
    return code


def _uid(name: str) -> str:
    """An identifier of its own for that name, the same each time."""
    return f"2.25.{uuid.uuid5(uuid.NAMESPACE_OID, name).int}"

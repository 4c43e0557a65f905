"""Rules for the DICOM objects that are written, from the standard's attribute tables.

Modules of DICOM PS3.3 (2024) as named beside each, written down from memory of their tables: what
must be there (type 1), what may be empty (2), what must be there under a condition (1C), and which
values are defined. Attributes of type 3 are optional and may hold anything that their value
representation allows, which pydicom checks.
"""

from collections.abc import Callable
from dataclasses import dataclass
from io import BytesIO
from typing import Any

import pydicom
from pydicom.dataset import Dataset

ECG = "1.2.840.10008.5.1.4.1.1.9.1.1"
SECONDARY_CAPTURE = "1.2.840.10008.5.1.4.1.1.7"
PDF = "1.2.840.10008.5.1.4.1.1.104.1"


@dataclass(frozen=True)
class Rule:
    """One row of a table. `needed` is the condition of 1C and 2C; `items` rules of a sequence."""

    keyword: str
    type: str
    values: tuple[Any, ...] = ()
    needed: Callable[[Dataset], bool] = lambda dataset: True
    items: tuple["Rule", ...] = ()


CODE = (  # 8.8, the basic attributes
    Rule("CodeValue", "1"),
    Rule("CodingSchemeDesignator", "1"),
    Rule("CodeMeaning", "1"),
)
COMMON = (
    *(Rule(k, "2") for k in ("PatientName", "PatientID", "PatientBirthDate")),  # C.7.1.1
    Rule("PatientSex", "2", ("", "M", "F", "O")),
    Rule("PatientIdentityRemoved", "3", ("YES", "NO")),
    Rule(
        "DeidentificationMethod",
        "1C",
        needed=lambda d: d.get("PatientIdentityRemoved") == "YES",
    ),
    Rule("StudyInstanceUID", "1"),  # C.7.2.1
    *(
        Rule(k, "2")
        for k in ("StudyDate", "StudyTime", "ReferringPhysicianName", "StudyID", "AccessionNumber")
    ),
    Rule("SeriesInstanceUID", "1"),  # C.7.3.1
    Rule("SeriesNumber", "2"),
    Rule("Manufacturer", "2"),  # C.7.5.1
    Rule("SOPClassUID", "1"),  # C.12.1
    Rule("SOPInstanceUID", "1"),
    Rule("SpecificCharacterSet", "3", ("ISO_IR 192",)),
    Rule("LongitudinalTemporalInformationModified", "3", ("UNMODIFIED", "MODIFIED", "REMOVED")),
)
SC_EQUIPMENT = (  # C.8.6.1
    Rule("ConversionType", "1", ("DV", "DI", "DF", "WSD", "SD", "SI", "DRW", "SYN")),
)
CHANNEL = (  # C.10.9, table of channel definitions
    Rule("ChannelSourceSequence", "1", items=CODE),
    Rule("ChannelSensitivity", "1C"),
    Rule("ChannelSensitivityUnitsSequence", "1C", items=CODE),
    Rule("ChannelSensitivityCorrectionFactor", "1C"),
    Rule("ChannelBaseline", "1C"),
    Rule("ChannelSampleSkew", "1C", needed=lambda d: "ChannelTimeSkew" not in d),
    Rule("WaveformBitsStored", "1", (16,)),
)
WAVEFORM = (  # C.10.9 and A.34.3.4
    Rule("WaveformOriginality", "1", ("ORIGINAL", "DERIVED")),
    Rule("NumberOfWaveformChannels", "1", tuple(range(1, 14))),
    Rule("NumberOfWaveformSamples", "1"),
    Rule("SamplingFrequency", "1"),
    Rule("ChannelDefinitionSequence", "1", items=CHANNEL),
    Rule("WaveformBitsAllocated", "1", (16,)),
    Rule("WaveformSampleInterpretation", "1", ("SS",)),
    Rule("WaveformPaddingValue", "1C", needed=lambda d: False),
    Rule("WaveformData", "1"),
)
ANNOTATION = (  # C.10.10
    Rule("UnformattedTextValue", "1C", needed=lambda d: "ConceptNameCodeSequence" not in d),
    Rule(
        "ConceptNameCodeSequence",
        "1C",
        needed=lambda d: "UnformattedTextValue" not in d,
        items=CODE,
    ),
    Rule(
        "NumericValue",
        "1C",
        needed=lambda d: "ConceptNameCodeSequence" in d and "TemporalRangeType" not in d,
    ),
    Rule("MeasurementUnitsCodeSequence", "1C", needed=lambda d: "NumericValue" in d, items=CODE),
    Rule("ReferencedWaveformChannels", "1"),
    Rule("AnnotationGroupNumber", "3"),
)
TABLES: dict[str, tuple[Rule, ...]] = {
    ECG: (  # A.34.3
        *COMMON,
        Rule("Modality", "1", ("ECG",)),
        Rule("InstanceNumber", "1"),  # C.10.8
        Rule("ContentDate", "1"),
        Rule("ContentTime", "1"),
        Rule("AcquisitionDateTime", "1"),
        Rule("AcquisitionContextSequence", "2"),  # C.7.6.14
        Rule("WaveformSequence", "1", items=WAVEFORM),
        Rule("WaveformAnnotationSequence", "1C", needed=lambda d: False, items=ANNOTATION),
    ),
    SECONDARY_CAPTURE: (  # A.8.1
        *COMMON,
        *SC_EQUIPMENT,
        Rule("Modality", "1", ("OT",)),
        Rule("InstanceNumber", "2"),  # C.7.6.1
        Rule("PatientOrientation", "2"),
        Rule("BurnedInAnnotation", "3", ("YES", "NO")),
        Rule("SamplesPerPixel", "1", (1, 3)),  # C.7.6.3
        Rule("PhotometricInterpretation", "1", ("MONOCHROME2", "RGB")),
        Rule("PlanarConfiguration", "1C", (0,), needed=lambda d: d.SamplesPerPixel > 1),
        *(Rule(k, "1") for k in ("Rows", "Columns")),
        Rule("BitsAllocated", "1", (8,)),
        Rule("BitsStored", "1", (8,)),
        Rule("HighBit", "1", (7,)),
        Rule("PixelRepresentation", "1", (0,)),
        Rule("PixelData", "1"),
    ),
    PDF: (  # A.45.1
        *COMMON,
        *SC_EQUIPMENT,
        Rule("Modality", "1", ("DOC", "OT")),  # C.24.1
        Rule("InstanceNumber", "1"),  # C.24.2
        *(Rule(k, "2") for k in ("ContentDate", "ContentTime", "AcquisitionDateTime")),
        Rule("BurnedInAnnotation", "1", ("YES", "NO")),
        Rule("DocumentTitle", "2"),
        Rule("ConceptNameCodeSequence", "2", items=CODE),
        Rule("VerificationFlag", "3", ("UNVERIFIED", "VERIFIED")),
        Rule("MIMETypeOfEncapsulatedDocument", "1", ("application/pdf",)),
        Rule("EncapsulatedDocument", "1"),
        Rule("EncapsulatedDocumentLength", "3"),
    ),
}


def violations(content: bytes) -> list[str]:
    """What a file has against the rules; nothing for one that keeps them."""
    pydicom.config.settings.reading_validation_mode = pydicom.config.RAISE
    try:
        dataset = pydicom.dcmread(BytesIO(content))
        dataset.walk(lambda item, element: element.value)  # each value through its representation
    finally:
        pydicom.config.settings.reading_validation_mode = pydicom.config.WARN
    found = against(dataset, TABLES[dataset.SOPClassUID])
    return found + _of_file(dataset) + _of_kind(dataset)


def against(dataset: Dataset, rules: tuple[Rule, ...], place: str = "") -> list[str]:
    """What attributes have against the rows of a table."""
    found = []
    for rule in rules:
        where = f"{place}{rule.keyword}"
        present = rule.keyword in dataset
        if not present:
            if rule.type in ("1", "2") or (rule.type in ("1C", "2C") and rule.needed(dataset)):
                found.append(f"{where} is missing")
            continue
        value = dataset[rule.keyword].value
        empty = value is None or (hasattr(value, "__len__") and len(value) == 0)
        if empty and rule.type in ("1", "1C"):
            found.append(f"{where} is empty")
        if not empty and rule.values and value not in rule.values:
            found.append(f"{where} is {value!r}")
        if rule.items and not empty:
            for number, item in enumerate(value):
                found += against(item, rule.items, f"{where}[{number}].")
    return found


def _of_file(dataset: Dataset) -> list[str]:
    """PS3.10 7.1, PS3.5 9: file meta and identifiers."""
    meta, found = dataset.file_meta, []
    if meta.MediaStorageSOPClassUID != dataset.SOPClassUID:
        found.append("meta and object are of different classes")
    if meta.MediaStorageSOPInstanceUID != dataset.SOPInstanceUID:
        found.append("meta and object have different identifiers")
    for keyword in ("StudyInstanceUID", "SeriesInstanceUID", "SOPInstanceUID"):
        if not dataset[keyword].value.is_valid or len(dataset[keyword].value) > 64:
            found.append(f"{keyword} is no identifier")
    return found


def _of_kind(dataset: Dataset) -> list[str]:
    """What the values of one object must be to each other."""
    found = []
    if dataset.SOPClassUID == ECG:
        group = dataset.WaveformSequence[0]
        wanted = group.NumberOfWaveformChannels * group.NumberOfWaveformSamples * 2
        if len(group.WaveformData) != wanted:
            found.append("WaveformData is not as long as its numbers say")
        if len(group.ChannelDefinitionSequence) != group.NumberOfWaveformChannels:
            found.append("there is not one definition for each channel")
        if not 200 <= group.SamplingFrequency <= 1000:  # A.34.3.4.3
            found.append("SamplingFrequency is out of bounds")
    if dataset.SOPClassUID == SECONDARY_CAPTURE:
        size = dataset.Rows * dataset.Columns * dataset.SamplesPerPixel
        if len(dataset.PixelData) != size + size % 2:
            found.append("PixelData is not as long as its numbers say")
    if dataset.SOPClassUID == PDF:
        document = dataset.EncapsulatedDocument
        if not document.startswith(b"%PDF-") or len(document) % 2:
            found.append("EncapsulatedDocument is no PDF of even length")
        if len(document) - dataset.EncapsulatedDocumentLength not in (0, 1):
            found.append("EncapsulatedDocumentLength is another")
    return found

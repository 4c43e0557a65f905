"""What the DICOM objects written here have in common: identity, study, series, equipment.

All objects of one page belong to one study. Patient and study stay anonymous. Dates are unknown;
where the standard demands one a placeholder stands, and the object says that dates were removed.
The same content gives the same identifiers and the same bytes.

References
----------
DICOM PS3.3 C.7.1.1 (patient), C.7.2.1 (study), C.7.3.1 (series), C.7.5.1 (equipment), C.12.1 (SOP
common), 8.8 (coded entries); PS3.5 B.2 (identifiers under 2.25); PS3.10 7.1 (file meta).
"""

import io
import uuid
from typing import TYPE_CHECKING

from digitize import program_version
from digitize.errors import needs_extra
from digitize.tracing import PageSource

if TYPE_CHECKING:
    from pydicom.dataset import Dataset

PLACEHOLDER = ("19000101", "000000")


def new_object(source: PageSource, sop_class: str, modality: str, content: str) -> "Dataset":
    """Return an object with everything but what is its own.

    Parameters
    ----------
    source : PageSource
        The page; its hash and number name the study.
    sop_class : str
        What kind of object it is.
    modality : str
        Of its series.
    content : str
        A hash of what it holds, from which its identifier is made.

    Raises
    ------
    UnreadableFile
        The package that writes DICOM is not installed.
    """
    try:
        from pydicom.dataset import Dataset
        from pydicom.uid import UID
    except ImportError:
        raise needs_extra("writing DICOM", "dicom") from None
    page = f"{source.sha256}/{source.page}"
    dataset = Dataset()
    dataset.SpecificCharacterSet = "ISO_IR 192"
    for keyword in (
        *("PatientName", "PatientID", "PatientBirthDate", "PatientSex"),
        *("StudyDate", "StudyTime", "StudyID", "AccessionNumber", "ReferringPhysicianName"),
    ):
        setattr(dataset, keyword, "")
    dataset.StudyInstanceUID = _uid(f"study {page}")
    dataset.SeriesInstanceUID = _uid(f"series {sop_class} {page}/{content}")
    dataset.SOPInstanceUID = _uid(f"{sop_class} {page}/{content}")
    dataset.SOPClassUID = UID(sop_class)
    dataset.Modality = modality
    dataset.SeriesDescription = "Derived from a scanned document, no diagnosis"
    dataset.SeriesNumber = dataset.InstanceNumber = 1
    dataset.Manufacturer = dataset.ManufacturerModelName = "millivellum"
    dataset.DeviceSerialNumber = "none"
    dataset.SoftwareVersions = program_version()
    dataset.ContentDate, dataset.ContentTime = PLACEHOLDER
    return dataset


def without_person(dataset: "Dataset") -> None:
    """Say that nothing in the object names a person or a day; the scan itself may not."""
    dataset.PatientIdentityRemoved = "YES"
    dataset.DeidentificationMethod = "Header of the page not read"
    dataset.LongitudinalTemporalInformationModified = "REMOVED"


def to_bytes(dataset: "Dataset") -> bytes:
    """The object as a file (PS3.10), explicit little endian."""
    from pydicom.dataset import FileMetaDataset
    from pydicom.uid import ExplicitVRLittleEndian

    dataset.file_meta = FileMetaDataset()
    dataset.file_meta.MediaStorageSOPClassUID = dataset.SOPClassUID
    dataset.file_meta.MediaStorageSOPInstanceUID = dataset.SOPInstanceUID
    dataset.file_meta.TransferSyntaxUID = ExplicitVRLittleEndian
    buffer = io.BytesIO()
    dataset.save_as(buffer, enforce_file_format=True)
    return buffer.getvalue()


def code(value: str, scheme: str, meaning: str) -> "Dataset":
    """A coded entry."""
    from pydicom.dataset import Dataset

    entry = Dataset()
    entry.CodeValue, entry.CodingSchemeDesignator, entry.CodeMeaning = value, scheme, meaning
    return entry


def _uid(name: str) -> str:
    """An identifier of its own for that name, the same each time."""
    return f"2.25.{uuid.uuid5(uuid.NAMESPACE_OID, name).int}"

"""A PDF in a DICOM object, NAME.report.dcm: the report of one page, unverified.

References
----------
DICOM PS3.3 A.45.1 (encapsulated PDF), C.24.1 (series), C.24.2 (document), C.8.6.1 (equipment).
"""

import hashlib

from digitize.formats.dicom_object import PLACEHOLDER, code, new_object, to_bytes, without_person
from digitize.tracing import PageSource

ENCAPSULATED_PDF = "1.2.840.10008.5.1.4.1.1.104.1"
_ECG_STUDY = ("11524-6", "LN", "EKG study")  # LOINC, from memory


def files(pdf: bytes, source: PageSource, stem: str, *, shows_page: bool) -> dict[str, bytes]:
    """One DICOM file.

    Parameters
    ----------
    pdf : bytes
        The document.
    source : PageSource
        The page that it speaks of.
    stem : str
        Name of the file without its ending.
    shows_page : bool
        Whether the page is pictured in it, with whatever is written there.

    Raises
    ------
    UnreadableFile
        The package that writes DICOM is not installed.
    """
    content = hashlib.sha256(pdf).hexdigest()
    dataset = new_object(source, ENCAPSULATED_PDF, "DOC", content)
    if not shows_page:
        without_person(dataset)
    dataset.ConversionType = "WSD"  # made by a workstation
    dataset.AcquisitionDateTime = "".join(PLACEHOLDER)
    dataset.BurnedInAnnotation = "YES" if shows_page else "NO"
    dataset.DocumentTitle = "ECG reading, no diagnosis"
    dataset.ConceptNameCodeSequence = [code(*_ECG_STUDY)]
    dataset.VerificationFlag = "UNVERIFIED"
    dataset.MIMETypeOfEncapsulatedDocument = "application/pdf"
    dataset.EncapsulatedDocument = pdf + b"\0" * (len(pdf) % 2)
    dataset.EncapsulatedDocumentLength = len(pdf)
    return {f"{stem}.report.dcm": to_bytes(dataset)}

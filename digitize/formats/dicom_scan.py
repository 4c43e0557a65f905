"""The scan itself as a DICOM secondary capture, NAME.scan.dcm: what the tracing was read from.

Header and all: the object says that writing is burned into the picture. It belongs to the same
study as the other objects of its page.

References
----------
DICOM PS3.3 A.8.1 (secondary capture image), C.8.6.1 and C.8.6.2 (equipment, image), C.7.6.1
(general image), C.7.6.3 (pixels).
"""

import hashlib

import numpy as np

from digitize.formats.dicom_object import new_object, to_bytes
from digitize.pages import Page

SECONDARY_CAPTURE = "1.2.840.10008.5.1.4.1.1.7"
_MM_PER_INCH = 25.4


def files(page: Page, stem: str) -> dict[str, bytes]:
    """One DICOM file.

    Raises
    ------
    UnreadableFile
        The package that writes DICOM is not installed.
    """
    pixels = np.ascontiguousarray(page.pixels)
    content = hashlib.sha256(pixels.tobytes() + repr(pixels.shape).encode()).hexdigest()
    dataset = new_object(page.source, SECONDARY_CAPTURE, "OT", content)
    dataset.ConversionType = "SD"  # scanned document
    dataset.ImageType = ["DERIVED", "SECONDARY"]
    dataset.BurnedInAnnotation = "YES"
    dataset.PatientOrientation = ""
    if page.source.dpi is not None:
        across, down = (_MM_PER_INCH / dpi for dpi in page.source.dpi)
        dataset.NominalScannedPixelSpacing = [f"{down:.6f}", f"{across:.6f}"]
    dataset.SamplesPerPixel = 1 if pixels.ndim == 2 else 3
    dataset.PhotometricInterpretation = "MONOCHROME2" if pixels.ndim == 2 else "RGB"
    if pixels.ndim == 3:
        dataset.PlanarConfiguration = 0
    dataset.Rows, dataset.Columns = pixels.shape[:2]
    dataset.BitsAllocated = dataset.BitsStored = 8
    dataset.HighBit, dataset.PixelRepresentation = 7, 0
    data = pixels.tobytes()
    dataset.add_new((0x7FE0, 0x0010), "OB", data + b"\0" * (len(data) % 2))  # Pixel Data
    return {f"{stem}.scan.dcm": to_bytes(dataset)}

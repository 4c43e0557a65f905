"""Pictures in a DICOM file: secondary capture of a scanned chart (PS3.3 A.8).

The scale comes from Nominal Scanned Pixel Spacing (PS3.3 C.8.6.1) or Pixel Spacing. A DICOM file
without pixels may be an ECG that was digital all along: the error says so.
"""

import struct
import warnings
from collections.abc import Iterator
from typing import BinaryIO

import numpy as np

from digitize.errors import UnreadableFile, needs_extra
from digitize.pictures import Loader, Picture, check_size, credible_dpi, plain_pixels

# What pydicom is known to raise on damaged files (found by cutting and flipping bytes).
_DAMAGE = (
    OSError,
    EOFError,
    ValueError,
    TypeError,
    KeyError,
    AttributeError,
    IndexError,
    OverflowError,
    RuntimeError,  # NotImplementedError is one
    struct.error,
)


def open_dicom(file: BinaryIO, *, max_megapixels: float) -> Iterator[Loader]:
    """One loader per frame of a DICOM file; a loader raises `UnreadableFile` for its frame alone.

    Raises
    ------
    UnreadableFile
        The extra `dicom` is not installed, the file is damaged or holds no picture.
    """
    try:
        import pydicom
    except ImportError:
        raise needs_extra("a DICOM file", "dicom", "save it as PNG") from None
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # on odd values of attributes that are not used here
            dataset = pydicom.dcmread(file)
            holds_picture = "PixelData" in dataset
            frames = int(dataset.get("NumberOfFrames") or 1)
            size = int(dataset.get("Columns") or 0), int(dataset.get("Rows") or 0)
    except (pydicom.errors.InvalidDicomError, pydicom.errors.BytesLengthException, *_DAMAGE):
        raise _damage() from None
    except MemoryError:  # an element says that it is thousands of megabytes long
        raise _damage() from None
    if not holds_picture:
        raise UnreadableFile(
            "this DICOM file holds no picture: if it is a digital ECG, give it to measure"
        )
    for index in range(frames):

        def load(index: int = index) -> Picture:
            check_size(size, max_megapixels)
            try:
                with warnings.catch_warnings():
                    warnings.simplefilter("ignore")
                    pixels = _eight_bit(dataset, index)
                    return Picture(plain_pixels(pixels), credible_dpi(_dpi(dataset), *size))
            except _DAMAGE:
                raise _damage() from None

        yield load


def _eight_bit(dataset, index: int) -> np.ndarray:  # type: ignore[no-untyped-def]
    """One frame as 8-bit grey (0 black) or RGB."""
    from pydicom.pixels import pixel_array

    pixels = pixel_array(dataset, index=index)  # colour comes out as RGB
    if dataset.PhotometricInterpretation == "PALETTE COLOR":
        from pydicom.pixels import apply_color_lut

        pixels = apply_color_lut(pixels, dataset)
        return (pixels >> 8).astype(np.uint8) if pixels.dtype == np.uint16 else pixels
    if int(dataset.get("PixelRepresentation") or 0):
        raise ValueError("signed samples are not those of a picture of paper")
    pixels = (pixels.astype(np.uint32) * 255 // (2 ** int(dataset.BitsStored) - 1)).astype(np.uint8)
    return 255 - pixels if dataset.PhotometricInterpretation == "MONOCHROME1" else pixels


def _dpi(dataset) -> tuple[float, float] | None:  # type: ignore[no-untyped-def]
    """Dots per inch across and down from the spacing in mm, which DICOM gives down first."""
    spacing = dataset.get("NominalScannedPixelSpacing") or dataset.get("PixelSpacing")
    if not spacing or min(spacing) <= 0:
        return None
    down_mm, across_mm = (float(value) for value in spacing)
    return 25.4 / across_mm, 25.4 / down_mm


def _damage() -> UnreadableFile:
    """The error for a file that breaks off or that no decoder here understands."""
    return UnreadableFile(
        "this DICOM picture is damaged or coded in a way that cannot be read: save it as PNG"
    )

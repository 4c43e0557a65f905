"""Pixels of one picture file: PNG, JPEG, TIFF, BMP, GIF, WebP and HEIC.

Every picture leaves here as 8-bit grey or RGB on white, upright by its orientation tag, with the
resolution the file states where that can be true. Sizes are read from the header and checked
before anything is decoded. A TIFF gives one picture per page (its thumbnails and masks left out);
an animated GIF, PNG or WebP and the second pictures of a phone's JPEG or HEIC are not pages: the
first or main picture alone counts.
"""

import os
import struct
import sys
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import BinaryIO

import numpy as np
from PIL import (  # every format of FORMATS that Pillow does not load by itself
    BmpImagePlugin,  # noqa: F401
    Image,
    ImageOps,
    TiffImagePlugin,
    WebPImagePlugin,  # noqa: F401
)

from digitize.drawing import Drawing
from digitize.errors import UnreadableFile, needs_extra

FORMATS = ("PNG", "JPEG", "TIFF", "BMP", "GIF", "WEBP")
CREDIBLE_DPI = (50.0, 2400.0)
TALLEST_CHART_MM = 450.0  # ISO A2 is 420 mm on its short side: no chart paper is broader than that

_ORIENTATION = 274  # TIFF 6.0 / Exif tag
_SIDEWAYS = (5, 6, 7, 8)  # orientations that exchange width and height
_NEW_SUBFILE_TYPE = 254  # TIFF 6.0 tag: bit 0 a thumbnail, bit 2 a transparency mask
_PHOTOMETRIC = 262  # TIFF 6.0 tag: 0 means that zero is white

# What Pillow's readers are known to raise on damaged files (found by cutting and flipping bytes).
_DAMAGE = (
    OSError,
    SyntaxError,
    ValueError,
    TypeError,
    KeyError,
    IndexError,
    EOFError,
    OverflowError,
    ZeroDivisionError,
    struct.error,
    Image.DecompressionBombError,
)


@dataclass(frozen=True, eq=False)
class Picture:
    """Pixels, uint8, (rows, cols) or (rows, cols, 3), and dpi (across, down) where it is known.

    `drawing` holds the lines and words of a page that draws them.
    """

    pixels: np.ndarray
    dpi: tuple[float, float] | None
    drawing: Drawing | None = None


Loader = Callable[[], Picture]


def open_pictures(file: BinaryIO, *, max_megapixels: float) -> Iterator[Loader]:
    """One loader per page of a picture file; a loader raises `UnreadableFile` for its page alone.

    Parameters
    ----------
    file : binary file, open and at its beginning
    max_megapixels : float
        Larger pages are refused before they are decoded.
    """
    image = _open(file)
    yield lambda: _load(image, max_megapixels)
    if not isinstance(image, TiffImagePlugin.TiffImageFile):
        return
    number = 0
    while True:
        number += 1
        try:
            with _quiet():
                image.seek(number)
            page = image.tag_v2.get(_NEW_SUBFILE_TYPE, 0) & 0b101 == 0
        except EOFError:
            return
        except _DAMAGE:
            yield _damaged
            return  # a TIFF is a chain: what follows a broken link cannot be found
        if page:
            yield lambda number=number: _load(image, max_megapixels, number)  # type: ignore[misc]


def open_heic(file: BinaryIO, *, max_megapixels: float) -> Iterator[Loader]:
    """The main picture of a HEIC file, as one loader.

    Raises
    ------
    UnreadableFile
        The extra `heic` is not installed, or the file is damaged.
    """
    try:
        import pillow_heif
    except ImportError:
        raise needs_extra("a HEIC photo", "heic", "save it as JPEG") from None
    try:
        heif = pillow_heif.open_heif(file, convert_hdr_to_8bit=True)
    except (RuntimeError, *_DAMAGE):  # RuntimeError: the decoder's own safety limits
        raise _damage() from None

    def load() -> Picture:
        try:
            check_size(heif.size, max_megapixels)
            return as_picture(heif.to_pillow())
        except (RuntimeError, *_DAMAGE):
            raise _damage() from None

    yield load


def check_size(size_px: tuple[int, int], max_megapixels: float) -> None:
    """Raise `UnreadableFile` where a page of that width and height is too large, or nothing."""
    width_px, height_px = size_px
    if width_px < 1 or height_px < 1:
        raise UnreadableFile("the page has no pixels")
    megapixels = width_px * height_px / 1e6
    if megapixels > max_megapixels:
        raise UnreadableFile(
            f"{width_px} x {height_px} pixels are {megapixels:.0f} megapixels, the limit is "
            f"{max_megapixels:g}: scan at a lower resolution or raise --max-megapixels"
        )


def credible_dpi(
    dpi: tuple[float, float] | None, width_px: int, height_px: int
) -> tuple[float, float] | None:
    """The stated dpi as floats, None where no chart can have it (camera and screen defaults)."""
    if dpi is None:
        return None
    across, down = float(dpi[0]), float(dpi[1])
    if not all(CREDIBLE_DPI[0] <= value <= CREDIBLE_DPI[1] for value in (across, down)):
        return None
    if min(width_px / across, height_px / down) * 25.4 > TALLEST_CHART_MM:
        return None
    return across, down


def as_picture(image: Image.Image) -> Picture:
    """The current frame of a Pillow image: turned upright, 8-bit, on white, with credible dpi."""
    dpi = image.info.get("dpi")
    orientation = image.getexif().get(_ORIENTATION, 1)  # TIFF forgets it when loaded
    image.load()
    image = ImageOps.exif_transpose(image)
    if dpi is not None and orientation in _SIDEWAYS:
        dpi = (dpi[1], dpi[0])
    return Picture(plain_pixels(_eight_bit(image)), credible_dpi(dpi, *image.size))


def plain_pixels(pixels: np.ndarray) -> np.ndarray:
    """The same pixels, grey (rows, cols) where the three channels are equal everywhere."""
    if pixels.ndim == 3 and all(
        np.array_equal(pixels[..., 0], pixels[..., channel]) for channel in (1, 2)
    ):
        return np.ascontiguousarray(pixels[..., 0])
    return pixels


def _open(file: BinaryIO) -> Image.Image:
    """The file as a Pillow image, nothing decoded yet."""
    try:
        with _quiet():
            return Image.open(file, formats=FORMATS)
    except Image.UnidentifiedImageError:
        raise UnreadableFile(
            "this is no picture or document of a known kind: give a scan or photo as PNG, "
            "JPEG, TIFF, PDF, HEIC or DICOM"
        ) from None
    except Image.DecompressionBombError:
        raise UnreadableFile("the picture is far too large: scan it at 600 dpi or less") from None
    except _DAMAGE:
        raise _damage() from None


def _load(image: Image.Image, max_megapixels: float, number: int = 0) -> Picture:
    """Page `number` of an open file."""
    try:
        with _quiet():
            if image.format == "TIFF":
                image.seek(number)
            check_size(image.size, max_megapixels)
            return as_picture(image)
    except _DAMAGE:
        raise _damage() from None


@contextmanager
def _quiet() -> Iterator[None]:
    """No warnings: those on size (ours is stricter), on metadata, and what libtiff itself prints.

    libtiff writes to the file number of stderr, past Python: it is turned away for that while.
    """
    sys.stderr.flush()
    kept, nowhere = os.dup(2), os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(nowhere, 2)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield
    finally:
        os.dup2(kept, 2)
        os.close(kept)
        os.close(nowhere)


def _eight_bit(image: Image.Image) -> np.ndarray:
    """Pixels of a loaded Pillow image as 8-bit grey or RGB, what is transparent on white."""
    mode = image.mode
    if mode.startswith("I;16"):
        grey = (np.asarray(image) >> 8).astype(np.uint8)
        tags = getattr(image, "tag_v2", {})
        return 255 - grey if tags.get(_PHOTOMETRIC) == 0 else grey
    if mode in ("I", "F", "LAB"):
        raise UnreadableFile(
            f"its pixels are of a kind that no scanner writes (mode {mode}): save it as 8-bit PNG"
        )
    if mode in ("RGBA", "LA", "PA", "RGBa", "La") or "transparency" in image.info:
        image = image.convert("RGBA")
        white = Image.new("RGBA", image.size, "white")
        return np.asarray(Image.alpha_composite(white, image).convert("RGB"))
    return np.asarray(image.convert("L" if mode in ("1", "L") else "RGB"))


def _damage() -> UnreadableFile:
    """The error for a file that breaks off or contradicts itself."""
    return UnreadableFile("the file is damaged or incomplete: copy or scan it again")


def _damaged() -> Picture:
    """A loader for a page that is known to be broken."""
    raise _damage()

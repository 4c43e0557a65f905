"""Pages of a PDF as pixels.

A scanner's PDF page is one image: that image is taken at its own resolution, not resampled, once
a small rendering of the page has confirmed that it is what the page shows (which settles
cropping, masks and mirror matrices without interpreting them here). Every other page is rendered,
and what it draws as lines and text is kept beside the pixels.
"""

import math
from collections.abc import Iterator
from contextlib import closing
from typing import BinaryIO

import cv2
import numpy as np
import pypdfium2 as pdfium
import pypdfium2.raw as pdfium_c

from digitize.errors import UnreadableFile
from digitize.pdf_paths import read_drawing
from digitize.pictures import Loader, Picture, check_size, credible_dpi, plain_pixels

RENDER_DPI = 300.0  # of pages that are more than one image
MAIN_SHARE = 0.5  # an image that covers less of the page than this is not the page

_POINTS_PER_INCH = 72.0
_PROBE_PX = 64  # both pictures are compared at this size, across and down
_PROBE_LEVELS = 4.0  # grey levels of mean difference that resampling alone may make
_INVISIBLE_TEXT = 3  # text rendering mode of ISO 32000-1, table 106: the OCR layer of a scanner


def open_pdf(file: BinaryIO, *, max_megapixels: float) -> Iterator[Loader]:
    """One loader per page of a PDF; a loader raises `UnreadableFile` for its page alone.

    Parameters
    ----------
    file : binary file, open and at its beginning
    max_megapixels : float
        Larger pages, and pages that hold larger images, are refused before they are decoded.

    Raises
    ------
    UnreadableFile
        The document is encrypted, damaged or has no page.
    """
    try:
        document = pdfium.PdfDocument(file)
    except pdfium.PdfiumError as error:
        raise _refusal(file, error) from None
    with closing(document):
        for number in range(len(document)):
            yield lambda number=number: _load(document, number, max_megapixels)  # type: ignore[misc]


def _refusal(file: BinaryIO, error: pdfium.PdfiumError) -> UnreadableFile:
    """Why a document did not open.

    PDFium sets no code for a document without pages and then repeats that of an earlier failure:
    a password is believed only where the file itself speaks of encryption.
    """
    file.seek(0)
    if error.err_code == pdfium_c.FPDF_ERR_PASSWORD and b"/Encrypt" in file.read():
        return UnreadableFile(
            "the PDF is locked with a password: save a copy without one and give that"
        )
    return UnreadableFile("the PDF is damaged or has no page: export or scan it again")


def _load(document: pdfium.PdfDocument, number: int, max_megapixels: float) -> Picture:
    """One page: its only image where that is the page, else a rendering."""
    try:
        with closing(document[number]) as page:
            images = list(page.get_objects(filter=[pdfium_c.FPDF_PAGEOBJ_IMAGE]))
            for image in images:
                check_size(image.get_px_size(), max_megapixels)
            if len(images) == 1 and _nothing_else(page):
                picture = _only_image(page, images[0])
                if picture is not None:
                    return picture
            return _render(page, max_megapixels)
    except pdfium.PdfiumError:
        raise UnreadableFile("this page of the PDF is damaged: export or scan it again") from None


def _nothing_else(page: pdfium.PdfPage) -> bool:
    """Whether the page draws nothing visible but images."""
    silent = (pdfium_c.FPDF_PAGEOBJ_IMAGE, pdfium_c.FPDF_PAGEOBJ_FORM)
    return all(
        item.type in silent
        or (
            item.type == pdfium_c.FPDF_PAGEOBJ_TEXT
            and pdfium_c.FPDFTextObj_GetTextRenderMode(item) == _INVISIBLE_TEXT
        )
        for item in page.get_objects()
    )


def _only_image(page: pdfium.PdfPage, image: pdfium.PdfImage) -> Picture | None:
    """The image as the page shows it, turned upright; None where that is not certain."""
    left, bottom, right, top = image.get_bounds()
    page_left, page_bottom, page_right, page_top = page.get_cropbox()
    page_width, page_height = page_right - page_left, page_top - page_bottom
    width, height = right - left, top - bottom
    if width * height <= MAIN_SHARE * page_width * page_height or page_width * page_height <= 0:
        return None
    pixels = _pixels(image.get_bitmap())
    quarter_turns = page.get_rotation() // 90  # clockwise

    scale = _PROBE_PX / min(width, height)
    shown = np.rot90(_pixels(page.render(scale=scale)), quarter_turns)
    rows, cols = shown.shape[:2]
    across = np.array([left - page_left, right - page_left]) / page_width * cols
    down = np.array([page_top - top, page_top - bottom]) / page_height * rows
    (c0, c1), (r0, r1) = np.rint(across).astype(int), np.rint(down).astype(int)
    if min(r0, c0) < 0 or r1 > rows or c1 > cols:
        return None  # part of the image lies outside the page
    if not _same(pixels, shown[r0:r1, c0:c1]):
        return None

    dpi = tuple(
        px * _POINTS_PER_INCH / points
        for px, points in zip(image.get_px_size(), (width, height), strict=True)
    )
    if quarter_turns % 2:
        dpi = dpi[::-1]
    pixels = np.ascontiguousarray(np.rot90(pixels, -quarter_turns))
    return Picture(plain_pixels(pixels), credible_dpi(dpi, pixels.shape[1], pixels.shape[0]))


def _render(page: pdfium.PdfPage, max_megapixels: float) -> Picture:
    """The page drawn at `RENDER_DPI` on white."""
    scale = RENDER_DPI / _POINTS_PER_INCH
    width_px, height_px = (math.ceil(points * scale) for points in page.get_size())
    check_size((width_px, height_px), max_megapixels)
    pixels = _pixels(page.render(scale=scale))
    drawing = read_drawing(page, pixels.shape[1], pixels.shape[0])
    return Picture(plain_pixels(pixels), (RENDER_DPI, RENDER_DPI), drawing)


def _pixels(bitmap: pdfium.PdfBitmap) -> np.ndarray:
    """A copy of the bitmap as grey or RGB."""
    pixels = bitmap.to_numpy()
    if pixels.ndim == 3:
        pixels = pixels[..., 0] if pixels.shape[2] == 1 else pixels[..., 2::-1]
    return np.array(pixels, order="C")


def _same(one: np.ndarray, other: np.ndarray) -> bool:
    """Whether two pictures show the same, seen from afar."""
    if min(*one.shape[:2], *other.shape[:2]) < 2:
        return False
    small = [
        cv2.resize(picture, (_PROBE_PX // 2, _PROBE_PX // 2), interpolation=cv2.INTER_AREA)
        for picture in (one, other)
    ]
    grey = [p.mean(axis=2) if p.ndim == 3 else p.astype(float) for p in small]
    return float(np.abs(grey[0] - grey[1]).mean()) < _PROBE_LEVELS

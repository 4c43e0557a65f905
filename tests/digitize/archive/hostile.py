"""Hostile and broken files made by code: whole files of every kind, and seeded damage to them.

The damage is what transfer, storage and malice do: flipped bits in the header or anywhere, a file
cut short, a stretch of zeros, a stretch repeated or left out, bytes of another file within.
"""

import io
import zipfile
import zlib
from collections.abc import Iterator, Mapping
from functools import cache

import numpy as np
from PIL import Image

from digitize.formats import dicom_scan
from digitize.pages import Page
from digitize.tracing import PageSource
from tests.digitize import made_files
from tests.digitize.archive import stand_in as made

HEADER_BYTES = 400
_DRAWING = b"0 0 1 RG 2 w 10 10 m 90 40 l 50 80 l S BT /F 8 Tf 20 20 Td (V1 25 mm/s) Tj ET"


def picture(mode: str = "RGB") -> Image.Image:
    """A page of paper that is not square, its first pixel telling the stand-in to read it."""
    pixels = np.full((120, 200, 3), made.READ, np.uint8)
    pixels[60, 20:160] = 20
    pixels[30:90, 100] = 90
    return Image.fromarray(pixels).convert(mode)


def _saved(form: str, mode: str = "RGB", **options: object) -> bytes:
    buffer = io.BytesIO()
    picture(mode).save(buffer, form, **options)
    return buffer.getvalue()


def _pages(form: str, mode: str = "RGB", **options: object) -> bytes:
    buffer = io.BytesIO()
    first, *rest = [picture(mode).rotate(k) for k in range(3)]
    first.save(buffer, form, save_all=True, append_images=rest, **options)
    return buffer.getvalue()


def _heic() -> bytes:
    import pillow_heif

    buffer = io.BytesIO()
    pillow_heif.from_pillow(picture()).save(buffer, quality=80)
    return buffer.getvalue()


def _dicom() -> bytes:
    source = PageSource("x.png", "0" * 64, 1, 200, 120, (200.0, 200.0))
    page = Page(np.asarray(picture()), source)
    return dicom_scan.files(page, "x")["x.scan.dcm"]


def _zip() -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as archive:
        for number in range(2):
            info = zipfile.ZipInfo(f"in/{number}.png", (2020, 1, 1, 0, 0, 0))
            archive.writestr(info, _saved("PNG", optimize=bool(number)))
    return buffer.getvalue()


def _drawn_pdf() -> bytes:
    return made_files.image_pdf(
        np.asarray(picture()), page_pt=(100, 90), place=b"30 0 0 20 5 60", extra=_DRAWING
    )


@cache
def whole_files() -> Mapping[str, bytes]:
    """A sound file of every kind that is read; the part before the first dot is its ending."""
    return {
        "png": _saved("PNG"),
        "png.16 bit": _saved("PNG", "I;16"),
        "png.palette": _saved("PNG", "P"),
        "png.alpha": _saved("PNG", "RGBA"),
        "png.animated": _pages("PNG"),
        "jpg": _saved("JPEG"),
        "jpg.four inks": _saved("JPEG", "CMYK"),
        "jpg.progressive": _saved("JPEG", progressive=True),
        "tif.lzw pages": _pages("TIFF", compression="tiff_lzw"),
        "tif.fax": _pages("TIFF", "1", compression="group4"),
        "tif.jpeg": _saved("TIFF", compression="jpeg"),
        "bmp": _saved("BMP"),
        "gif.animated": _pages("GIF", "P"),
        "webp": _saved("WEBP"),
        "pdf.scanned": _pages("PDF"),
        "pdf.drawn": _drawn_pdf(),
        "heic": _heic(),
        "dcm": _dicom(),
        "zip": _zip(),
    }


def variants(kind: str, count: int, seed: int = 7) -> Iterator[bytes]:
    """Yield so many damaged copies of a kind, the same ones for the same seed."""
    content = np.frombuffer(whole_files()[kind], np.uint8)
    rng = np.random.default_rng([seed, *kind.encode()])
    for number in range(count):
        yield _DAMAGES[number % len(_DAMAGES)](content.copy(), rng).tobytes()


def cuts(kind: str) -> Iterator[bytes]:
    """Yield a file cut at every tenth of its length."""
    content = whole_files()[kind]
    for tenth in range(1, 10):
        yield content[: len(content) * tenth // 10]


def _flipped(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    where = rng.integers(0, len(content), 4)
    content[where] ^= rng.integers(1, 256, 4).astype(np.uint8)
    return content


def _flipped_header(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    head = content[:HEADER_BYTES]
    content[: len(head)] = _flipped(head.copy(), rng)
    return content


def _flipped_end(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Directories of TIFF, PDF and zip stand there."""
    tail = content[-HEADER_BYTES:]
    content[-len(tail) :] = _flipped(tail.copy(), rng)
    return content


def _stretch(content: np.ndarray, rng: np.random.Generator) -> slice:
    start, stop = sorted(rng.integers(0, len(content), 2).tolist())
    return slice(start, max(start + 1, min(stop, start + 64)))


def _zeroed(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    content[_stretch(content, rng)] = 0
    return content


def _ones(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Lengths and counts become as large as they can be."""
    start = int(rng.integers(0, min(len(content), HEADER_BYTES)))
    content[start : start + 4] = 255
    return content


def _repeated(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    part = _stretch(content, rng)
    return np.concatenate([content[: part.stop], content[part], content[part.stop :]])


def _left_out(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    part = _stretch(content, rng)
    return np.concatenate([content[: part.start], content[part.stop :]])


def _cut(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    return content[: int(rng.integers(1, len(content)))]


def _mixed(content: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """A stretch of another file within this one."""
    kinds = sorted(whole_files())
    other = np.frombuffer(whole_files()[kinds[int(rng.integers(len(kinds)))]], np.uint8)
    part = _stretch(content, rng)
    piece = other[: part.stop - part.start]
    content[part.start : part.start + len(piece)] = piece
    return content


_DAMAGES = (
    _flipped, _flipped_header, _flipped_end, _zeroed, _ones, _repeated, _left_out, _cut, _mixed,
)  # fmt: skip


# ---- single files ----------------------------------------------------------------------------


def _bomb_tiff() -> bytes:
    """A TIFF that promises 60000 x 60000 pixels in one strip (TIFF 6.0, section 2)."""
    buffer = io.BytesIO()
    Image.new("L", (8, 8)).save(buffer, "TIFF")
    content = buffer.getvalue()
    for tag in (b"\x00\x01", b"\x01\x01"):  # ImageWidth, ImageLength, little-endian
        at = content.index(tag + b"\x04\x00\x01\x00\x00\x00") + 8
        content = content[:at] + (60_000).to_bytes(4, "little") + content[at + 4 :]
    return content


def _endless_tiff() -> bytes:
    """A TIFF whose last directory points back to its first (TIFF 6.0, section 2)."""
    content = bytearray(_pages("TIFF", "L"))
    first = place = int.from_bytes(content[4:8], "little")
    while True:
        count = int.from_bytes(content[place : place + 2], "little")
        link = place + 2 + 12 * count
        place = int.from_bytes(content[link : link + 4], "little")
        if place == 0:
            content[link : link + 4] = first.to_bytes(4, "little")
            return bytes(content)


def _bomb_pdf() -> bytes:
    """A PDF whose image states 30000 x 30000 pixels."""
    return made_files.image_pdf(
        np.zeros((4, 4, 3), np.uint8),
        page_pt=(800, 600),
        place=b"800 0 0 600 0 0",
        declared_px=(30_000, 30_000),
    )


def _huge_page_pdf() -> bytes:
    """A PDF whose page is a kilometre wide."""
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 2834645 2834645]>>",
    )


def inflating_pdf() -> bytes:
    """A PDF whose content unpacks to 400 MB of nothing."""
    packed = zlib.compressobj(9)
    data = b"".join([*(packed.compress(b" " * 2**20) for _ in range(400)), packed.flush()])
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 99 99] /Contents 4 0 R>>",
        made_files.stream(b"/Filter/FlateDecode", data),
    )


def _circular_pdf() -> bytes:
    """A PDF whose page tree is its own child."""
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>", b"<</Type/Pages /Kids[2 0 R 2 0 R] /Count 2>>"
    )


def _recursive_form_pdf() -> bytes:
    """A PDF whose form draws itself."""
    form = b"/Type/XObject /Subtype/Form /BBox[0 0 99 99] /Resources<</XObject<</F 5 0 R>>>>"
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 99 99] /Contents 4 0 R"
        b" /Resources<</XObject<</F 5 0 R>>>>>>",
        made_files.stream(b"", b"/F Do"),
        made_files.stream(form, b"/F Do"),
    )


def _countless_pdf() -> bytes:
    """A PDF that says it has two thousand million pages."""
    return made_files.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 2000000000>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 99 99]>>",
    )


def _countless_dicom() -> bytes:
    """A DICOM picture that says it has two thousand million frames."""
    import pydicom

    dataset = pydicom.dcmread(io.BytesIO(_dicom()))
    dataset.NumberOfFrames = 2_000_000_000
    buffer = io.BytesIO()
    dataset.save_as(buffer)
    return buffer.getvalue()


def _long_dicom() -> bytes:
    """A DICOM picture whose pixels say that they are 4 GB long (PS3.5 7.1.2)."""
    content, tag = _dicom(), b"\xe0\x7f\x10\x00OB\0\0"  # Pixel Data, explicit little endian
    at = content.index(tag) + len(tag)
    return content[:at] + b"\xf0\xff\xff\xff" + content[at + 4 :]


def _sliver() -> bytes:
    """A picture of 1 x 30000 pixels."""
    buffer = io.BytesIO()
    Image.new("L", (30_000, 1), made.NO_GRID).save(buffer, "PNG")
    return buffer.getvalue()


def _slip_zip() -> bytes:
    """A zip file whose member wants to be written elsewhere, and holds no picture."""
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w") as archive:
        archive.writestr("../../../slipped.png", b"no picture")
        archive.writestr("/slipped\n.png", b"none either")
    return buffer.getvalue()


def refused_files() -> Mapping[str, bytes]:
    """Files of which nothing can be read, by name."""
    return {
        "bomb.png": made_files.bomb_png(),
        "bomb.tiff": _bomb_tiff(),
        "bomb.pdf": _bomb_pdf(),
        "huge.pdf": _huge_page_pdf(),
        "circular.pdf": _circular_pdf(),
        "countless.dcm": _countless_dicom(),
        "long.dcm": _long_dicom(),
        "locked.pdf": made_files.locked_pdf(),
        "sliver.png": _sliver(),
        "empty.jpg": b"",
        "noise.heic": np.random.default_rng(1).bytes(5000),
        "cut.dcm": bytes(128) + b"DICM\x08\0",
        "slip.zip": _slip_zip(),
    }


def odd_files() -> Mapping[str, bytes]:
    """Files that can be read although something is odd about them."""
    return {
        "absurd dpi.png": _saved("PNG", dpi=(1e6, 1e6)),
        "no dpi.jpg": _saved("JPEG", dpi=(0, 0)),
        "picture called.pdf": _saved("PNG"),
        "document called.jpg": _drawn_pdf(),
        "recursive form.pdf": _recursive_form_pdf(),
        "two\nlines.png": _saved("PNG", optimize=True),
        "endless.tif": _endless_tiff(),
        "countless.pdf": _countless_pdf(),
    }

"""Small files of every kind for the tests of reading, made by code."""

import struct
import zlib
from pathlib import Path

import numpy as np


def paper(rows: int = 30, cols: int = 50, seed: int = 1) -> np.ndarray:
    """An RGB picture, not square and unlike any of its turns: pink paper, a dark bent line."""
    rng = np.random.default_rng(seed)
    pixels = np.full((rows, cols, 3), (250, 220, 215), np.uint8)
    pixels -= rng.integers(0, 6, pixels.shape, np.uint8)
    pixels[rows // 3, : cols // 2] = 20
    pixels[rows // 3 :, cols // 2] = 40
    return pixels


def pdf(*objects: bytes, encrypt: bytes | None = None) -> bytes:
    """A PDF from its numbered objects, the first being the catalogue (ISO 32000-1, 7.5)."""
    body, offsets = b"%PDF-1.4\n", []
    for number, content in enumerate(objects, start=1):
        offsets.append(len(body))
        body += b"%d 0 obj\n%s\nendobj\n" % (number, content)
    table = b"".join(b"%010d 00000 n \n" % offset for offset in offsets)
    trailer = b"<</Size %d /Root 1 0 R %s>>" % (len(offsets) + 1, encrypt or b"")
    return body + b"xref\n0 %d\n0000000000 65535 f \n%strailer\n%s\nstartxref\n%d\n%%%%EOF" % (
        len(offsets) + 1,
        table,
        trailer,
        len(body),
    )


def stream(entries: bytes, data: bytes) -> bytes:
    """A PDF stream object."""
    return b"<<%s /Length %d>>stream\n%s\nendstream" % (entries, len(data), data)


def image_pdf(
    pixels: np.ndarray,
    *,
    page_pt: tuple[int, int],
    place: bytes,
    rotate_deg: int = 0,
    extra: bytes = b"",
    declared_px: tuple[int, int] | None = None,
) -> bytes:
    """A one-page PDF that shows an RGB picture under the matrix `place`, then draws `extra`."""
    height, width = pixels.shape[:2]
    if declared_px is not None:
        width, height = declared_px
    return pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 %d %d] /Rotate %d /Contents 4 0 R"
        b" /Resources<</XObject<</P 5 0 R>> /Font<</F 6 0 R>>>>>>" % (*page_pt, rotate_deg),
        stream(b"", b"q %s cm /P Do Q %s" % (place, extra)),
        stream(
            b"/Type/XObject /Subtype/Image /Width %d /Height %d /BitsPerComponent 8"
            b" /ColorSpace/DeviceRGB /Filter/FlateDecode" % (width, height),
            zlib.compress(pixels.tobytes()),
        ),
        b"<</Type/Font /Subtype/Type1 /BaseFont/Helvetica>>",
    )


def empty_pdf() -> bytes:
    """A PDF without a page."""
    return pdf(b"<</Type/Catalog /Pages 2 0 R>>", b"<</Type/Pages /Kids[] /Count 0>>")


def locked_pdf() -> bytes:
    """A PDF that no password opens: its owner and user keys are arbitrary (ISO 32000-1, 7.6)."""
    key = b"<" + b"5a" * 32 + b">"
    return pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 99 99]>>",
        encrypt=b"/ID[<00><00>] /Encrypt<</Filter/Standard /V 1 /R 2 /P -4 /O %s /U %s>>"
        % (key, key),
    )


def bomb_png(width: int = 30_000, height: int = 30_000) -> bytes:
    """A PNG of a few bytes whose header promises an enormous picture (PNG, 11.2.2)."""

    def chunk(kind: bytes, data: bytes) -> bytes:
        return (
            struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))
        )

    header = struct.pack(">IIBBBBB", width, height, 1, 0, 0, 0, 0)
    return (
        b"\x89PNG\r\n\x1a\n"
        + chunk(b"IHDR", header)
        + chunk(b"IDAT", zlib.compress(b"\0" * 1000))
        + chunk(b"IEND", b"")
    )


def write(path: Path, content: bytes) -> Path:
    """The path, now with that content."""
    path.write_bytes(content)
    return path

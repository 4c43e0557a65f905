"""Drawn pages as files: PNG, JPEG, 1-bit TIFF with its tags, PDF with one image page."""

from pathlib import Path
from typing import Any

from PIL import Image

from tests.drawn.page import DrawnPage


def write_page(drawn: DrawnPage, path: Path) -> Path:
    """Write a page in the format that the suffix of `path` names; return `path`."""
    capture = drawn.spec.capture
    image = Image.fromarray(drawn.pixels)
    tag: dict[str, Any] = {
        "right": {"dpi": capture.dpi},
        "absent": {},
        "wrong": {"dpi": (72.0, 72.0)},
    }[capture.dpi_tag]
    suffix = path.suffix.lower()
    if suffix in (".tif", ".tiff"):
        if drawn.bilevel:
            image.convert("1", dither=Image.Dither.NONE).save(path, compression="group4", **tag)
        else:
            image.save(path, compression="tiff_lzw", **tag)
    elif suffix in (".jpg", ".jpeg"):
        image.save(path, quality=capture.jpeg_quality or 90, **tag)
    elif suffix == ".pdf":
        image.save(path, resolution=capture.dpi[0], quality=capture.jpeg_quality or 90)
    else:
        image.save(path, **tag)
    return path

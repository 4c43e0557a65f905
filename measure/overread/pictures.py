"""The paper as the browser shows it: flattened or as scanned, small first and then in full."""

import io
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from digitize.read import Stages

VIEWS = ("flat", "scan")
SIZES = {"small": 1600, "full": 1 << 20}  # longest side in pixels
_QUALITY = {"small": 80, "full": 88}


class Pictures:
    """Pictures of one page, made when they are first asked for."""

    def __init__(self, stages: "Stages | None") -> None:
        """`stages` is None where there is no page."""
        self._stages = stages
        self.jpeg = lru_cache(maxsize=None)(self._jpeg)

    def _jpeg(self, view: str, size: str) -> bytes:
        """The page as a JPEG file.

        Raises
        ------
        KeyError
            There is no page, or no such view or size.
        """
        if self._stages is None or view not in VIEWS:
            raise KeyError(view)
        return _encoded(self.pixels(view), SIZES[size], _QUALITY[size])

    def pixels(self, view: str) -> np.ndarray:
        """The pixels of a view, (rows, cols) or (rows, cols, 3)."""
        if self._stages is None:
            raise KeyError(view)
        return self._stages.sheet.pixels if view == "flat" else self._stages.page.pixels


def _encoded(pixels: np.ndarray, longest_px: int, quality: int) -> bytes:
    from PIL import Image

    image = Image.fromarray(pixels)
    image.thumbnail((longest_px, longest_px), Image.Resampling.BOX, reducing_gap=2.0)
    stream = io.BytesIO()
    image.save(stream, "JPEG", quality=quality)
    return stream.getvalue()

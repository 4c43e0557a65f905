"""The paper as the browser shows it: flattened or as scanned, small first and then in full."""

import io
from functools import lru_cache

import numpy as np

SIZES = {"small": 1600, "full": 1 << 20}  # longest side in pixels
_QUALITY = {"small": 80, "full": 88}


class Pictures:
    """Pictures of one page, made when they are first asked for."""

    def __init__(self, scan: np.ndarray | None = None, flat: np.ndarray | None = None) -> None:
        """Pixels as scanned and flattened, (rows, cols) or (rows, cols, 3); None: no such view."""
        self._pixels = {"scan": scan, "flat": flat}
        self.jpeg = lru_cache(maxsize=None)(self._jpeg)

    def _jpeg(self, view: str, size: str) -> bytes:
        """The page as a JPEG file.

        Raises
        ------
        KeyError
            There is no such view or size.
        """
        pixels = self._pixels[view]
        if pixels is None:
            raise KeyError(view)
        return _encoded(pixels, SIZES[size], _QUALITY[size])


def _encoded(pixels: np.ndarray, longest_px: int, quality: int) -> bytes:
    from PIL import Image

    image = Image.fromarray(pixels)
    image.thumbnail((longest_px, longest_px), Image.Resampling.BOX, reducing_gap=2.0)
    stream = io.BytesIO()
    image.save(stream, "JPEG", quality=quality)
    return stream.getvalue()

"""The paper as the browser shows it, flattened or as scanned: tiles, at the level that is needed.

Level 0 is the page pixel by pixel; each level above has half the pixels across and down.
"""

import io
import math
import threading
from functools import lru_cache

import numpy as np

TILE_PX = 512
_QUALITY = 85
_TILES_KEPT = 256


class Pictures:
    """Tiles of one page, made when they are first asked for."""

    def __init__(self, scan: np.ndarray | None = None, flat: np.ndarray | None = None) -> None:
        """Pixels as scanned and flattened, (rows, cols) or (rows, cols, 3); None: no such view."""
        self.scan = scan
        self._views = {"scan": scan, "flat": flat}
        self._making = threading.Lock()  # tiles asked for together halve a page once
        self._levels: dict[tuple[str, int], np.ndarray] = {}
        self.tile = lru_cache(maxsize=_TILES_KEPT)(self._tile)

    def _tile(self, view: str, level: int, col: int, row: int) -> bytes:
        """One tile as a JPEG file; those at the right and lower edges are smaller.

        Raises
        ------
        KeyError
            There is no such view or tile.
        """
        if self._views.get(view) is None or not 0 <= level <= 16:
            raise KeyError(view)
        with self._making:
            pixels = self._at(view, level)
        part = pixels[row * TILE_PX : (row + 1) * TILE_PX, col * TILE_PX : (col + 1) * TILE_PX]
        if not part.size:
            raise KeyError(view)
        return _encoded(part)

    def _at(self, view: str, level: int) -> np.ndarray:
        """The whole page at one level, remembered from level 1 on."""
        if level == 0:
            pixels = self._views[view]
            assert pixels is not None
            return pixels
        if (view, level) not in self._levels:
            self._levels[view, level] = _halved(self._at(view, level - 1))
        return self._levels[view, level]


def coarsest(pixels: np.ndarray) -> int:
    """The level at which a page is a single tile."""
    return max(math.ceil(math.log2(max(pixels.shape[:2]) / TILE_PX)), 0)


def _halved(pixels: np.ndarray) -> np.ndarray:
    """A picture with half the pixels across and down, rounded up."""
    from PIL import Image

    return np.asarray(Image.fromarray(pixels).reduce(2))


def _encoded(pixels: np.ndarray) -> bytes:
    from PIL import Image

    stream = io.BytesIO()
    Image.fromarray(pixels).save(stream, "JPEG", quality=_QUALITY)
    return stream.getvalue()

"""Pictures of a page in which the grid lines stand out and the trace does not."""

from collections.abc import Iterator

import cv2
import numpy as np


def grid_contrasts(pixels: np.ndarray) -> Iterator[np.ndarray]:
    """Yield contrast pictures of a page, float32 (rows, cols), the best-behaved first.

    Lines are positive, the local strength is even. Any grid shows in the darkness, which is
    clipped so that the ink above the grid's own level does not count. A coloured grid shows in the
    chroma too (largest less smallest channel), where black ink does not; but JPEG stores chroma at
    half the resolution and in blocks whose edges beat with the lines, so that comes second.

    Parameters
    ----------
    pixels : uint8 array
        (rows, cols) or (rows, cols, 3) RGB.
    """
    grey = pixels if pixels.ndim == 2 else cv2.cvtColor(pixels, cv2.COLOR_RGB2GRAY)
    darkness = _even(_clipped_darkness(grey))
    yield darkness
    if pixels.ndim == 3:
        chroma = pixels.max(axis=2).astype(np.float32) - pixels.min(axis=2)
        limit = 4 * np.quantile(chroma[::4, ::4], 0.75) + 8  # coloured stamps and edges
        yield _even(np.minimum(chroma, limit)) + darkness


def _clipped_darkness(grey: np.ndarray) -> np.ndarray:
    """Darkness below the local paper level, limited at a few times its usual size."""
    grey = grey.astype(np.float32)
    small = cv2.resize(grey, None, fx=0.125, fy=0.125, interpolation=cv2.INTER_AREA)
    paper = cv2.GaussianBlur(cv2.dilate(small, np.ones((3, 3))), (0, 0), 2.0)
    paper = cv2.resize(paper, grey.shape[::-1], interpolation=cv2.INTER_LINEAR)
    dark = np.maximum(paper - grey, 0)
    return np.minimum(dark, 1.5 * np.quantile(dark[::4, ::4], 0.9) + 2)


def _even(image: np.ndarray) -> np.ndarray:
    """Take the slow part away and divide by the local strength, so that shade plays no part."""
    image = image.astype(np.float32)
    image = image - cv2.blur(image, (31, 31))
    strength = np.sqrt(np.maximum(cv2.blur(image * image, (63, 63)), 0))
    floor = 0.3 * float(np.median(strength)) + 1e-3
    return image / np.maximum(strength, floor)

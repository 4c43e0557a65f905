"""Words on the sheet, in outline fonts and in stroke fonts."""

from functools import lru_cache
from pathlib import Path

import cv2
import matplotlib
import numpy as np
from PIL import Image, ImageDraw, ImageFont

from digitize.sheet import Raster

_TTF = Path(matplotlib.get_data_path()) / "fonts" / "ttf"
FONTS: dict[str, str | int] = {
    "sans": "DejaVuSans.ttf",
    "bold": "DejaVuSans-Bold.ttf",
    "oblique": "DejaVuSans-Oblique.ttf",
    "serif": "DejaVuSerif.ttf",
    "serif bold": "DejaVuSerif-Bold.ttf",
    "mono": "DejaVuSansMono.ttf",
    "mono bold": "DejaVuSansMono-Bold.ttf",
    "times": "STIXGeneral.ttf",
    "times bold": "STIXGeneralBol.ttf",
    "stroke": cv2.FONT_HERSHEY_SIMPLEX,
    "stroke plain": cv2.FONT_HERSHEY_PLAIN,
    "stroke double": cv2.FONT_HERSHEY_DUPLEX,
}


def draw_word(
    layer: np.ndarray,
    raster: Raster,
    text: str,
    x_mm: float,
    y_mm: float,
    *,
    font: str,
    height_mm: float,
    amount: float = 1.0,
) -> None:
    """Add `text` to `layer` in place; its base line starts at (x_mm, y_mm), capitals are
    `height_mm` high."""
    mask, left_px, above_px = _mask(text, font, height_mm * raster.px_per_mm)
    row, col = round(raster.row(y_mm)) - above_px, round(raster.col(x_mm)) + left_px
    top, left = max(row, 0), max(col, 0)
    bottom = min(row + mask.shape[0], layer.shape[0])
    right = min(col + mask.shape[1], layer.shape[1])
    if top < bottom and left < right:
        part = mask[top - row : bottom - row, left - col : right - col]
        layer[top:bottom, left:right] += amount * part


def width_mm(text: str, font: str, height_mm: float) -> float:
    """Width of `text` on paper."""
    mask, left_px, _ = _mask(text, font, 40.0)
    return (mask.shape[1] + left_px) * height_mm / 40.0


@lru_cache(maxsize=256)
def _mask(text: str, font: str, cap_px: float) -> tuple[np.ndarray, int, int]:
    """Ink of a text (0..1), the offset of its left edge, and its rows above the base line."""
    face = FONTS[font]
    if isinstance(face, int):
        return _stroke_mask(text, face, cap_px)
    # Capitals of these fonts are about 0.72 em high.
    type_face = _face(face, max(round(cap_px / 0.72), 1))
    left, top, right, bottom = type_face.getbbox(text, anchor="ls")
    image = Image.new("L", (int(right - left) + 2, int(bottom - top) + 2))
    ImageDraw.Draw(image).text((-left + 1, -top + 1), text, fill=255, font=type_face, anchor="ls")
    return np.asarray(image, np.float32) / 255, int(left) - 1, int(-top) + 1


@lru_cache(maxsize=64)
def _face(file_name: str, size_px: int) -> ImageFont.FreeTypeFont:
    return ImageFont.truetype(str(_TTF / file_name), size_px)


def _stroke_mask(text: str, face: int, cap_px: float) -> tuple[np.ndarray, int, int]:
    """A Hershey text, drawn as a plotter would."""
    thick_px = max(round(cap_px / 9), 1)
    scale = cv2.getFontScaleFromHeight(face, max(round(cap_px), 4), thick_px)
    (wide, high), below = cv2.getTextSize(text, face, scale, thick_px)
    image = np.zeros((high + below + 2 * thick_px, wide + 2 * thick_px), np.uint8)
    at = (thick_px, high + thick_px)
    cv2.putText(image, text, at, face, scale, 255, thick_px, cv2.LINE_AA)
    return image.astype(np.float32) / 255, -thick_px, high + thick_px

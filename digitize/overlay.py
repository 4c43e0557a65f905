"""The page with what was read drawn over it, so that a person sees at a glance whether it is right.

The paper is bleached and the trace drawn thinner than the pen, so that the ink stays visible on
both sides of it. It is drawn from the samples, back through gain, speed, baseline and page map:
what stands on the ink went the whole way there and back. Solid blue is read well, dashed orange is
doubtful, hatched orange was not read. The two hues differ for every kind of colour vision (Okabe
and Ito, 2008), and the pattern tells them apart without colour.
"""

import io
from collections.abc import Iterator

import cv2
import numpy as np
from PIL import Image, ImageDraw, ImageFont

from digitize import CAUTION
from digitize.geometry import page_map_of
from digitize.pagemap import PageMap
from digitize.pages import Page
from digitize.tracing import Known, Panel, Tracing

LONG_SIDE_PX = 2400  # of the whole picture
SMALLEST_PX = 2000  # a smaller page is enlarged to this: the line must be thinner than the pen
FOOTER_PX = 330  # kept free below the page
DOUBT_MV = 0.1  # a standard error of more than this, or than a tenth of the panel's voltage
DOUBT_SHARE = 0.1
SHORTEST_GAP_S = 0.02
GRID_EVERY_MM = 25.0

BLUE, ORANGE, GREEN, PALE_GREEN = (0, 90, 178), (213, 94, 0), (0, 130, 95), (120, 190, 165)
INK, PAPER = (20, 20, 20), (255, 255, 255)
_SHIFT = 4  # cv2 takes coordinates in sixteenths of a pixel
_DASH_S, _SPACE_S = 0.06, 0.04
_HOW = {
    "found": "found on the page",
    "printed": "printed on the page",
    "given": "given by a person",
    "assumed": "ASSUMED",
}


def draw_overlay(page: Page, tracing: Tracing) -> bytes:
    """Return the overlay as the bytes of a PNG file.

    Parameters
    ----------
    page : Page
        The page that was read.
    tracing : Tracing
        Its tracing with the geometry that `to_geometry` made.
    """
    picture, scale = _bleached(page.pixels)
    page_map = page_map_of(tracing.geometry)
    _draw_frame(picture, page_map, tracing, scale)
    for panel, fact in zip(tracing.panels, tracing.geometry["panels"], strict=True):
        _draw_panel(picture, page_map, panel, fact, scale)
    image = Image.fromarray(picture)
    _draw_words(image, page_map, tracing, scale)
    buffer = io.BytesIO()
    _with_footer(image, tracing).save(buffer, "PNG", compress_level=2)
    return buffer.getvalue()


def footer_lines(tracing: Tracing) -> Iterator[tuple[str, tuple[int, int, int]]]:
    """The lines below the page, each with its colour; the caution is the last."""

    def how(known: Known, unit: str = "") -> str:
        value = f"{known.value:g}{unit}" if isinstance(known.value, float) else str(known.value)
        return f"{value} ({_HOW[known.source]})"

    yield (
        f"Layout {how(tracing.layout)}   Speed {how(tracing.speed_mm_s, ' mm/s')}   "
        f"Gain {how(tracing.gain_mm_mv, ' mm/mV')}   Columns {how(tracing.timing)}",
        INK,
    )
    failed = [check for check in tracing.checks if check.passed is False]
    if not failed:
        yield f"No self-check failed ({len(tracing.checks)} made).", GREEN
    for check in failed:
        yield f"LOOK: {check.message}", ORANGE
    yield "Solid blue: read.  Dashed orange: doubtful.  Hatched orange: not read, left blank.", INK
    yield CAUTION, INK


def _bleached(pixels: np.ndarray) -> tuple[np.ndarray, float]:
    """The page in pale colours at the size of the picture, and pixels of it per page pixel."""
    rows, cols = pixels.shape[:2]
    scale = min(LONG_SIDE_PX / cols, (LONG_SIDE_PX - FOOTER_PX) / rows)
    if scale > 1:
        scale = min(scale, max(1.0, SMALLEST_PX / cols))
    size = (max(round(cols * scale), 1), max(round(rows * scale), 1))
    way = cv2.INTER_AREA if scale < 1 else cv2.INTER_CUBIC
    small = cv2.resize(pixels, size, interpolation=way)
    if small.ndim == 2:
        small = cv2.cvtColor(small, cv2.COLOR_GRAY2RGB)
    pale = np.asarray(cv2.convertScaleAbs(small, alpha=0.55, beta=0.45 * 255), np.uint8)
    return pale | 0b111, scale  # steps of 8 grey levels: noise of the paper makes large files


def _draw_frame(picture: np.ndarray, page_map: PageMap, tracing: Tracing, scale: float) -> None:
    """The ruled area and a few of its grid lines, as the map has them."""
    left, top, right, bottom = tracing.geometry["ruled_mm"]
    along_x, along_y = np.linspace(left, right, 60), np.linspace(top, bottom, 60)
    for x_mm in (left, *_steps(left, right), right):
        frame = x_mm in (left, right)
        style = (GREEN, 2) if frame else (PALE_GREEN, 1)
        _polyline(picture, page_map, np.full(60, x_mm), along_y, *style, scale)
    for y_mm in (top, *_steps(top, bottom), bottom):
        frame = y_mm in (top, bottom)
        style = (GREEN, 2) if frame else (PALE_GREEN, 1)
        _polyline(picture, page_map, along_x, np.full(60, y_mm), *style, scale)


def _steps(low: float, high: float) -> list[float]:
    """Whole multiples of `GRID_EVERY_MM` between two places."""
    first = np.ceil(low / GRID_EVERY_MM) * GRID_EVERY_MM
    return np.arange(first, high, GRID_EVERY_MM).tolist()


def _draw_panel(
    picture: np.ndarray, page_map: PageMap, panel: Panel, fact: dict, scale: float
) -> None:
    """One panel: its edges, the trace from its samples, doubtful and unread stretches."""
    left, top, right, bottom = panel.box_mm
    for edge_mm in (left, right):
        _polyline(picture, page_map, np.full(2, edge_mm), np.array([top, bottom]), INK, 1, scale)
    x_mm, y_mm = _on_paper(panel, fact)
    doubtful = _doubtful(panel)
    for part in _runs(np.isfinite(panel.mv) & ~doubtful):
        _polyline(picture, page_map, x_mm[part], y_mm[part], BLUE, 2, scale)
    phase_s = np.arange(len(panel.mv)) / panel.fs_hz % (_DASH_S + _SPACE_S)
    for part in _runs(np.isfinite(panel.mv) & doubtful & (phase_s < _DASH_S)):
        _polyline(picture, page_map, x_mm[part], y_mm[part], ORANGE, 3, scale)
    for part in _runs(~np.isfinite(panel.mv)):
        if part.stop - part.start >= SHORTEST_GAP_S * panel.fs_hz:
            last = min(part.stop, len(x_mm) - 1)
            _hatch(picture, page_map, (x_mm[part.start], x_mm[last]), fact["baseline_mm"], scale)


def _on_paper(panel: Panel, fact: dict) -> tuple[np.ndarray, np.ndarray]:
    """Where the samples stand on the paper, (x_mm, y_mm)."""
    sign = -1.0 if fact.get("upside_down") else 1.0
    x_mm = panel.box_mm[0] + (panel.time_s - panel.start_s) * panel.speed_mm_s
    return x_mm, fact["baseline_mm"] - sign * panel.mv * panel.gain_mm_mv


def _first_read(panel: Panel, fact: dict) -> tuple[float, float] | None:
    """Where the first sample that was read stands on the paper."""
    read = np.flatnonzero(np.isfinite(panel.mv))
    if len(read) == 0:
        return None
    x_mm, y_mm = _on_paper(panel, fact)
    return float(x_mm[read[0]]), float(y_mm[read[0]])


def _doubtful(panel: Panel) -> np.ndarray:
    """Where the standard error is large against the panel's own voltage, (n,) bool."""
    read = panel.mv[np.isfinite(panel.mv)]
    height_mv = float(np.ptp(read)) if len(read) else 0.0
    limit = max(min(DOUBT_MV, DOUBT_SHARE * height_mv), 0.02)
    return np.nan_to_num(panel.sigma_mv, nan=np.inf) > limit


def _runs(mask: np.ndarray) -> Iterator[slice]:
    """Slices over which a mask is true."""
    edges = np.flatnonzero(np.diff(np.concatenate([[0], mask.astype(np.int8), [0]])))
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        yield slice(int(start), int(stop))


def _polyline(
    picture: np.ndarray,
    page_map: PageMap,
    x_mm: np.ndarray,
    y_mm: np.ndarray,
    colour: tuple[int, int, int],
    width_px: int,
    scale: float,
) -> None:
    """A smooth line through places on the paper."""
    x_px, y_px = page_map.to_px(x_mm, y_mm)
    points = (np.stack([x_px, y_px], axis=1) + 0.5) * scale - 0.5
    fixed = np.rint(points * 2**_SHIFT).astype(np.int32)
    cv2.polylines(picture, [fixed], False, colour, width_px, cv2.LINE_AA, _SHIFT)


def _hatch(
    picture: np.ndarray,
    page_map: PageMap,
    span_mm: tuple[float, float],
    middle_mm: float,
    scale: float,
) -> None:
    """Slanted lines over a stretch that was not read."""
    low, high = middle_mm - 2.5, middle_mm + 2.5
    for x_mm in np.arange(span_mm[0], span_mm[1] + 0.01, 1.5):
        across = np.clip([x_mm, x_mm + 2.5], span_mm[0], span_mm[1])
        _polyline(picture, page_map, across, np.array([high, low]), ORANGE, 2, scale)


def _draw_words(image: Image.Image, page_map: PageMap, tracing: Tracing, scale: float) -> None:
    """Lead names, each tied to the start of its trace, and "1 mV" at the calibration marks."""
    draw = ImageDraw.Draw(image)
    px_per_mm = min(page_map.scale_px_per_mm()) * scale
    font = ImageFont.load_default(float(np.clip(4.2 * px_per_mm, 16, 40)))
    for panel, fact in zip(tracing.panels, tracing.geometry["panels"], strict=True):
        name = panel.lead + (" strip" if panel.strip else "")
        name += {"assumed": " ?", "given": " (given)"}.get(panel.lead_source, "")
        # On the upper edge of the panel: the page's own label mostly stands just below it.
        corner = _place(page_map, panel.box_mm[0] + 1.2, panel.box_mm[1] + 1.5, scale)
        corner = corner[0], max(corner[1], draw.textbbox((0, 0), name, font=font)[3] + 6.0)
        box = draw.textbbox(corner, name, font=font, anchor="lb")
        colour = ORANGE if panel.lead_source == "assumed" else BLUE
        start = _first_read(panel, fact)
        if start is not None:
            draw.line([corner, _place(page_map, *start, scale)], colour, 1)
        draw.rectangle((box[0] - 4, box[1] - 3, box[2] + 4, box[3] + 3), PAPER, colour, 2)
        draw.text(corner, name, colour, font, anchor="lb")
    for left, top, right, bottom in tracing.geometry["marks_mm"]:
        corners = [(left, top), (right, top), (right, bottom), (left, bottom)]
        draw.polygon([_place(page_map, x, y, scale) for x, y in corners], outline=GREEN, width=2)
        draw.text(_place(page_map, left, bottom + 0.5, scale), "1 mV", GREEN, font)


def _place(page_map: PageMap, x_mm: float, y_mm: float, scale: float) -> tuple[float, float]:
    """A place on the paper as a pixel of the picture."""
    x_px, y_px = page_map.to_px(np.array([x_mm]), np.array([y_mm]))
    return float((x_px[0] + 0.5) * scale - 0.5), float((y_px[0] + 0.5) * scale - 0.5)


def _with_footer(image: Image.Image, tracing: Tracing) -> Image.Image:
    """The picture with what was read, what to look at and the caution below it."""
    size_px = float(np.clip(image.width / 75, 15, 28))
    font = ImageFont.load_default(size_px)
    lines = [
        line for text in footer_lines(tracing) for line in _wrapped(*text, font, image.width - 30)
    ]
    step = round(size_px * 1.3)
    most = max(FOOTER_PX // step - 1, 3)
    if len(lines) > most:  # the caution comes last and always stays
        lines = [*lines[: most - 2], ("... more in the JSON", ORANGE), *lines[-1:]]
    whole = Image.new("RGB", (image.width, image.height + step * len(lines) + step), PAPER)
    whole.paste(image, (0, 0))
    draw = ImageDraw.Draw(whole)
    for number, (line, colour) in enumerate(lines):
        draw.text((15, image.height + step // 2 + number * step), line, colour, font)
    return whole


def _wrapped(
    text: str,
    colour: tuple[int, int, int],
    font: ImageFont.FreeTypeFont | ImageFont.ImageFont,
    width_px: int,
) -> Iterator[tuple[str, tuple[int, int, int]]]:
    """The text in lines that fit."""
    line = ""
    for word in text.split(" "):
        longer = f"{line} {word}" if line else word
        if line and font.getlength(longer) > width_px:
            yield line, colour
            longer = word
        line = longer
    yield line, colour

"""One picture per stage, for whoever doubts a reading and wants to see where it went astray.

Each is drawn from what the stage handed on, in millimetres of the flattened sheet. The residual of
the grid is measured anew on that sheet: lines that lie off whole millimetres show as arrows.
"""

import io
from collections.abc import Callable
from textwrap import wrap

import cv2
import numpy as np
from PIL import Image, ImageDraw, ImageFont

from digitize import CAUTION
from digitize.read import Stages
from digitize.sheet import Box, Raster
from digitize.trace import redraw
from digitize.ways import find_routes

LONG_SIDE_PX = 2000
TILE_MM = 10  # the ruling is looked at on tiles of this size: two heavy lines each way
ENLARGED = 50  # times, the residual of the grid
LEAST_SEEN = 0.3  # of the usual strength of the ruling; on weaker tiles its place is chance
INKED = 0.2  # density of pixels that are left out when the ruling is looked at
MOST_LISTED = 12  # layouts, best first

BLUE, ORANGE, GREEN, RED = (0, 90, 178), (213, 94, 0), (0, 130, 95), (190, 20, 40)
INK, PAPER, HIDDEN = (20, 20, 20), (255, 255, 255), (225, 205, 230)


class _Canvas:
    """A picture of the sheet, drawn on in millimetres, with a title above it."""

    def __init__(self, picture: np.ndarray, raster: Raster) -> None:
        scale = min(LONG_SIDE_PX / max(picture.shape[:2]), 1.0)
        size = (round(picture.shape[1] * scale), round(picture.shape[0] * scale))
        small = cv2.resize(picture, size, interpolation=cv2.INTER_AREA)
        if small.ndim == 2:
            small = cv2.cvtColor(small, cv2.COLOR_GRAY2RGB)
        self._image = Image.fromarray(small)
        self._draw = ImageDraw.Draw(self._image)
        self._raster, self._scale = raster, scale

    def at(self, x_mm: float, y_mm: float) -> tuple[float, float]:
        """A place of the paper in pixels of the picture."""
        raster, scale = self._raster, self._scale
        return raster.col(x_mm) * scale, raster.row(y_mm) * scale

    def box(self, box: Box, colour: tuple[int, int, int], width_px: int = 2) -> None:
        corners = (*self.at(box.left_mm, box.top_mm), *self.at(box.right_mm, box.bottom_mm))
        self._draw.rectangle(corners, outline=colour, width=width_px)

    def line(
        self, x_mm: np.ndarray, y_mm: np.ndarray, colour: tuple[int, int, int], width_px: int = 2
    ) -> None:
        """A line through places, broken where one is NaN."""
        seen = np.isfinite(y_mm)
        edges = np.flatnonzero(np.diff(np.pad(seen.astype(np.int8), 1)))
        for start, stop in zip(edges[::2], edges[1::2], strict=True):
            points = [
                self.at(x, y) for x, y in zip(x_mm[start:stop], y_mm[start:stop], strict=True)
            ]
            self._draw.line(points, colour, width_px)

    def text(self, x_mm: float, y_mm: float, text: str, colour: tuple[int, int, int]) -> None:
        font = ImageFont.load_default(18)
        place = self.at(x_mm, y_mm)
        self._draw.rectangle(self._draw.textbbox(place, text, font=font), PAPER)
        self._draw.text(place, text, colour, font)

    def png(self, *title: str) -> bytes:
        """The picture below its title, the caution below it, as a PNG file."""
        font, step = ImageFont.load_default(20), 28
        lines = [part for line in (*title, CAUTION) for part in wrap(line, self._image.width // 10)]
        high = self._image.height + step * len(lines) + 16
        whole = Image.new("RGB", (self._image.width, high), PAPER)
        draw = ImageDraw.Draw(whole)
        for number, line in enumerate(lines):
            draw.text((10, 8 + number * step), line, INK, font)
        whole.paste(self._image, (0, high - self._image.height))
        buffer = io.BytesIO()
        whole.save(buffer, "PNG", compress_level=4)
        return buffer.getvalue()


def draw_stage(stages: Stages, picture: str) -> bytes:
    """Return one picture of a page that was read, as the bytes of a PNG file.

    Parameters
    ----------
    stages : Stages
    picture : str
        One of `PICTURES`.
    """
    return _DRAWN[picture](stages)


def grid_residual(stages: Stages) -> tuple[np.ndarray, np.ndarray]:
    """Places of tiles of the sheet and how far its ruling lies off whole millimetres there.

    Returns
    -------
    place_mm, off_mm : (n, 2) arrays
        x and y of the middle of each tile on which the ruling is seen, and of its displacement.
    """
    ink, raster = stages.ink, stages.ink.raster
    light = stages.sheet.pixels
    dark = 255.0 - (light.min(axis=2) if light.ndim == 3 else light)
    tile = TILE_MM * round(raster.px_per_mm)
    rows, cols = (n // tile for n in dark.shape)
    clear = (ink.density < INKED) & ~ink.hidden
    x_mm, y_mm = raster.x_mm(np.arange(cols * tile)), raster.y_mm(np.arange(rows * tile))

    def phase(period_mm: int, axis: int) -> tuple[np.ndarray, np.ndarray]:
        """Displacement of one line family on each tile, and how strongly it is seen."""
        along = x_mm[None, :] if axis == 0 else y_mm[:, None]
        weight = clear[: rows * tile, : cols * tile].astype(float)
        value = dark[: rows * tile, : cols * tile]
        mean = _tiled(weight * value, tile) / np.maximum(_tiled(weight, tile), 1)
        level = np.kron(mean, np.ones((tile, tile)))
        wave = weight * (value - level) * np.exp(-2j * np.pi * along / period_mm)
        total = _tiled(wave, tile) / np.maximum(_tiled(weight, tile), 1)
        return -np.angle(total) / (2 * np.pi) * period_mm, np.abs(total)

    off, seen = [], np.ones((rows, cols), bool)
    for axis in (0, 1):
        period = max((1, 5), key=lambda p: float(np.median(phase(p, axis)[1])))
        displaced, strength = phase(period, axis)
        seen &= strength > LEAST_SEEN * np.quantile(strength, 0.8)
        off.append(displaced)
    middle = (np.arange(max(rows, cols)) + 0.5) * tile - 0.5
    x, y = np.meshgrid(raster.x_mm(middle[:cols]), raster.y_mm(middle[:rows]))
    left, top, right, bottom = ink.ruled_mm
    half = TILE_MM / 2
    seen &= (x > left + half) & (x < right - half) & (y > top + half) & (y < bottom - half)
    return np.stack([x[seen], y[seen]], axis=1), np.stack([o[seen] for o in off], axis=1)


def _tiled(values: np.ndarray, tile: int) -> np.ndarray:
    """Sums over square tiles."""
    rows, cols = (n // tile for n in values.shape)
    return values.reshape(rows, tile, cols, tile).sum(axis=(1, 3))


def _grid(stages: Stages) -> bytes:
    grid, raster = stages.grid, stages.ink.raster
    canvas = _Canvas(_pale(stages.sheet.pixels), raster)
    canvas.box(Box(*grid.ruled_mm), GREEN)
    scale = f"{grid.px_per_mm[0]:.2f} x {grid.px_per_mm[1]:.2f} px/mm"
    title = [f"Grid: {grid.method}; {scale}; scatter about the map {grid.residual_mm:.3f} mm"]
    if grid.method.startswith("phase"):
        place, off = grid_residual(stages)
        for (x, y), (dx, dy) in zip(place, off, strict=True):
            ends = np.array([x, x + ENLARGED * dx]), np.array([y, y + ENLARGED * dy])
            canvas.line(*ends, RED, 3)
            canvas.box(Box(x - 0.3, y - 0.3, x + 0.3, y + 0.3), BLUE)
        size = np.hypot(*off.T) if len(off) else np.zeros(1)
        title.append(
            f"Lines seen on the flattened sheet lie {np.median(size):.3f} mm (median), "
            f"{np.quantile(size, 0.95):.3f} mm (95 %) off whole millimetres; "
            f"drawn {ENLARGED} times enlarged"
        )
    return canvas.png(*title)


def _sheet(stages: Stages) -> bytes:
    canvas = _Canvas(stages.sheet.pixels, stages.ink.raster)
    canvas.box(Box(*stages.grid.ruled_mm), GREEN)
    source = " x ".join(f"{v:.1f}" for v in stages.sheet.source_px_per_mm)
    return canvas.png(
        f"Flattened sheet: {stages.ink.raster.px_per_mm:.1f} px/mm, from {source} px/mm of the page"
    )


def _ink(stages: Stages) -> bytes:
    ink = stages.ink
    picture = cv2.cvtColor(_grey(ink.density), cv2.COLOR_GRAY2RGB)
    picture[ink.hidden] = HIDDEN
    canvas = _Canvas(picture, ink.raster)
    for box in stages.layout.words:
        canvas.box(box, GREEN, 1)
    for box in stages.layout.marks:
        canvas.box(box, BLUE)
    return canvas.png(
        f"Ink, its noise {ink.noise:.3f} of a full stroke. Green: letters. Blue: marks. "
        "Tinted: the paper cannot be seen"
    )


def _panels(stages: Stages) -> bytes:
    layout = stages.layout
    canvas = _Canvas(_faint(stages), stages.ink.raster)
    for place, panel in zip(layout.panels, stages.tracing.panels, strict=True):
        sure = panel.lead_source != "assumed"
        colour = BLUE if sure else ORANGE
        canvas.box(place.box, colour)
        name = f"{panel.lead}{' strip' if place.strip else ''} {panel.lead_source}"
        text = f"{name} {place.lead_score:.2f}, {panel.gain_mm_mv:g} mm/mV"
        canvas.text(place.box.left_mm + 0.5, place.box.top_mm + 0.5, text, colour)
    for box in layout.marks:
        canvas.box(box, GREEN)
    listed = [f"{name} {score:.1f}" for name, score in layout.considered[:MOST_LISTED]]
    return canvas.png(
        f"Panels: {layout.name.value} ({layout.name.source}), {layout.speed_mm_s.value:g} mm/s "
        f"({layout.speed_mm_s.source}), columns {stages.tracing.timing.value} "
        f"({stages.tracing.timing.source})",
        "Layouts considered, log odds: " + (", ".join(listed) or "none"),
        *(f"Note: {note}" for note in layout.notes),
    )


def _path(stages: Stages) -> bytes:
    canvas = _Canvas(_faint(stages), stages.ink.raster)
    routes = find_routes(stages.ink, stages.layout)
    x_mm, y_mm = routes.field.x_mm, routes.field.y_mm
    for number, path in enumerate(routes.paths):
        across = x_mm[path.left : path.right]
        ends = y_mm[path.span]
        # Both ends of each column in turn show the steep strokes too.
        x = np.repeat(across, 2)
        down = ends[0] <= np.roll(ends[0], 1)
        y = np.where(down, ends[::-1], ends).T.ravel()
        canvas.line(x, y, (BLUE, RED, GREEN, ORANGE)[number % 4])
    return canvas.png(
        "First way of each trace through the ink, before crossings are settled and a pen is fitted"
    )


def _fit(stages: Stages) -> bytes:
    ink = stages.ink
    drawn = redraw(stages.strokes, ink.raster, ink.density.shape)
    left = np.clip(ink.density - drawn, -1, 1)
    picture = np.full((*left.shape, 3), 255, np.uint8)
    more, less = np.clip(left, 0, 1), np.clip(-left, 0, 1)
    for channel, value in enumerate(BLUE):
        picture[..., channel] = 255 - (255 - value) * more - (255 - ORANGE[channel]) * less
    canvas = _Canvas(picture, ink.raster)
    for place, stroke in zip(stages.layout.panels, stages.strokes, strict=True):
        text = f"{place.lead} {100 * stroke.unexplained:.0f} %"
        canvas.text(place.box.left_mm + 0.5, place.box.top_mm + 0.5, text, INK)
    pen = np.median([stroke.pen_mm for stroke in stages.strokes])
    return canvas.png(
        f"Fit: what the redrawn traces leave over, pen {pen:.2f} mm. Blue: ink that no trace draws "
        "(printing, grid, dirt). Orange: drawn without ink. Share of ink left over beside each name"
    )


def _grey(density: np.ndarray) -> np.ndarray:
    return np.clip(255 * (1 - density), 0, 255).astype(np.uint8)


def _faint(stages: Stages) -> np.ndarray:
    """The ink in pale grey, to be drawn on."""
    return _pale(_grey(stages.ink.density))


def _pale(pixels: np.ndarray) -> np.ndarray:
    return np.asarray(cv2.convertScaleAbs(pixels, alpha=0.45, beta=0.55 * 255), np.uint8)


_DRAWN: dict[str, Callable[[Stages], bytes]] = {
    "1-grid": _grid,
    "2-sheet": _sheet,
    "3-ink": _ink,
    "4-panels": _panels,
    "5-path": _path,
    "6-fit": _fit,
}
PICTURES = tuple(_DRAWN)

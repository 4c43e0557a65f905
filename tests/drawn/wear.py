"""What years and hands do to a page: faded ink, stains, folds, holes, stamps, writing, specks.

Everything happens on the sheet, in millimetres, before it is captured, so that scans and
photographs see the same damage.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import scipy as sp

from digitize.sheet import Raster
from tests.drawn.lettering import draw_word
from tests.drawn.pen import draw_stroke
from tests.drawn.spec import Colour, PaperSpec, WearSpec

STAMP_INK: Colour = (150, 60, 130)
BALLPOINT: Colour = (40, 60, 150)
MARKER: Colour = (12, 12, 14)
STAIN: Colour = (205, 175, 130)
DIRT: Colour = (60, 55, 50)


@dataclass(frozen=True, eq=False)
class Damage:
    """Ink laid on the sheet by wear, what it leaves of the first ink, and what it punched out."""

    inks: tuple[tuple[np.ndarray, Colour], ...]
    remaining: np.ndarray | None  # share of pen ink left, None: all of it
    holes_mm: tuple[tuple[float, float, float], ...]  # x, y, radius


def wear_down(
    wear: WearSpec,
    paper: PaperSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> Damage:
    """Return the damage to a sheet."""
    inks: list[tuple[np.ndarray, Colour]] = []
    if wear.stains or wear.yellow:
        inks.append((_stains(wear, paper, raster, shape, rng), STAIN))
    if wear.stamp:
        inks.append((_stamp(paper, raster, shape, rng), STAMP_INK))
    if wear.writing:
        inks.append((_writing(wear.writing, paper, raster, shape, rng), BALLPOINT))
    if wear.bars:
        inks.append((_bars(wear.bars, paper, raster, shape, rng), MARKER))
    if wear.speckle or wear.folds:
        inks.append((_dirt(wear, paper, raster, shape, rng), DIRT))
    remaining = None
    if wear.fade or wear.folds:
        remaining = _remaining(wear, paper, raster, shape, rng)
    return Damage(tuple(inks), remaining, _holes(wear.holes, paper))


def fold_places_mm(wear: WearSpec, paper: PaperSpec) -> list[tuple[bool, float]]:
    """Folds as (upright, place): in halves across, then down, then in quarters."""
    wide, high = paper.size_mm
    every = [
        (True, wide / 2 - paper.offset_mm[0] + 0.7),
        (False, high / 2 - paper.offset_mm[1] - 1.3),
        (True, wide / 4 - paper.offset_mm[0] + 0.2),
        (True, 3 * wide / 4 - paper.offset_mm[0] + 1.1),
    ]
    return every[: wear.folds]


def _place(paper: PaperSpec, rng: np.random.Generator) -> tuple[float, float]:
    """A place anywhere on the sheet, in mm."""
    share = rng.uniform(0.08, 0.92, 2)
    return (
        float(share[0] * paper.size_mm[0] - paper.offset_mm[0]),
        float(share[1] * paper.size_mm[1] - paper.offset_mm[1]),
    )


def _slow_field(shape: tuple[int, int], cells: int, rng: np.random.Generator) -> np.ndarray:
    """Smooth random field between 0 and 1 over the sheet, float32."""
    knots = rng.uniform(0, 1, (cells, cells)).astype(np.float32)
    field = cv2.resize(knots, (shape[1], shape[0]), interpolation=cv2.INTER_CUBIC)
    return np.clip(field, 0, 1)


def _stains(
    wear: WearSpec,
    paper: PaperSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> np.ndarray:
    """Yellowing in broad clouds, and round stains with a darker rim."""
    layer = wear.yellow * (0.5 + 0.5 * _slow_field(shape, 5, rng))
    for _ in range(wear.stains):
        x_mm, y_mm = _place(paper, rng)
        radius_mm = rng.uniform(8, 25)
        far = int((radius_mm + 3) * raster.px_per_mm)
        row, col = int(raster.row(y_mm)), int(raster.col(x_mm))
        top, left = max(row - far, 0), max(col - far, 0)
        part = layer[top : row + far, left : col + far]
        rows, cols = np.ogrid[top : top + part.shape[0], left : left + part.shape[1]]
        away_mm = np.hypot(rows - row, cols - col) / raster.px_per_mm
        rim = np.exp(-(((away_mm - radius_mm) / 0.9) ** 2))
        part += rng.uniform(0.3, 0.9) * (0.35 * (away_mm < radius_mm) + 0.65 * rim)
    return layer.astype(np.float32)


def _stamp(
    paper: PaperSpec, raster: Raster, shape: tuple[int, int], rng: np.random.Generator
) -> np.ndarray:
    """A round stamp, set down askew and unevenly inked."""
    layer = np.zeros(shape, np.float32)
    x_mm, y_mm = _place(paper, rng)
    angle = np.linspace(0, 2 * np.pi, 120)
    for radius_mm, pen_mm in ((16.0, 0.8), (13.5, 0.4)):
        draw_stroke(
            layer,
            raster,
            x_mm + radius_mm * np.cos(angle),
            y_mm + radius_mm * np.sin(angle),
            pen_mm=pen_mm,
        )
    draw_word(layer, raster, "MARRAM HEAD", x_mm - 11, y_mm - 1, font="bold", height_mm=2.4)
    draw_word(layer, raster, "RECEIVED", x_mm - 8, y_mm + 4, font="bold", height_mm=2.4)
    centre = (raster.col(x_mm), raster.row(y_mm))
    turn = cv2.getRotationMatrix2D(centre, float(rng.uniform(-35, 35)), 1.0)
    turned = cv2.warpAffine(layer, turn, (shape[1], shape[0]))
    return turned * (0.25 + 0.6 * _slow_field(shape, 40, rng))


def _bars(
    count: int,
    paper: PaperSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> np.ndarray:
    """Bars of a black marker: the first over the head of the page, more wherever a name stood."""
    layer = np.zeros(shape, np.float32)
    for number in range(count):
        x_mm, y_mm = _place(paper, rng)
        if number == 0:
            x_mm, y_mm = 12.0 - paper.offset_mm[0], 12.0 - paper.offset_mm[1]
        end_mm = x_mm + rng.uniform(25, 60)
        line = np.array([x_mm, end_mm]), np.array([y_mm, y_mm + rng.normal(0, 0.5)])
        draw_stroke(layer, raster, *line, pen_mm=float(rng.uniform(4, 7)))
    return layer


def _writing(
    strokes: int,
    paper: PaperSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> np.ndarray:
    """Loops of a ball-point pen, word by word."""
    layer = np.zeros(shape, np.float32)
    for _ in range(strokes):
        x_mm, y_mm = _place(paper, rng)
        t = np.linspace(0, 1, 220)
        size_mm, length_mm = rng.uniform(1.5, 3.0), rng.uniform(12, 40)
        loops = rng.uniform(5, 11)
        lean = sp.ndimage.gaussian_filter1d(rng.normal(0, 3.0, len(t)), 8)
        draw_stroke(
            layer,
            raster,
            x_mm + length_mm * t + size_mm * 0.6 * np.sin(2 * np.pi * loops * t + lean),
            y_mm - length_mm * 0.08 * t + size_mm * np.cos(2 * np.pi * loops * t + 2 * lean),
            pen_mm=0.5,
            amount=0.85,
        )
    return layer


def _dirt(
    wear: WearSpec,
    paper: PaperSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> np.ndarray:
    """Specks of dust and toner, and the dark line of each fold."""
    layer = np.zeros(shape, np.float32)
    area_cm2 = paper.size_mm[0] * paper.size_mm[1] / 100
    for _ in range(rng.poisson(wear.speckle * area_cm2)):
        x_mm, y_mm = _place(paper, rng)
        end_mm = rng.normal(0, 0.15, 2)
        line = np.array([x_mm, x_mm + end_mm[0]]), np.array([y_mm, y_mm + end_mm[1]])
        pen_mm = float(rng.uniform(0.1, 0.45))
        draw_stroke(layer, raster, *line, pen_mm=pen_mm, amount=float(rng.uniform(0.4, 1)))
    for upright, at_mm in fold_places_mm(wear, paper):
        along_mm = np.linspace(-paper.offset_mm[upright], paper.size_mm[upright], 300)
        across_mm = at_mm + sp.ndimage.gaussian_filter1d(rng.normal(0, 0.5, 300), 12)
        line = (across_mm, along_mm) if upright else (along_mm, across_mm)
        amount = np.clip(rng.normal(0.25, 0.15, 300), 0, 1)
        draw_stroke(layer, raster, *line, pen_mm=0.35, amount=amount)
    return layer


def _remaining(
    wear: WearSpec,
    paper: PaperSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> np.ndarray:
    """Share of the first ink that is left: clouds of fading, and ink rubbed off along folds."""
    left = 1 - wear.fade * (0.35 + 0.65 * _slow_field(shape, 6, rng))
    rubbed = np.zeros(shape, np.float32)
    for upright, at_mm in fold_places_mm(wear, paper):
        along_mm = np.linspace(-paper.offset_mm[upright], paper.size_mm[upright], 300)
        line = (np.full(300, at_mm), along_mm) if upright else (along_mm, np.full(300, at_mm))
        amount = np.clip(rng.normal(0.5, 0.4, 300), 0, 1)
        draw_stroke(rubbed, raster, *line, pen_mm=0.7, amount=amount)
    return left.astype(np.float32) * np.clip(1 - rubbed, 0, 1)


def _holes(count: int, paper: PaperSpec) -> tuple[tuple[float, float, float], ...]:
    """Punched holes of 6 mm along the left edge, 80 mm apart (ISO 838, from memory)."""
    middle_mm = paper.size_mm[1] / 2 - paper.offset_mm[1]
    spread = (np.arange(count) - (count - 1) / 2) * 80.0
    return tuple((12.0 - paper.offset_mm[0], middle_mm + float(d), 3.0) for d in spread)

"""A recording drawn on paper and captured: pixels together with the whole truth about them.

The sheet is drawn once on a fine millimetre raster as amounts of ink, turned into light (inks
multiply what the paper reflects), blurred by the optics and the pixel's own aperture, and sampled
once through the exact map of the scanner or camera. Light is linear until the end, where it is
coded as sRGB, noise is added, and the picture is made grey or black and white where asked.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.sheet import Raster
from tests.drawn.capture import MM_PER_INCH, CaptureMap, photo_map, resample, scan_map
from tests.drawn.composition import Composition, PanelTruth, compose
from tests.drawn.heart import HeartTruth, Recording
from tests.drawn.lettering import draw_word
from tests.drawn.paper import draw_grid
from tests.drawn.pen import draw_stroke
from tests.drawn.sensor import light_up, to_light, to_pixels
from tests.drawn.spec import Colour, PageSpec
from tests.drawn.wear import Damage, wear_down

_FINEST_PX_PER_MM = 24.0
_COARSEST_PX_PER_MM = 14.0
_INK_STEPS, _MOST_INK = 500, 6  # inks are tabled in steps of 1/500, up to six layers
_LID: Colour = (250, 250, 250)  # what a scanner sees beside the sheet


@dataclass(frozen=True, eq=False)
class PageTruth:
    """What is on a drawn page, and where."""

    panels: tuple[PanelTruth, ...]
    marks: tuple[tuple[float, float, float, float], ...]
    layout: str
    timing: str
    speed_mm_s: float
    gain_mm_mv: float
    page_map: CaptureMap
    heart: HeartTruth | None
    recording: str


@dataclass(frozen=True, eq=False)
class DrawnPage:
    """Pixels of a page, uint8, (rows, cols) or (rows, cols, 3) RGB, and the truth."""

    pixels: np.ndarray
    truth: PageTruth
    spec: PageSpec

    @property
    def bilevel(self) -> bool:
        """True where the pixels are 0 and 255 alone."""
        return self.spec.capture.mode in ("bilevel", "diffused")


def draw_page(recording: Recording, spec: PageSpec) -> DrawnPage:
    """Return the page of a recording under a specification; the same pixels every time."""
    return draw_composition(recording, compose(recording, spec), spec)


def draw_composition(recording: Recording, composition: Composition, spec: PageSpec) -> DrawnPage:
    """Return the page of what was composed by hand; `spec.layout` names it, no more."""
    rng = np.random.default_rng([spec.seed, 2])
    capture = spec.capture
    if capture.photo is None:
        page_map = scan_map(capture, spec.paper)
    else:
        page_map = photo_map(capture, capture.photo, spec.paper)
    raster, shape = _raster(spec)
    damage = wear_down(spec.wear, spec.paper, raster, shape, rng)
    inks = _inks(composition, damage, spec, raster, shape, rng)
    wanted = (0, 1, 2) if capture.mode == "colour" else (capture.grey_light,)
    light = np.stack([_channel(k, inks, damage, spec, raster, page_map) for k in wanted], axis=-1)
    if capture.photo is not None:
        light = light_up(light, capture.photo, wanted, rng)
    pixels = to_pixels(light, spec, rng)
    return DrawnPage(pixels, truth_of(recording, composition, spec, page_map), spec)


def truth_of(
    recording: Recording, composition: Composition, spec: PageSpec, page_map: CaptureMap
) -> PageTruth:
    """Return the truth of a composed page, whatever it is drawn with."""
    return PageTruth(
        panels=composition.panels,
        marks=composition.marks,
        layout=spec.layout.name,
        timing=spec.layout.timing,
        speed_mm_s=spec.layout.speed_mm_s,
        gain_mm_mv=spec.layout.gain_mm_mv,
        page_map=page_map,
        heart=recording.truth,
        recording=recording.name,
    )


def _raster(spec: PageSpec) -> tuple[Raster, tuple[int, int]]:
    """The fine raster of the sheet: twice the picture's resolution where that is affordable."""
    wanted = 2 * max(spec.capture.dpi) / MM_PER_INCH
    px_per_mm = float(np.clip(wanted, _COARSEST_PX_PER_MM, _FINEST_PX_PER_MM))
    offset, size = spec.paper.offset_mm, spec.paper.size_mm
    half_mm = 0.5 / px_per_mm
    raster = Raster(-offset[0] + half_mm, -offset[1] + half_mm, px_per_mm)
    return raster, (round(size[1] * px_per_mm), round(size[0] * px_per_mm))


def _inks(
    composition: Composition,
    damage: Damage,
    spec: PageSpec,
    raster: Raster,
    shape: tuple[int, int],
    rng: np.random.Generator,
) -> list[tuple[np.ndarray, Colour]]:
    """Amount of each ink on the sheet with its colour: grid, pen, letters."""
    pen = np.zeros(shape, np.float32)
    for stroke in composition.strokes:
        amount = 1 - spec.pen.uneven * _slow(len(stroke.x_mm), rng) if stroke.trace else 1.0
        draw_stroke(pen, raster, stroke.x_mm, stroke.y_mm, pen_mm=stroke.width_mm, amount=amount)
    letters = pen if spec.letters.colour == spec.pen.colour else np.zeros(shape, np.float32)
    for word in composition.words:
        draw_word(
            letters,
            raster,
            word.text,
            word.x_mm,
            word.y_mm,
            font=word.font,
            height_mm=word.height_mm,
        )
    inks = [(draw_grid(spec.paper, raster, shape), spec.paper.grid_colour), (pen, spec.pen.colour)]
    if letters is not pen:
        inks.append((letters, spec.letters.colour))
    if damage.remaining is not None:
        pen *= damage.remaining
    inks += damage.inks
    return [(_in_steps(amount), colour) for amount, colour in inks]


def _in_steps(amount: np.ndarray) -> np.ndarray:
    """Amounts of ink as whole steps for the tables of light."""
    return np.clip(amount * _INK_STEPS, 0, _MOST_INK * _INK_STEPS).astype(np.uint16)


def _slow(n: int, rng: np.random.Generator) -> np.ndarray:
    """A slow random variation between 0 and 1 along a stroke of n points."""
    knots = rng.uniform(0, 1, max(n // 60, 2))
    return np.interp(np.arange(n), np.linspace(0, n - 1, len(knots)), knots)


def _channel(
    k: int,
    inks: list[tuple[np.ndarray, Colour]],
    damage: Damage,
    spec: PageSpec,
    raster: Raster,
    page_map: CaptureMap,
) -> np.ndarray:
    """Linear light of one colour channel at every pixel of the picture."""
    paper_light = to_light(spec.paper.colour[k])
    light: np.ndarray = np.full(inks[0][0].shape, paper_light, np.float32)
    for steps, colour in inks:
        passing = max(to_light(colour[k]) / paper_light, 1e-3)
        amount = np.arange(_MOST_INK * _INK_STEPS + 1, dtype=np.float32) / _INK_STEPS
        # Partly covered: light is shared by area. Covered more than once: densities add.
        light *= np.where(amount < 1, 1 - amount * (1 - passing), passing**amount)[steps]
    outside = to_light(_LID[k] if spec.capture.photo is None else spec.capture.photo.desk[k])
    for x_mm, y_mm, radius_mm in damage.holes_mm:
        centre = (round(raster.col(x_mm)), round(raster.row(y_mm)))
        cv2.circle(light, centre, round(radius_mm * raster.px_per_mm), outside, -1)
    pixel_mm = MM_PER_INCH / np.array(spec.capture.dpi)
    if spec.capture.turn_deg % 180:
        pixel_mm = pixel_mm[::-1]
    # A square aperture of width a has variance a^2/12; bilinear sampling adds none to speak of.
    sigma_px = np.hypot(spec.capture.blur_mm, pixel_mm / np.sqrt(12)) * raster.px_per_mm
    light = cv2.GaussianBlur(light, (0, 0), sigmaX=float(sigma_px[0]), sigmaY=float(sigma_px[1]))
    return resample(light, raster, page_map, outside)

"""Sheets as a perfect reading of the paper would hand them on, drawn without scanner or camera.

Each test of a later stage starts from these, so that it judges that stage alone. A few pages that
went through the drawn scanner stand here too, for the stages that begin with pixels.
"""

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from digitize.ink import Ink
from digitize.pages import Page
from digitize.rows import Rows, find_rows
from digitize.sheet import Raster
from digitize.tracing import PageSource
from digitize.words import Printing, read_printing
from tests.drawn.composition import Composition, compose
from tests.drawn.heart import HeartSpec, Recording, record_model
from tests.drawn.lettering import draw_word
from tests.drawn.page import DrawnPage, draw_page
from tests.drawn.pen import draw_stroke
from tests.drawn.spec import CaptureSpec, LayoutSpec, LetterSpec, PageSpec, PaperSpec

PX_PER_MM = 8.0
QUIET_HEART = HeartSpec(variation=0.0)
STANDARD_RUN = LetterSpec(footer=("25 mm/s   10 mm/mV",))
# 3x4 with a strip of II on the smallest sheet that holds it.
CHART = PageSpec(
    paper=PaperSpec(size_mm=(290.0, 140.0), offset_mm=(8.5, 7.0)),
    letters=STANDARD_RUN,
    layout=LayoutSpec(top_mm=24.0, pitch_mm=26.0),
)
# One lead of 3 s, big enough for a grid, small enough to be drawn in a moment.
STRIP = PageSpec(
    paper=PaperSpec(size_mm=(110.0, 70.0), offset_mm=(6.3, 4.7)),
    letters=LetterSpec(label_place="none"),
    layout=LayoutSpec(rows=1, columns=1, strips=("II",), panel_s=3.0, top_mm=38.0),
    capture=CaptureSpec(dpi=(200.0, 200.0), noise=1.0),
)


@dataclass(frozen=True, eq=False)
class PerfectSheet:
    """Ink without paper, grid, blur or noise, and what was drawn."""

    ink: Ink
    composition: Composition


@lru_cache(maxsize=32)
def perfect_sheet(spec: PageSpec, heart: HeartSpec = QUIET_HEART) -> PerfectSheet:
    """The ink of a composed page on a millimetre raster, exactly where it was meant."""
    left_mm, top_mm = (-offset for offset in spec.paper.offset_mm)
    wide_mm, high_mm = spec.paper.size_mm
    half_mm = 0.5 / PX_PER_MM
    raster = Raster(left_mm + half_mm, top_mm + half_mm, PX_PER_MM)
    density = np.zeros((round(high_mm * PX_PER_MM), round(wide_mm * PX_PER_MM)), np.float32)
    composition = compose(record_model(heart), spec)
    for line in composition.strokes:
        draw_stroke(density, raster, line.x_mm, line.y_mm, pen_mm=line.width_mm)
    for word in composition.words:
        place = (word.text, word.x_mm, word.y_mm)
        draw_word(density, raster, *place, font=word.font, height_mm=word.height_mm)
    ink = Ink(
        density=np.minimum(density, 1),
        hidden=np.zeros(density.shape, bool),
        raster=raster,
        noise=0.004,
        ruled_mm=(left_mm, top_mm, left_mm + wide_mm, top_mm + high_mm),
        source_px_per_mm=(PX_PER_MM, PX_PER_MM),
    )
    return PerfectSheet(ink, composition)


@lru_cache(maxsize=32)
def read_words(spec: PageSpec, heart: HeartSpec = QUIET_HEART) -> Printing:
    """The printing of a perfect sheet; reading it is the slowest step by far."""
    return read_printing(perfect_sheet(spec, heart).ink)


@lru_cache(maxsize=32)
def rows_of(spec: PageSpec, heart: HeartSpec = QUIET_HEART) -> Rows:
    """The rows of a perfect sheet."""
    return find_rows(perfect_sheet(spec, heart).ink, read_words(spec, heart).letters)


@lru_cache(maxsize=32)
def drawn_strip(
    capture: CaptureSpec = STRIP.capture, paper: PaperSpec = STRIP.paper, flat: bool = False
) -> DrawnPage:
    """The small page of one lead as scanned; `flat`: a line that rises by 2 mm in 75.

    So it meets the pixels and the grid at every height, as a wandering baseline does.
    """
    spec = replace(STRIP, capture=capture, paper=paper)
    recording = record_model(QUIET_HEART)
    if flat:
        recording = Recording(np.tile(np.arange(5000) / recording.fs_hz * 0.2 / 3.0, (12, 1)))
    return draw_page(recording, spec)


def page_of(drawn: DrawnPage, *, dpi: tuple[float, float] | None = None) -> Page:
    """A drawn page as the reader of files hands it on; without a resolution unless it is given."""
    rows, cols = drawn.pixels.shape[:2]
    source = PageSource("drawn.png", "00" * 32, 1, cols, rows, dpi)
    return Page(drawn.pixels, source, bilevel=drawn.bilevel)

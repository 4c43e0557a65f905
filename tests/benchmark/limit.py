"""The limit of a page: how well its traces can be read when everything but the pen is known.

The same ECG is drawn with the same pen and captured in the same way (resolution, blur, noise, tilt
or camera), but on bare paper, every trace apart from the others. The true map flattens it, the
true colours give the ink, the true layout says where each lead runs; what is left is the pen, the
optics, the pixels and the fit of the pen line.
"""

from dataclasses import replace

import numpy as np

from digitize.calibrate import to_panels
from digitize.grid import Grid
from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.pages import Page
from digitize.sheet import Box, Sheet, flatten
from digitize.trace import trace_panels
from digitize.tracing import Known, PageSource
from tests.benchmark.score import LeadScore, score_panel
from tests.drawn.capture import MM_PER_INCH
from tests.drawn.composition import Composition, PanelTruth, Stroke, compose
from tests.drawn.heart import Recording
from tests.drawn.page import DrawnPage, draw_composition
from tests.drawn.spec import PageSpec, WearSpec

_APART_MM = 5.0  # bare paper between any two traces
_MARGIN_MM = 10.0


def limit(recording: Recording, spec: PageSpec) -> tuple[LeadScore, ...]:
    """Return the best scores that the pen fit can reach on a page, panel by panel."""
    panels, size_mm = _spread(compose(recording, spec).panels)
    bare = _bare(spec, size_mm)
    strokes = tuple(Stroke(p.x_mm, p.y_mm, spec.pen.width_mm, trace=True) for p in panels)
    drawn = draw_composition(recording, Composition(strokes, (), panels, ()), bare)
    ink, layout = _ink(_flat(drawn), drawn), _layout(panels, drawn)
    read = to_panels(layout, trace_panels(ink, layout))
    return tuple(score_panel(true, panel) for true, panel in zip(panels, read, strict=True))


def _spread(
    panels: tuple[PanelTruth, ...],
) -> tuple[tuple[PanelTruth, ...], tuple[float, float]]:
    """The panels moved apart, and the sheet that holds them."""
    moved, top_mm = [], 0.0
    for row in sorted({panel.row for panel in panels}):
        inside = [panel for panel in panels if panel.row == row]
        above_mm = max(float(p.mv.max()) * p.gain_mm_mv for p in inside)
        below_mm = max(float(-p.mv.min()) * p.gain_mm_mv for p in inside)
        baseline_mm = top_mm + above_mm
        bottom_mm = baseline_mm + below_mm
        left_mm = 0.0
        for panel in inside:
            right_mm = left_mm + len(panel.mv) / panel.fs_hz * panel.speed_mm_s
            box = (left_mm, top_mm - _APART_MM / 2, right_mm, bottom_mm + _APART_MM / 2)
            moved.append(replace(panel, left_mm=left_mm, baseline_mm=baseline_mm, box_mm=box))
            left_mm = right_mm + _APART_MM
        top_mm = bottom_mm + _APART_MM
    wide_mm = max(panel.box_mm[2] for panel in moved) + 2 * _MARGIN_MM
    return tuple(moved), (float(np.ceil(wide_mm)), float(np.ceil(top_mm + 2 * _MARGIN_MM)))


def _bare(spec: PageSpec, size_mm: tuple[float, float]) -> PageSpec:
    """The page without grid, wear and uneven light, on a sheet of another size."""
    offset_mm = (_MARGIN_MM, _MARGIN_MM)
    paper = replace(spec.paper, grid="none", frame_mm=None, size_mm=size_mm, offset_mm=offset_mm)
    capture = replace(spec.capture, turn_deg=0, dropped_lines=0)
    if capture.photo is not None:
        even = replace(capture.photo, shade=0.0, shadow=0.0, corners=0.0, finger=False)
        capture = replace(capture, photo=even)
    return replace(spec, paper=paper, capture=capture, wear=WearSpec())


def _flat(drawn: DrawnPage) -> Sheet:
    """The page flattened by its true map."""
    high_px, wide_px = drawn.pixels.shape[:2]
    source = PageSource("bare.png", "0", 1, wide_px, high_px, drawn.spec.capture.dpi)
    page_map = drawn.truth.page_map
    across, down = (dpi / MM_PER_INCH for dpi in drawn.spec.capture.dpi)
    grid = Grid(
        page_map,  # type: ignore[arg-type]  # the truth has the same two functions
        "given",
        "truth",
        (across, down),
        0.0,
        0.0,
        page_map.extent_mm,
    )
    return flatten(Page(drawn.pixels, source, bilevel=drawn.bilevel), grid)


def _ink(sheet: Sheet, drawn: DrawnPage) -> Ink:
    """Coverage by ink, from the true colours of ink and paper."""
    spec = drawn.spec
    if drawn.bilevel:
        density = 1 - sheet.pixels / np.float32(255)
    else:
        pixels = np.atleast_3d(sheet.pixels)
        bare = np.array([np.percentile(pixels[..., k], 60) for k in range(pixels.shape[2])])
        wanted = [0, 1, 2] if len(bare) == 3 else [spec.capture.grey_light]
        cast = (bare / np.array(spec.paper.colour)[wanted]) ** 2.2
        dark = (np.array(spec.pen.colour)[wanted] / 255) ** 2.2 * cast
        light = (pixels / np.float32(255)) ** np.float32(2.2)
        contrast = (bare / 255) ** 2.2 - dark
        density = (((bare / 255) ** 2.2 - light) @ contrast) / (contrast @ contrast)
    noise = 1.4826 * float(np.median(np.abs(density - np.median(density))))
    return Ink(
        density=density.astype(np.float32),
        hidden=~sheet.inside,
        raster=sheet.raster,
        noise=max(noise, 0.004),
        ruled_mm=sheet.ruled_mm,
        source_px_per_mm=sheet.source_px_per_mm,
        bilevel=sheet.bilevel,
    )


def _layout(panels: tuple[PanelTruth, ...], drawn: DrawnPage) -> Layout:
    """The true layout, as the tracing stage wants it."""
    places = tuple(
        PanelPlace(
            lead=panel.lead,
            lead_source="given",
            lead_score=1.0,
            strip=panel.strip,
            row=panel.row,
            column=panel.column,
            box=Box(*panel.box_mm),
            baseline_mm=panel.baseline_mm,
            start_s=panel.start_s,
            speed_mm_s=panel.speed_mm_s,
            gain_mm_mv=panel.gain_mm_mv,
        )
        for panel in panels
    )
    truth = drawn.truth
    return Layout(
        Known(truth.layout, "given"),
        Known(truth.speed_mm_s, "given"),
        Known(truth.gain_mm_mv, "given"),
        Known(truth.timing, "given"),
        places,
        (),
        (),
    )

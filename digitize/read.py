"""From a page of pixels to calibrated leads: every stage, in order."""

import dataclasses
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from traceback import extract_tb

import cv2

from digitize.calibrate import to_panels
from digitize.checks import find_checks
from digitize.drawn_traces import drawn_strokes
from digitize.drawn_words import drawn_printing
from digitize.errors import InputError, NoGrid, ProgramFault, at
from digitize.evidence import require_ecg
from digitize.geometry import to_geometry
from digitize.grid import Grid, find_grid
from digitize.gridless import find_plain_scale
from digitize.ink import Ink, find_ink
from digitize.layout import Layout, find_layout
from digitize.marks import Mark, find_marks
from digitize.options import Options
from digitize.pages import Page, open_pages
from digitize.recut import recut
from digitize.retrace import retrace
from digitize.rows import Rows, find_rows
from digitize.rules import lettering
from digitize.ruling import find_ruling
from digitize.sheet import Box, Sheet, flatten
from digitize.strips import name_strips, settle_timing
from digitize.trace import Stroke, trace_panels
from digitize.tracing import Panel, Tracing
from digitize.unseen import seen_marks, seen_printing
from digitize.upright import find_turn, turn_page
from digitize.words import Printing, apart_from_traces, read_printing

# What arithmetic on an unforeseen page can raise: LinAlgError is a ValueError.
FAULTS = (ArithmeticError, LookupError, TypeError, ValueError, MemoryError, cv2.error)


@dataclass(frozen=True, eq=False)
class Apart:
    """What stands in the ink apart from traces, and where the rows of trace run."""

    marks: tuple[Mark, ...]
    printing: Printing
    rows: Rows


@dataclass(frozen=True, eq=False)
class Stages:
    """One page, upright, and what each stage made of it."""

    page: Page
    grid: Grid
    sheet: Sheet
    ink: Ink
    apart: Apart
    layout: Layout
    strokes: tuple[Stroke, ...]
    tracing: Tracing


def read_page(
    page: Page, options: Options, *, on_stage: Callable[[str], None] = lambda name: None
) -> Stages:
    """Return one page read from end to end.

    Parameters
    ----------
    page : Page
        As `open_pages` gives it.
    options : Options
        What a person knows better than the page.
    on_stage : callable, optional
        Called with the name of each stage as it begins, and with "" after the last.

    Raises
    ------
    NoGrid, NoTrace, PoorResolution
        The page cannot be calibrated, or there is no ECG on it.
    """
    on_stage("grid")
    grid = _grid(page, options)
    on_stage("sheet")
    sheet = flatten(page, grid)
    on_stage("ink")
    ink = find_ink(sheet)
    on_stage("printing")
    marks = tuple(find_marks(ink))
    letters = lettering(ink, marks)
    printing = apart_from_traces(_printing(page, grid, letters), ink)
    turn_deg = find_turn(ink, printing) if options.turn_deg is None else options.turn_deg
    if turn_deg:
        return read_turned(page, turn_deg, options, on_stage)
    on_stage("layout")
    rows = find_rows(ink, printing.letters)
    layout = find_layout(letters, printing, rows, marks, options)
    on_stage("trace")
    layout, strokes = _traced(page, grid, ink, layout)
    on_stage("checks")
    stages = _completed(
        page, grid, sheet, ink, Apart(marks, printing, rows), layout, strokes, options
    )
    on_stage("")
    return stages


def read_ink(stages: Stages, ink: Ink, options: Options) -> Stages:
    """Return an upright page read once more, from this ink on; see `read_page`.

    What stands where the ink is hidden is no longer seen. The lines of rows that were followed
    before are kept, unless ink was hidden beside them.

    Raises
    ------
    NoTrace
        There is no ECG in this ink.
    """
    page, grid, apart = stages.page, stages.grid, stages.apart
    marks = seen_marks(apart.marks, ink)
    printing = seen_printing(apart.printing, ink)
    rows = apart.rows if ink is stages.ink else find_rows(ink, printing.letters)
    layout = find_layout(lettering(ink, marks), printing, rows, marks, options)
    strokes = None
    if page.drawing is None:
        strokes = recut(stages.layout, stages.strokes, stages.ink, layout, ink)
    if strokes is None:
        layout, strokes = _traced(page, grid, ink, layout)
    found = Apart(marks, printing, rows)
    return _completed(page, grid, stages.sheet, ink, found, layout, strokes, options)


def _completed(
    page: Page,
    grid: Grid,
    sheet: Sheet,
    ink: Ink,
    apart: Apart,
    layout: Layout,
    strokes: tuple[Stroke, ...],
    options: Options,
) -> Stages:
    """The stages with the tracing that they lead to."""
    panels = name_strips(to_panels(layout, strokes))
    panels, timing = settle_timing(panels, layout.timing)
    layout = dataclasses.replace(layout, timing=timing)
    tracing = to_tracing(page, grid, layout, strokes, panels, options)
    require_ecg(tracing)
    tracing = dataclasses.replace(tracing, checks=find_checks(tracing))
    return Stages(page, grid, sheet, ink, apart, layout, strokes, tracing)


def read_part(stages: Stages, ink: Ink, changed: Box) -> Stages:
    """Return the stages of a page whose ink was changed in one place; its layout is kept."""
    page, grid, layout = stages.page, stages.grid, stages.layout
    if page.drawing is None:
        strokes = retrace(ink, layout, stages.strokes, changed)
    else:
        layout, strokes = _traced(page, grid, ink, layout)
    return dataclasses.replace(stages, ink=ink, layout=layout, strokes=strokes)


def _grid(page: Page, options: Options) -> Grid:
    """The ruling that a document draws, else that of the picture, else what tells the scale."""
    ruling = find_ruling(page.drawing, page.pixels.shape[:2]) if page.drawing else None
    if ruling is not None:
        return ruling
    try:
        return find_grid(page)
    except NoGrid:
        return find_plain_scale(page, options)


def _printing(page: Page, grid: Grid, ink: Ink) -> Printing:
    """The document's own words where they name leads, else what is read in the picture."""
    printing = drawn_printing(page.drawing, grid) if page.drawing else None
    return printing or read_printing(ink)


def _traced(page: Page, grid: Grid, ink: Ink, layout: Layout) -> tuple[Layout, tuple[Stroke, ...]]:
    """The lines that a document draws, and for panels without one the ink followed."""
    if page.drawing is None:
        return layout, trace_panels(ink, layout)
    layout, drawn = drawn_strokes(page.drawing, grid, layout, ink)
    if None not in drawn:
        return layout, tuple(stroke for stroke in drawn if stroke is not None)
    traced = trace_panels(ink, layout)
    return layout, tuple(d or t for d, t in zip(drawn, traced, strict=True))


def read_turned(
    page: Page,
    turn_deg: int,
    options: Options,
    on_stage: Callable[[str], None] = lambda name: None,
) -> Stages:
    """Return the page read after a clockwise turn, which is kept with the geometry."""
    upright = dataclasses.replace(options, turn_deg=0)
    turned = turn_page(page, turn_deg)
    if page.drawing is not None:
        drawing = page.drawing.turned(turn_deg, page.pixels.shape[:2])
        turned = dataclasses.replace(turned, drawing=drawing)
    stages = read_page(turned, upright, on_stage=on_stage)
    tracing = dataclasses.replace(
        stages.tracing,
        source=page.source,
        geometry={**stages.tracing.geometry, "turn_deg": turn_deg},
        options=dataclasses.asdict(options),
    )
    return dataclasses.replace(stages, tracing=tracing)


def read_stages(
    path: str | Path,
    options: Options,
    *,
    on_error: Callable[[InputError], None] | None = None,
    on_stage: Callable[[str], None] = lambda name: None,
) -> Iterator[Stages]:
    """Every page of a file, read from end to end; see `digitize.read_pages`.

    A mistake of the program's own is raised as it is, unless `on_error` is there to be told: then
    it costs this page alone.
    """
    on_stage("page")
    for page in open_pages(path, max_megapixels=options.max_megapixels, on_error=on_error):
        stages = read_or_tell(page, options, on_error=on_error, on_stage=on_stage)
        if stages is not None:
            yield stages
        on_stage("page")


def read_or_tell(
    page: Page,
    options: Options,
    *,
    on_error: Callable[[InputError], None] | None = None,
    on_stage: Callable[[str], None] = lambda name: None,
) -> Stages | None:
    """Return one page read, or None where `on_error` was told why it cannot be."""
    source = page.source
    try:
        return read_page(page, options, on_stage=on_stage)
    except InputError as error:
        at(error, source.file_name, source.page)
        if on_error is None:
            raise
        on_error(error)
    except FAULTS as fault:
        if on_error is None:
            raise
        on_error(at(program_fault(fault), source.file_name, source.page))
    return None


def to_tracing(
    page: Page,
    grid: Grid,
    layout: Layout,
    strokes: tuple[Stroke, ...],
    panels: tuple[Panel, ...],
    options: Options,
) -> Tracing:
    """Return the panels with where they come from and all that scales them."""
    return Tracing(
        source=page.source,
        panels=panels,
        speed_mm_s=layout.speed_mm_s,
        gain_mm_mv=layout.gain_mm_mv,
        layout=layout.name,
        timing=layout.timing,
        geometry=to_geometry(grid, layout, strokes),
        options=dataclasses.asdict(options),
    )


def program_fault(fault: Exception) -> ProgramFault:
    """Return what is said of a mistake of our own: enough to find it, nothing from the page."""
    if isinstance(fault, MemoryError):
        return ProgramFault("there is not memory enough for this page: scan it at 300 dpi")
    ours = Path(__file__).parent
    frames = [f for f in extract_tb(fault.__traceback__) if ours in Path(f.filename).parents]
    where = (
        f"{type(fault).__name__} at line {frames[-1].lineno} of {Path(frames[-1].filename).name}"
    )
    return ProgramFault(f"the program failed on this page ({where}): please report it")

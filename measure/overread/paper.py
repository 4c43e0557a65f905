"""The stages from layout to tracing once more, with what a person corrected among their inputs.

Names, scale and edges go into the layout; struck out and redrawn stretches into the strokes. The
panels, the checks and the record are then made by the stages themselves.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from digitize.calibrate import to_panels
from digitize.checks import find_checks
from digitize.layout import Layout, PanelPlace
from digitize.options import Options
from digitize.read import Stages, to_tracing
from digitize.recut import joined
from digitize.refit import refit
from digitize.strips import name_strips, settle_timing
from digitize.trace import Stroke
from digitize.tracing import Known, Tracing
from measure.overread.corrections import (
    PLACES,
    ColumnTiming,
    Correction,
    Flip,
    Gain,
    LeadName,
    PanelEdges,
    Redraw,
    Refused,
    Speed,
    StrikeOut,
    Swap,
)

_STRUCK = "a stretch was struck out by a person"


def corrected_tracing(stages: Stages, corrections: Sequence[Correction]) -> Tracing:
    """Return the tracing of a page with the corrections of layout and trace applied in order.

    Raises
    ------
    Refused
        A correction names a panel that is not there.
    """
    layout, strokes = stages.layout, stages.strokes
    for correction in corrections:
        if isinstance(correction, PLACES):
            layout = _correct_layout(layout, correction)
    strokes = _cut_again(stages.layout, layout, strokes)
    for correction in corrections:
        if isinstance(correction, StrikeOut):
            strokes = _with(strokes, correction.panel, _struck(strokes, correction))
        elif isinstance(correction, Redraw):
            stroke = refit(
                strokes, _known(strokes, correction.panel), correction.points, stages.ink
            )
            strokes = _with(strokes, correction.panel, stroke)
    panels, timing = settle_timing(name_strips(to_panels(layout, strokes)), layout.timing)
    layout = replace(layout, timing=timing)
    found = stages.tracing
    tracing = to_tracing(stages.page, stages.grid, layout, strokes, panels, Options())
    tracing = replace(
        tracing,
        source=found.source,
        geometry={**tracing.geometry, "turn_deg": found.geometry["turn_deg"]},
        options=found.options,
    )
    return replace(tracing, checks=find_checks(tracing))


def _correct_layout(layout: Layout, correction: Correction) -> Layout:
    """The layout with one correction in it."""
    match correction:
        case LeadName(panel, lead):
            return _named(layout, panel, lead)
        case Swap(panel, other):
            names = (_panel(layout, panel).lead, _panel(layout, other).lead)
            return _named(_named(layout, panel, names[1]), other, names[0])
        case Flip(panel):
            lead = _panel(layout, panel).lead
            return _named(layout, panel, lead[1:] if lead.startswith("-") else f"-{lead}")
        case Speed(mm_s):
            panels = tuple(
                replace(p, speed_mm_s=mm_s, start_s=p.start_s * p.speed_mm_s / mm_s)
                for p in layout.panels
            )
            return replace(layout, panels=panels, speed_mm_s=Known(mm_s, "given"))
        case Gain(mm_mv, None):
            panels = tuple(replace(p, gain_mm_mv=mm_mv) for p in layout.panels)
            return replace(layout, panels=panels, gain_mm_mv=Known(mm_mv, "given"))
        case Gain(mm_mv, int(panel)):
            return _placed(layout, panel, replace(_panel(layout, panel), gain_mm_mv=mm_mv))
        case ColumnTiming(timing):
            return _timed(layout, timing)
        case PanelEdges(panel, left_mm, right_mm):
            place = _panel(layout, panel)
            later_s = (left_mm - place.box.left_mm) / place.speed_mm_s
            box = replace(place.box, left_mm=left_mm, right_mm=right_mm)
            start_s = place.start_s + later_s
            return _placed(layout, panel, replace(place, box=box, start_s=start_s))
    return layout


def _timed(layout: Layout, timing: str) -> Layout:
    """The layout with its columns one after the other, or all from the same instant."""
    first_mm = min(p.box.left_mm for p in layout.panels)
    panels = tuple(
        replace(
            p,
            start_s=(p.box.left_mm - first_mm) / p.speed_mm_s if timing == "consecutive" else 0.0,
        )
        for p in layout.panels
    )
    return replace(layout, panels=panels, timing=Known(timing, "given"))


def _panel(layout: Layout, panel: int) -> PanelPlace:
    return layout.panels[_known(layout.panels, panel)]


def _known(of: Sequence[object], panel: int) -> int:
    """The number of a panel that is there."""
    if not 0 <= panel < len(of):
        raise Refused(f"there is no panel {panel}")
    return panel


def _named(layout: Layout, panel: int, lead: str) -> Layout:
    place = replace(_panel(layout, panel), lead=lead, lead_source="given", lead_score=1.0)
    return _placed(layout, panel, place)


def _placed(layout: Layout, panel: int, place: PanelPlace) -> Layout:
    panels = tuple(place if k == panel else p for k, p in enumerate(layout.panels))
    return replace(layout, panels=panels)


def _with(strokes: tuple[Stroke, ...], panel: int, stroke: Stroke) -> tuple[Stroke, ...]:
    return tuple(stroke if k == panel else s for k, s in enumerate(strokes))


def _cut_again(before: Layout, after: Layout, strokes: tuple[Stroke, ...]) -> tuple[Stroke, ...]:
    """The strokes of panels whose edges moved, cut out of the whole line of their row."""
    cut = []
    for k, (old, new) in enumerate(zip(before.panels, after.panels, strict=True)):
        if old.box == new.box:
            cut.append(strokes[k])
            continue
        beside = [s for s, p in zip(strokes, before.panels, strict=True) if p.row == old.row]
        cut.append(joined(strokes[k], beside))
    return tuple(cut)


def _struck(strokes: tuple[Stroke, ...], correction: StrikeOut) -> Stroke:
    """A stroke without what was struck out."""
    stroke = strokes[_known(strokes, correction.panel)]
    out = (stroke.x_mm >= correction.left_mm) & (stroke.x_mm <= correction.right_mm)
    return replace(
        stroke,
        y_mm=np.where(out, np.nan, stroke.y_mm),
        sigma_mm=np.where(out, np.nan, stroke.sigma_mm),
        notes=tuple(dict.fromkeys((*stroke.notes, _STRUCK))),
    )

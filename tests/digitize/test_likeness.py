"""Strips named by the name on the page that looks the same."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.labels import LabelFit, Slot
from digitize.likeness import names_by_likeness
from digitize.sheet import Box
from tests.digitize.drawn_ink import CHART, perfect_sheet
from tests.drawn.lettering import width_mm


def fit_of(spec, *, hidden: bool) -> tuple[LabelFit, list[Slot]]:
    """Where the names of a page stand, with the strip's name expected or not."""
    slots, places = [], {}
    for panel in perfect_sheet(spec).composition.panels:
        name = None if panel.strip and hidden else panel.lead
        slots.append(Slot(panel.row, panel.column, panel.left_mm, panel.baseline_mm, name))
        foot_mm = panel.baseline_mm - 0.3 * spec.layout.pitch_mm
        left_mm = panel.left_mm + 1.0
        wide_mm = width_mm(panel.lead, spec.letters.font, spec.letters.label_mm)
        places[panel.row, panel.column] = Box(
            left_mm, foot_mm - spec.letters.label_mm, left_mm + wide_mm, foot_mm
        )
    return LabelFit(0.0, {}, None, False, tuple(places.values()), None, places), slots


@pytest.mark.parametrize("lead", ["I", "II", "III", "V1", "V5", "aVF"])
@pytest.mark.parametrize("font", ["sans", "serif"])
def test_a_strip_is_named_after_the_lead_whose_name_looks_the_same(lead, font):
    spec = replace(
        CHART,
        letters=replace(CHART.letters, font=font),
        layout=replace(CHART.layout, strips=(lead,)),
    )
    fit, slots = fit_of(spec, hidden=True)
    ((name, alike),) = names_by_likeness(perfect_sheet(spec).ink, fit, slots).values()
    assert name == lead
    assert alike > 0.8


def test_bare_paper_looks_like_no_name():
    fit, slots = fit_of(CHART, hidden=True)
    ink = perfect_sheet(CHART).ink
    strip = next(slot for slot in slots if slot.name is None)
    density = ink.density.copy()
    density[int(ink.raster.row(strip.y_mm - 14)) : int(ink.raster.row(strip.y_mm - 3))] = 0
    noise = np.random.default_rng(3).normal(0, 0.05, density.shape).astype(np.float32)
    assert names_by_likeness(replace(ink, density=density + noise), fit, slots) == {}

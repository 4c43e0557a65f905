"""Lines alone are no ECG; a chart that names its leads or its run is."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.errors import NoTrace
from digitize.evidence import require_ecg
from digitize.geometry import to_geometry
from digitize.tracing import Known
from tests.digitize.made_tracing import grid, layout_of, tracing


def page(*, unexplained=0.02, read=1.0, lead_source="assumed", **fields):
    """A page of which nothing is known but its traces, unless told otherwise."""
    known = {"speed_mm_s": Known(25.0, "found"), "gain_mm_mv": Known(10.0, "assumed"), **fields}
    made = tracing(**known)
    layout, strokes = layout_of(made)
    strokes = tuple(replace(stroke, unexplained=unexplained) for stroke in strokes)
    geometry = to_geometry(grid(), layout, strokes)
    panels = []
    for panel in made.panels:
        mv = panel.mv.copy()
        mv[round(read * len(mv)) :] = np.nan
        panels.append(replace(panel, mv=mv, lead_source=lead_source))
    return replace(made, panels=tuple(panels), geometry=geometry)


@pytest.mark.parametrize(
    "sign",
    [
        {"lead_source": "printed"},
        {"speed_mm_s": Known(25.0, "printed")},
        {"gain_mm_mv": Known(10.0, "given")},
    ],
)
def test_one_sign_is_enough_even_on_a_worn_page(sign):
    require_ecg(page(unexplained=0.5, read=0.6, **sign))


def test_unbroken_clean_traces_are_believed_without_a_word():
    require_ecg(page())


def test_a_calibration_mark_is_no_sign_for_letters_look_like_one():
    flawed = page(read=0.8)
    assert flawed.geometry["marks_mm"]
    with pytest.raises(NoTrace):
        require_ecg(flawed)


@pytest.mark.parametrize("flaw", [{"unexplained": 0.3}, {"read": 0.8}])
def test_broken_lines_without_a_word_are_not(flaw):
    with pytest.raises(NoTrace, match="--layout"):
        require_ecg(page(**flaw))


def test_one_name_among_thirteen_is_chance():
    flawed = page(read=0.8)
    named = (replace(flawed.panels[0], lead_source="printed"), *flawed.panels[1:])
    with pytest.raises(NoTrace):
        require_ecg(replace(flawed, panels=named))


def test_traces_that_could_not_be_followed_are_no_ecg_whatever_is_printed():
    with pytest.raises(NoTrace, match="could be followed"):
        require_ecg(page(read=0.4, lead_source="printed"))
    with pytest.raises(NoTrace):
        require_ecg(tracing(()))

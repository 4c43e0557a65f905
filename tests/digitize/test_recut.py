"""Traces of another arrangement cut out of lines that are known, two rows of two columns."""

from dataclasses import replace

import numpy as np
import pytest

from digitize.ink import Ink
from digitize.layout import Layout, PanelPlace
from digitize.recut import joined, recut
from digitize.sheet import Box, Raster
from digitize.trace import Stroke, redraw
from digitize.tracing import Known

WIDE_MM = 50.0  # of each panel; rows stand 30 mm apart


def place(lead, row, left_mm, right_mm, moved_mm=0.0):
    middle = 20.0 + 30.0 * row + moved_mm
    box = Box(left_mm, middle - 15, right_mm, middle + 15)
    return PanelPlace(lead, "found", 1.0, False, row, 0, box, middle, 0.0, 25.0, 10.0)


def layout(*places):
    known = Known("2x2", "found")
    return Layout(known, known, known, known, places, (), ())


def line(panel, unexplained=0.1, notes=()):
    """A wave that runs on from panel to panel of a row."""
    box = panel.box
    x_mm = box.left_mm + 0.05 * np.arange(round((box.right_mm - box.left_mm) / 0.05) + 1)
    return Stroke(x_mm, wave(x_mm, panel), np.full(len(x_mm), 0.02), 0.3, unexplained, notes)


def wave(x_mm, panel):
    return panel.baseline_mm + 3 * np.sin(x_mm / 4)


BEFORE = layout(
    *(place(f"{r}{c}", r, 50.0 * c, 50.0 * c + WIDE_MM) for r in (0, 1) for c in (0, 1))
)
STROKES = tuple(line(panel) for panel in BEFORE.panels)
INK = Ink(
    density=np.zeros((400, 500), np.float32),
    hidden=np.zeros((400, 500), bool),
    raster=Raster(0.0, 0.0, 5.0),
    noise=0.01,
    ruled_mm=(0.0, 0.0, 100.0, 80.0),
    source_px_per_mm=(5.0, 5.0),
)


def hidden(inked):
    """The ink with a region of the upper row hidden, in which there was ink or none."""
    density, unseen = INK.density.copy(), INK.hidden.copy()
    density[60:70, 100:110] = 1.0 if inked else 0.0
    unseen[60:70, 100:110] = True
    return replace(INK, density=density), replace(INK, hidden=unseen)


def test_the_same_panels_have_the_same_lines():
    again = recut(BEFORE, STROKES, INK, BEFORE, INK)
    for new, old in zip(again, STROKES, strict=True):
        np.testing.assert_allclose(new.x_mm, old.x_mm, atol=1e-9)
        np.testing.assert_allclose(new.y_mm, old.y_mm, atol=1e-6)


@pytest.mark.parametrize("edges", [(0.0, 100.0), (20.0, 70.0), (50.0, 75.02)])
def test_a_panel_across_the_columns_has_the_line_of_both(edges):
    wanted = place("II", 1, *edges)
    (cut,) = recut(BEFORE, STROKES, INK, layout(wanted), INK)
    assert (cut.x_mm[0], len(cut.x_mm)) == (edges[0], int((edges[1] - edges[0]) / 0.05 + 1e-6) + 1)
    assert np.isfinite(cut.y_mm).all()
    # half a step off the nodes the line between them is off by its bend: 3 / 16 / 8 x 0.05^2 mm
    np.testing.assert_allclose(cut.y_mm, wave(cut.x_mm, wanted), atol=1e-4)


def test_what_is_missing_or_doubtful_stays_so():
    missing = STROKES[0].y_mm.copy()
    missing[200:300] = np.nan  # from 10 to 15 mm
    parts = (replace(STROKES[0], y_mm=missing, notes=("a gap",)), line(BEFORE.panels[1], 0.4))
    (cut,) = recut(BEFORE, (*parts, *STROKES[2:]), INK, layout(place("I", 0, 5.0, 80.0)), INK)
    gap = (cut.x_mm > 9.99) & (cut.x_mm < 14.96)
    assert np.isnan(cut.y_mm[gap]).all()
    assert np.isfinite(cut.y_mm[~gap]).all()
    assert (cut.unexplained, cut.notes) == (0.4, ("a gap",))


@pytest.mark.parametrize(
    "wanted",
    [
        place("II", 0, 0.0, 100.5),  # no line reaches its end
        place("II", 1, 0.0, 50.0, moved_mm=-10.0),  # another row
        place("II", 2, 0.0, 50.0),
    ],
)
def test_what_was_not_followed_must_be_traced(wanted):
    assert recut(BEFORE, STROKES, INK, layout(place("I", 0, 0.0, 50.0), wanted), INK) is None


def test_a_gap_between_columns_must_be_traced():
    apart = layout(place("I", 0, 0.0, 49.0), place("V1", 0, 50.0, 100.0))
    strokes = tuple(line(panel) for panel in apart.panels)
    assert recut(apart, strokes, INK, layout(place("I", 0, 0.0, 100.0)), INK) is None


def test_lines_beside_ink_that_is_gone_are_traced_anew():
    """The region lies at 20 mm across and 12 to 14 mm down, in the upper row."""
    upper, lower = layout(place("I", 0, 0.0, 50.0)), layout(place("II", 1, 0.0, 50.0))
    seen, left = hidden(inked=True)
    assert recut(BEFORE, STROKES, seen, upper, left) is None
    assert recut(BEFORE, STROKES, seen, lower, left) is not None
    seen, left = hidden(inked=False)
    assert recut(BEFORE, STROKES, seen, upper, left) is not None


def test_a_line_cut_out_of_others_keeps_their_tremor_and_can_be_redrawn():
    shaken = tuple(
        replace(s, tremor_mm=np.full(len(s.x_mm), 0.1 * (k + 1))) for k, s in enumerate(STROKES[:2])
    )
    whole = joined(shaken[0], shaken)
    assert whole.tremor_mm[[10, -10]] == pytest.approx([0.1, 0.2])
    image = redraw((replace(whole, blur_mm=(0.1, 0.1)),), INK.raster, INK.density.shape)
    assert image[:, 50:200].sum(axis=0).min() > 1

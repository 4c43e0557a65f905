"""A stretch redrawn by hand, refined on drawn ink whose line is known."""

import numpy as np
import pytest

from digitize.errors import NoTrace
from digitize.refit import refit
from digitize.trace import Stroke
from tests.digitize.drawn_ink import CHART, perfect_sheet


def _stroke_of_strip(astray_mm=0.0):
    """The stroke of the strip's own line, and the sheet it stands on; astray in its middle."""
    sheet = perfect_sheet(CHART)
    line = max(sheet.composition.strokes, key=lambda s: np.ptp(s.x_mm))
    x_mm = np.arange(line.x_mm.min() + 1.0, line.x_mm.max() - 1.0, 0.05)
    true_mm = np.interp(x_mm, line.x_mm, line.y_mm)
    y_mm = true_mm.copy()
    y_mm[1000:1400] += astray_mm
    stroke = Stroke(x_mm, y_mm, np.full_like(x_mm, 0.01), line.width_mm, 0.0, blur_mm=(0.02, 0.02))
    return stroke, true_mm, sheet.ink


def test_points_beside_the_ink_end_on_the_line_that_was_drawn():
    stroke, true_mm, ink = _stroke_of_strip(astray_mm=4.0)
    at = np.arange(1000, 1400, 40)
    offs = 0.6 * (-1.0) ** np.arange(len(at))
    points = list(zip(stroke.x_mm[at], true_mm[at] + offs, strict=True))
    again = refit((stroke,), 0, points, ink)
    # 0.05 mm are 5 uV at 10 mm/mV, a fifth of what IEC 60601-2-25 allows (from memory)
    assert np.nanmedian(np.abs(again.y_mm - true_mm)[1010:1350]) < 0.05
    np.testing.assert_array_equal(again.y_mm[:1000], stroke.y_mm[:1000])
    assert any("redrawn" in note for note in again.notes)


def test_points_off_the_panel_and_points_without_ink_are_refused():
    stroke, _, ink = _stroke_of_strip()
    right_mm, y_mm = stroke.x_mm[-1], stroke.y_mm[-1]
    with pytest.raises(NoTrace, match="beside the panel"):
        refit((stroke,), 0, [(right_mm + 5, y_mm), (right_mm + 9, y_mm)], ink)
    bare_mm = ink.raster.y_mm(4.0)
    with pytest.raises(NoTrace, match="no ink under"):
        refit((stroke,), 0, [(stroke.x_mm[1000], bare_mm), (stroke.x_mm[1200], bare_mm)], ink)

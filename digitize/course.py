"""One trace's line over the page's pixels: where it begins, what its fit sees, what it draws."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import scipy as sp

from digitize.dropout import between_rows
from digitize.fit import ROUNDS, STEP_MM, Line, View, fit_line, start_from_edges
from digitize.ink import Ink
from digitize.pen import Pen, draw_line
from digitize.tremor import tremor
from digitize.ways import Way

BRIDGE_MM = 0.4  # a longer gap in the ink stays a gap: 16 ms at 25 mm/s
_BESIDE_MM = 0.4  # ink of the last samples beyond the end of a panel: half a pen and its blur
_NEAR_MM = 0.4  # ink so far from the start must be explained


@dataclass(frozen=True, eq=False)
class Course:
    """Nodes of a line in columns `x` and rows `y` of the ink's raster; NaN where it has no ink.

    Where it faded between two rows of the page's pixels, `faded` holds its height, elsewhere NaN.
    `tremor` (rows) is how far its stroke stands out for what trembles under the nib.
    """

    x: np.ndarray
    y: np.ndarray
    faded: np.ndarray | None = None
    tremor: np.ndarray | float = 0.0

    @property
    def inked(self) -> bool:
        """Whether there is anything to fit."""
        return bool(np.isfinite(self.y).any())


@dataclass(frozen=True, eq=False)
class Cut:
    """What the fit of one trace sees of the page, and where that was cut out."""

    row0: int
    col0: int
    view: View


def begin(way: Way, left_mm: float, right_mm: float, pen: Pen, ink: Ink) -> Course:
    """First guess of a line, from the edges of its ink."""
    count = int((right_mm - left_mm) / STEP_MM + 1e-6) + 1
    x = ink.raster.col(left_mm + STEP_MM * np.arange(count))
    inked = np.isfinite(way.edges[0])
    cols = way.col0 + np.arange(len(inked))
    if inked.sum() < 0.05 * len(inked):
        return Course(x, np.full(count, np.nan))
    top, bottom = (np.interp(x, cols[inked], side[inked]) for side in way.edges)
    shaken = tremor(way, x, pen, ink.raster.px_per_mm)
    y = start_from_edges(top + shaken, bottom - shaken, x[1] - x[0], pen.width_px / 2)
    gap = max(round(BRIDGE_MM * ink.raster.px_per_mm), 1)
    bare = sp.ndimage.binary_opening(~inked, np.ones(gap))
    y[np.interp(x, cols, bare.astype(float)) > 0.5] = np.nan
    faded = np.interp(x, cols, between_rows(way, ink), left=np.nan, right=np.nan)
    return Course(x, np.where(np.isnan(faded), y, faded), faded, shaken)


def cut_out(
    k: int, ways: Sequence[Way], courses: Sequence[Course], pen: Pen, ink: Ink, noise: float
) -> Cut:
    """What trace k's fit sees: the ink near its way, and the ink that all other lines lay there."""
    way, px = ways[k], ink.raster.px_per_mm
    near = max(_NEAR_MM * px, 3 * pen.blur_y_px + 1)
    inked = np.isfinite(way.edges[0])
    cols = np.arange(len(inked))
    top, bottom = (np.interp(cols, cols[inked], side[inked]) for side in way.edges)
    line = np.interp(way.col0 + cols, courses[k].x, filled(courses[k].y))
    top, bottom = np.minimum(top, line), np.maximum(bottom, line)
    margin = near + 2 * pen.width_px
    row0 = max(int(top.min() - margin), 0)
    row1 = min(int(bottom.max() + margin) + 1, len(ink.density))
    beside = round(_BESIDE_MM * px)
    before = min(beside, way.col0)
    after = min(beside, ink.density.shape[1] - way.col0 - len(inked))
    col0, col1 = way.col0 - before, way.col0 + len(inked) + after
    image = np.where(ink.hidden[row0:row1, col0:col1], np.nan, ink.density[row0:row1, col0:col1])
    image[:, np.pad(~inked, (before, after))] = np.nan
    other = np.zeros(image.shape, np.float32)
    full = Pen(pen.width_px, pen.blur_x_px, pen.blur_y_px)
    touched = [False, False]
    for m, course in enumerate(courses):
        if m != k and course.inked:
            touched[0] |= abs(course.x[-1] - courses[k].x[0]) < beside
            touched[1] |= abs(course.x[0] - courses[k].x[-1]) < beside
            lay(other, course, full, row0, col0)
    # beyond an end where no other trace begins, what the ink means is unknown
    if not touched[0]:
        image[:, :before] = np.nan
    if not touched[1]:
        image[:, image.shape[1] - after :] = np.nan
    rows = np.stack([np.floor(top - near) - row0, np.ceil(bottom + near) + 1 - row0])
    rows = np.pad(np.clip(rows, 0, len(image)), ((0, 0), (before, after)), mode="edge")
    return Cut(row0, col0, View(image.astype(np.float32), other, rows.astype(np.int64), noise))


def filled(y: np.ndarray) -> np.ndarray:
    """Heights of a line with its gaps bridged."""
    inked = np.isfinite(y)
    nodes = np.arange(len(y))
    return np.interp(nodes, nodes[inked], y[inked])


def fit(cut: Cut, course: Course, pen: Pen, rounds: int = ROUNDS) -> Line:
    """Fit a line from where its course begins."""
    y = filled(course.y) - cut.row0
    x0, step = course.x[0] - cut.col0, course.x[1] - course.x[0]
    return fit_line(cut.view, y, x0, step, pen, rounds, course.tremor)


def placed(line: Line, cut: Cut, course: Course) -> Course:
    """A fitted line on the page, with the gaps that its course had."""
    y = np.where(np.isnan(course.y), np.nan, line.y_px + cut.row0)
    if course.faded is not None:
        y = np.where(np.isnan(course.faded), y, course.faded)
    return replace(course, y=y)


def lay(image: np.ndarray, course: Course, pen: Pen, row0: int = 0, col0: int = 0) -> None:
    """Lay the ink of a course into an image whose corner is (row0, col0), in place."""
    reach = pen.width_px + 4 * pen.blur_x_px
    near = (course.x > col0 - reach) & (course.x < col0 + image.shape[1] + reach)
    y = np.where(near, course.y, np.nan)
    shaken = np.broadcast_to(course.tremor, y.shape)
    for part in np.ma.clump_unmasked(np.ma.masked_invalid(y)):
        if part.stop - part.start < 2:
            continue
        x = course.x[part]
        low = min(max(int(x[0] - col0 - reach), 0), image.shape[1])
        high = min(max(int(x[-1] - col0 + reach) + 2, 0), image.shape[1])
        if low < high:
            place = x[0] - col0 - low, x[1] - x[0]
            draw_line(image[:, low:high], y[part] - row0, *place, pen, shaken[part])

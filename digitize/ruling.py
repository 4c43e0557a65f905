"""The ruled paper of a drawing: its lines are there as numbers, so nothing has to be measured.

Long straight lines along one axis that stand on an even comb are the ruling. Whether a tooth is 1
or 5 mm is told by the document's own units, which need to be right within a factor of two only:
pages are often printed smaller or larger than they were made.
"""

from dataclasses import dataclass

import numpy as np

from digitize.drawing import Drawing
from digitize.grid import Grid
from digitize.pagemap import PageMap

LONG = 0.12  # of the page: shorter straight lines are no ruling
LEVEL = 1e-3  # slope of a line that runs along the page
FEWEST, FEWEST_ALONG = 8, 20  # lines of a comb, and of the longer one: tables have fewer columns
SQUARE = 0.05  # natural log of the two scales: elsewhere 5 mm is not the same both ways
ON_COMB = 0.03  # of the spacing
EVEN = 0.6  # share of the long lines that must stand on the comb
SPACINGS_MM = (1.0, 5.0, 10.0)  # of ruled lines, common practice


@dataclass(frozen=True)
class _Comb:
    """Evenly spaced lines: one of them, their distance, and their scatter, in pixels."""

    first_px: float
    spacing_px: float
    scatter_px: float


def find_ruling(drawing: Drawing, page_shape: tuple[int, int]) -> Grid | None:
    """Return the millimetre map that a drawing's own ruled lines give, None where it has none.

    Parameters
    ----------
    drawing : Drawing
    page_shape : (int, int)
        Rows and columns of the rendered page.
    """
    upright, level = _long_lines(drawing, page_shape)
    across, down = _comb(upright), _comb(level)
    if across is None or down is None or max(len(upright), len(level)) < FEWEST_ALONG:
        return None
    mm = _spacings_mm(across, down, drawing.unit_px_per_mm)
    scale = across.spacing_px / mm[0], down.spacing_px / mm[1]
    if abs(np.log(scale[0] / scale[1])) > SQUARE:
        return None
    # The origin moves next to the top left corner; 5 mm lines stay at multiples of five.
    start = [
        comb.first_px - 5 * px_per_mm * np.floor(comb.first_px / (5 * px_per_mm))
        for comb, px_per_mm in zip((across, down), scale, strict=True)
    ]
    homography = np.array([[scale[0], 0, start[0]], [0, scale[1], start[1]], [0, 0, 1]])
    rows, cols = page_shape
    extent = (
        -start[0] / scale[0],
        -start[1] / scale[1],
        (cols - start[0]) / scale[0],
        (rows - start[1]) / scale[1],
    )
    page_map = PageMap(homography, np.zeros((2, 4, 4)), extent)
    ruled_px = np.array([[upright.min(), level.min()], [upright.max(), level.max()]])
    (left, right), (top, bottom) = page_map.to_mm(*ruled_px.T)
    residual_mm = max(across.scatter_px / scale[0], down.scatter_px / scale[1])
    return Grid(
        page_map=page_map,
        source="found",
        method=f"ruled lines drawn in the document, {min(mm):g} mm apart",
        px_per_mm=scale,
        scale_se=residual_mm / max(float(right - left), 1.0),
        residual_mm=residual_mm,
        ruled_mm=(float(left), float(top), float(right), float(bottom)),
    )


def _long_lines(drawing: Drawing, page_shape: tuple[int, int]) -> tuple[np.ndarray, np.ndarray]:
    """Places of long straight lines: x of the upright ones, y of the level ones."""
    rows, cols = page_shape
    upright, level = [], []
    for line in drawing.lines:
        if len(line.points_px) != 2:
            continue
        wide, high = np.abs(line.points_px[1] - line.points_px[0])
        if high > LONG * rows and wide < LEVEL * high:
            upright.append(float(line.points_px[:, 0].mean()))
        elif wide > LONG * cols and high < LEVEL * wide:
            level.append(float(line.points_px[:, 1].mean()))
    return np.array(upright), np.array(level)


def _comb(places_px: np.ndarray) -> _Comb | None:
    """The even comb on which most of the places stand; None where there is none."""
    if len(places_px) < FEWEST:
        return None
    places = np.unique(np.round(places_px, 2))  # the same line may be drawn twice
    gaps = np.diff(places)
    gaps = gaps[gaps > 1.0]
    if len(places) < FEWEST or len(gaps) == 0:
        return None
    usual = max(gaps, key=lambda gap: np.sum(np.abs(gaps / gap - 1) < ON_COMB))
    spacing = float(np.mean(gaps[np.abs(gaps / usual - 1) < ON_COMB]))
    phase = np.angle(np.mean(np.exp(2j * np.pi * places / spacing))) / (2 * np.pi)
    first = phase * spacing
    for _ in range(3):
        tooth = np.rint((places - first) / spacing)
        off = places - first - tooth * spacing
        on = np.abs(off) < ON_COMB * spacing
        if on.sum() < max(FEWEST, EVEN * len(places)):
            return None
        spacing, first = (float(v) for v in np.polyfit(tooth[on], places[on], 1))
    return _Comb(first, spacing, float(np.std(off[on])))


def _spacings_mm(across: _Comb, down: _Comb, unit_px_per_mm: float) -> tuple[float, float]:
    """What the spacings are in millimetres: pixels about square, paper about its own size."""

    def oddity(mm: tuple[float, float]) -> float:
        x, y = (
            np.log(comb.spacing_px / (spacing * unit_px_per_mm))
            for comb, spacing in zip((across, down), mm, strict=True)
        )
        return float(abs(x) + abs(y) + 2 * abs(x - y))

    return min(((x, y) for x in SPACINGS_MM for y in SPACINGS_MM), key=oddity)

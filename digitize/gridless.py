"""The scale of a page without a grid: faxes that lost it, scans in which it dropped out.

Independent witnesses are heard: the size of the page at a usual resolution, the line of a fax, what
the file says, the calibration marks (200 ms are 5 mm, 1 mV is 10 mm on a standard run), ten seconds
of trace (250 mm). Each scale that one of them names is tried: marks and traces are measured at it.
Two that agree are believed; where they contradict each other, or none is there, the scale stays
unknown and a person is asked for it.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np

from digitize.columns import trace_extent, without_marks
from digitize.errors import NoGrid
from digitize.grid import Grid
from digitize.ink import Ink, solid_ink
from digitize.marks import HEIGHTS_MM, WIDTHS_MM, Mark, find_marks
from digitize.options import Options
from digitize.pagemap import PageMap
from digitize.pages import Page
from digitize.resolutions import LONG_SIDE_MM, Resolution, possible_resolutions, same_scale
from digitize.rows import find_rows
from digitize.sheet import Raster
from digitize.tilt import find_lie
from digitize.tracing import Origin

TRIAL_PX_PER_MM = 8.0  # of the picture in which marks are looked for
MOST_TRIALS = 4
AGREES, CONTRADICTS = 0.03, 0.06  # relative: marks against a scale
TEN_SECONDS_MM, TEN_SECONDS_WITHIN = 250.0, 0.012  # 25 mm/s, common practice
ENOUGH = 2  # witnesses that are believed
MARKS_ALONE = 3  # marks that are believed without another witness
FITS_NONE = 0.22  # natural log: a mark this far from every usual size is none
ALIKE = 0.04  # natural log: scatter of such marks, and their width against their height
LADDER_PX_PER_MM = (4.0, 5.6, 7.8, 11.0, 15.4, 21.5)  # find_marks allows a fifth either way
STANDARD_MM = (5.0, 10.0)  # width and height of a mark at 25 mm/s and 10 mm/mV
SE_GIVEN, SE_BY_MARKS, SE_BY_TWO, SE_BY_SIZE = 0.01, 0.01, 0.02, 0.03  # relative; rules of thumb

_ADVICE = (
    "give --px-per-mm (and --speed and --gain if they are not 25 mm/s and 10 mm/mV), "
    "or rescan at 200 dpi or more"
)


@dataclass(frozen=True)
class _Heard:
    """One scale, how many witnesses speak for it, what they say, and how sure that makes it."""

    scale: Resolution
    points: int
    reasons: tuple[str, ...]
    se: float


@dataclass(frozen=True, eq=False)
class _Trial:
    """The page at one scale: its ink level and upright, marks, and the way it lay on the page."""

    ink: Ink
    marks: tuple[Mark, ...]
    homography: np.ndarray  # from millimetres, as the page lies, to pixels
    size_mm: tuple[float, float]


def find_plain_scale(page: Page, options: Options | None = None) -> Grid:
    """Return the millimetre map of a page on which no ruling was found, its tilt taken out.

    Parameters
    ----------
    page : Page
    options : Options
        `px_per_mm` given by a person goes before all that the page says.

    Raises
    ------
    NoGrid
        Nothing tells the scale, or what tells it disagrees.
    """
    dark = _dark(page)
    rows, cols = dark.shape
    if options is not None and options.px_per_mm is not None:
        scale = Resolution(*options.px_per_mm, ("pixels per millimetre given",))
        return _grid(_Heard(scale, ENOUGH, scale.reasons, SE_GIVEN), _try(dark, scale), "given")
    scales = possible_resolutions(cols, rows, page.source.dpi, bilevel=page.bilevel)
    # Of a page with shades a faint grid may only have been missed: its size alone is not believed.
    most = ENOUGH if page.bilevel or page.drawing is not None else ENOUGH - 1
    heard = [_hear(scale, _try(dark, scale), most) for scale in scales[:MOST_TRIALS]]
    if not any(one.points >= ENOUGH for one in heard):
        heard += _marks_alone(dark)
    heard.sort(key=lambda one: -one.points)
    if not heard or heard[0].points < ENOUGH:
        told = "; ".join(dict.fromkeys(reason for one in heard for reason in one.reasons))
        raise NoGrid(
            "no ruled grid found, and nothing else tells the scale for sure"
            f"{f' ({told})' if told else ''}: {_ADVICE}"
        )
    best = heard[0]
    for other in heard[1:]:
        if other.points == best.points and not same_scale(best.scale, other.scale):
            raise NoGrid(
                "no ruled grid found, and the page contradicts itself "
                f"({best.reasons[0]}, but {other.reasons[0]}): {_ADVICE}"
            )
    return _grid(best, _try(dark, best.scale), "found")


def _dark(page: Page) -> np.ndarray:
    """What is black on a page, float32 0 or 1."""
    grey = page.pixels if page.pixels.ndim == 2 else page.pixels.min(axis=2)
    level, _ = cv2.threshold(grey, 0, 255, cv2.THRESH_BINARY | cv2.THRESH_OTSU)
    return (grey <= (127 if page.bilevel else level)).astype(np.float32)


def _hear(scale: Resolution, trial: _Trial, most_by_size: int) -> _Heard:
    """What speaks for one scale: size and tag of the page, then marks and traces measured at it."""
    points = min(2 * scale.sheet + scale.tagged + scale.fax_line, most_by_size)
    se = SE_BY_TWO if scale.tagged and (scale.sheet or scale.fax_line) else SE_BY_SIZE
    reasons = list(scale.reasons)
    logs = _log_sizes(trial.marks, WIDTHS_MM, HEIGHTS_MM)
    if len(logs):
        off = float(np.abs(np.median(logs, axis=0)).max())
        slack = 0.5 / min(scale.across, scale.down) / STANDARD_MM[0]  # half a pixel
        if off < AGREES + slack:
            points += min(len(logs), 2)
            se = SE_BY_MARKS if len(logs) > 1 else se
            reasons.append(f"calibration marks fit ({len(logs)})")
        elif off > CONTRADICTS + slack and len(logs) > 1 and np.std(logs, axis=0).max() < ALIKE:
            points -= 2
            reasons.append(f"calibration marks do not fit ({off:.0%} off)")
    length_mm = _trace_length_mm(trial)
    if length_mm is not None and abs(length_mm / TEN_SECONDS_MM - 1) < TEN_SECONDS_WITHIN:
        points += 1
        reasons.append("the traces are ten seconds long")
    return _Heard(scale, points, tuple(reasons), se)


def _try(dark: np.ndarray, scale: Resolution) -> _Trial:
    """The page at a scale, level, turned so that most calibration marks stand upright."""
    ink = _ink(dark, *_map(dark.shape, scale, 0.0), scale)
    lie = find_lie(solid_ink(ink), TRIAL_PX_PER_MM)
    homography, size_mm = _map(dark.shape, scale, lie.tilt)
    ink = _ink(dark, homography, size_mm, scale)
    turned = [_turned(ink, quarters) for quarters in ((1, 3) if lie.sideways else (0, 2))]
    marks = [find_marks(one) for one in turned]
    best = int(len(marks[1]) > len(marks[0]))
    return _Trial(turned[best], marks[best], homography, size_mm)


def _map(
    shape: tuple[int, ...], scale: Resolution, tilt: float
) -> tuple[np.ndarray, tuple[float, float]]:
    """Matrix from millimetres to pixels, all of the page at positive places, and its size in mm."""
    cos, sin = np.cos(tilt), np.sin(tilt)
    linear = np.array([[scale.across], [scale.down]]) * np.array([[cos, -sin], [sin, cos]])
    rows, cols = shape
    corners = np.array([[0, 0], [cols, 0], [0, rows], [cols, rows]], float) - 0.5
    places = corners @ np.linalg.inv(linear).T
    homography = np.eye(3)
    homography[:2, :2], homography[:2, 2] = linear, linear @ places.min(axis=0)
    wide_mm, high_mm = np.ptp(places, axis=0)
    return homography, (float(wide_mm), float(high_mm))


def _ink(
    dark: np.ndarray, homography: np.ndarray, size_mm: tuple[float, float], scale: Resolution
) -> Ink:
    """The black of the page on a square raster of millimetres."""
    px = TRIAL_PX_PER_MM
    to_page = homography[:2] @ np.diag([1 / px, 1 / px, 1])
    size = round(size_mm[0] * px), round(size_mm[1] * px)
    density = cv2.warpAffine(dark, to_page, size, flags=cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP)
    return Ink(
        density=density,
        hidden=np.zeros(density.shape, bool),
        raster=Raster(0.0, 0.0, px),
        noise=0.02,
        ruled_mm=(0.0, 0.0, *size_mm),
        source_px_per_mm=(scale.across, scale.down),
    )


def _turned(ink: Ink, quarters: int) -> Ink:
    density = np.ascontiguousarray(np.rot90(ink.density, quarters))
    return replace(ink, density=density, hidden=np.zeros(density.shape, bool))


def _log_sizes(
    marks: Sequence[Mark], widths_mm: Sequence[float], heights_mm: Sequence[float]
) -> np.ndarray:
    """Natural logs of width and height over the nearest usual ones, (n, 2); odd marks left out."""
    logs = [
        (
            min(np.log(mark.width_mm / np.array(widths_mm)), key=abs),
            min(np.log(mark.height_mm / np.array(heights_mm)), key=abs),
        )
        for mark in marks
    ]
    sizes = np.array(logs).reshape(-1, 2)
    return sizes[np.abs(sizes).max(axis=1) < FITS_NONE]


def _trace_length_mm(trial: _Trial) -> float | None:
    """From the beginning to the end of the traces, marks left out; None where there are none."""
    rows = find_rows(trial.ink, ())
    if not rows.rows:
        return None
    extent = trace_extent(without_marks(rows, trial.marks))
    return extent.right_mm - extent.left_mm


def _marks_alone(dark: np.ndarray) -> list[_Heard]:
    """The scale at which several equal marks have the standard size; pixels taken as square.

    Twice the speed at twice the gain looks the same: only a usual size of page tells them apart.
    """
    heard = []
    for px_per_mm in LADDER_PX_PER_MM:
        if not LONG_SIDE_MM[0] < max(dark.shape) / px_per_mm < LONG_SIDE_MM[1]:
            continue
        marks = _try(dark, Resolution(px_per_mm, px_per_mm, ())).marks
        logs = _log_sizes(marks, STANDARD_MM[:1], STANDARD_MM[1:])
        if len(logs) < MARKS_ALONE or np.std(logs, axis=0).max() > ALIKE:
            continue
        wide, high = np.median(logs, axis=0)
        if abs(wide - high) < ALIKE:
            found = px_per_mm * float(np.exp((wide + high) / 2))
            reason = f"{len(logs)} calibration marks, taken as 25 mm/s and 10 mm/mV"
            scale = Resolution(found, found, (reason,))
            heard.append(_Heard(scale, ENOUGH, (reason,), SE_BY_TWO))
    return heard


def _grid(best: _Heard, trial: _Trial, source: Origin) -> Grid:
    extent = (0.0, 0.0, *trial.size_mm)
    return Grid(
        page_map=PageMap(trial.homography, np.zeros((2, 4, 4)), extent),
        source=source,
        method=f"no grid; {', '.join(best.reasons)}",
        px_per_mm=(best.scale.across, best.scale.down),
        scale_se=best.se,
        residual_mm=0.0,
        ruled_mm=extent,
    )

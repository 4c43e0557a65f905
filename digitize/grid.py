"""The ruled paper: a smooth map between pixels and millimetres.

Ruled paper is a carrier fringe, so it is demodulated: the lattice frequency is read on tiles by
their spectra, the phase of each line family is read everywhere against that carrier, unwrapped,
and one smooth map (projective plus a low spline) is fitted to phase / 2 pi = millimetres. Tilt,
perspective, lens and curl come out of the same fit, and its residual says how sure it is.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import scipy as sp
import skimage as ski

from digitize.contrast import grid_contrasts
from digitize.errors import NoGrid
from digitize.lattice import find_lattice
from digitize.options import Options
from digitize.pagemap import PageMap, fit_page_map, uniform_page_map
from digitize.pages import Page
from digitize.tracing import Origin

CELL_PX = 16  # phase is read on cells of this many (reduced) pixels
MIN_CELLS = 30
MIN_COHERENCE = 0.35
MIN_SEEN = 0.08  # a lattice seen on less of the page is chance
GOOD_RESIDUAL_MM = 0.025  # no other picture of the page need be tried
FLAT_MM = 0.2  # scatter of the phase of a cell: a slip is a whole millimetre
MOSTLY_FLAT = 0.6  # of the cells, or it is another error
MAX_RESIDUAL_MM = 0.12  # phase that scatters more follows no ruling
OUT_OF_SQUARE = 0.12  # natural log: perspective stretches a page no more than this
MAX_PX_PER_MM = 60.0
FAX_RATIOS = (204 / 98, 204 / 196, 204 / 391)  # ITU-T T.4 resolutions


@dataclass(frozen=True, eq=False)
class Grid:
    """The millimetre map of one page and how far to trust it.

    `ruled_mm` is the part of the paper where grid lines were seen (left, top, right, bottom).
    """

    page_map: PageMap
    source: Origin  # found on the page, or given by the person
    method: str  # in words: how the scale was found
    px_per_mm: tuple[float, float]  # across, down, at the middle of the page
    scale_se: float  # relative standard error of the scale
    residual_mm: float  # scatter of the read grid phase about the map
    ruled_mm: tuple[float, float, float, float]


@dataclass(frozen=True, eq=False)
class _Phase:
    """Unwrapped phase of one line family on cells, in millimetres, and its weight."""

    mm: np.ndarray
    weight: np.ndarray


def find_grid(page: Page, options: Options | None = None) -> Grid:
    """Return the millimetre map of a page.

    Parameters
    ----------
    page : Page
        Colour, grey or 1-bit; the grid may be tilted, curled or seen in perspective.
    options : Options
        `px_per_mm` given by the person stands in for a grid that is not there.

    Raises
    ------
    NoGrid
        Neither a grid was found nor a scale given.

    References
    ----------
    Phase demodulation of a carrier fringe: Takeda, Ina, Kobayashi, J Opt Soc Am 72:156 (1982).
    """
    options = options or Options()
    reduced, factor = _reduce(page.pixels)
    found: list[Grid] = []
    for contrast in grid_contrasts(reduced):
        grid = _ruled_grid(page, contrast, factor)
        if grid is not None:
            found.append(grid)
            if grid.residual_mm < GOOD_RESIDUAL_MM:
                break
    if not found:
        return _without_grid(page, options)
    return min(found, key=lambda grid: grid.residual_mm)


def _ruled_grid(page: Page, contrast: np.ndarray, factor: int) -> Grid | None:
    """The map from a contrast picture's lattice, None where there is none to be trusted."""
    lattice = find_lattice(contrast, factor=factor, dpi=page.source.dpi)
    if lattice is None:
        return None
    across = _read_phase(contrast, lattice.phase_x, lattice.mm_per_cycle_x)
    down = _read_phase(contrast, lattice.phase_y, lattice.mm_per_cycle_y)
    weight = np.minimum(across.weight, down.weight)
    seen = _largest_part(weight > MIN_COHERENCE)
    if np.mean(seen) < MIN_SEEN or np.count_nonzero(seen) < MIN_CELLS:
        return None
    x_px, y_px = _cell_centres(weight.shape, factor)
    if page.bilevel:
        seen = _flat_part(seen, (x_px, y_px), (across.mm, down.mm))
    page_map, residual_mm = fit_page_map(
        x_px[seen], y_px[seen], across.mm[seen], down.mm[seen], weight[seen], page.pixels.shape[:2]
    )
    if residual_mm > MAX_RESIDUAL_MM or not _plausible(page_map.scale_px_per_mm(), page):
        return None
    x_mm, y_mm = page_map.to_mm(x_px[seen], y_px[seen])
    half = CELL_PX * factor / 2 / np.mean(page_map.scale_px_per_mm())
    ruled = (x_mm.min() - half, y_mm.min() - half, x_mm.max() + half, y_mm.max() + half)
    return Grid(
        page_map=page_map,
        source="found",
        method=f"phase of the ruled grid, {lattice.lines}",
        px_per_mm=page_map.scale_px_per_mm(),
        scale_se=residual_mm / max(ruled[2] - ruled[0], 1.0),
        residual_mm=residual_mm,
        ruled_mm=ruled,
    )


def _plausible(px_per_mm: tuple[float, float], page: Page) -> bool:
    """Whether pixels are about square, or as the file or a fax has them."""
    usual = [1.0, *FAX_RATIOS]
    if page.source.dpi is not None:
        usual.append(page.source.dpi[0] / page.source.dpi[1])
    if max(px_per_mm) > MAX_PX_PER_MM:
        return False
    ratio = px_per_mm[0] / px_per_mm[1]
    return any(abs(np.log(ratio / r)) < OUT_OF_SQUARE for r in (*usual, *(1 / r for r in usual)))


def _reduce(pixels: np.ndarray) -> tuple[np.ndarray, int]:
    """The page at about two megapixels, by whole-number area means, and the factor."""
    rows, cols = pixels.shape[:2]
    factor = max(1, round((rows * cols / 2.2e6) ** 0.5))
    if factor == 1:
        return pixels, 1
    rows, cols = rows // factor, cols // factor
    cut = pixels[: rows * factor, : cols * factor]
    return cv2.resize(cut, (cols, rows), interpolation=cv2.INTER_AREA), factor


def _read_phase(contrast: np.ndarray, carrier: np.ndarray, mm_per_cycle: float) -> _Phase:
    """Demodulate by the carrier phase (cycles, per pixel), low-pass on cells, unwrap."""
    turn = 2 * np.pi * (carrier - np.floor(carrier))
    rows, cols = (n // CELL_PX for n in contrast.shape)
    cut = (slice(rows * CELL_PX), slice(cols * CELL_PX))

    def cells(a: np.ndarray) -> np.ndarray:
        small = cv2.resize(a[cut], (cols, rows), interpolation=cv2.INTER_AREA)
        return cv2.GaussianBlur(small, (0, 0), 1.2)

    turn = turn.astype(np.float32)
    wave = cells(contrast * np.cos(turn)) - 1j * cells(contrast * np.sin(turn))
    power = np.sqrt(np.maximum(cells(contrast * contrast), 1e-12))
    strength = np.abs(wave) / power
    usual = np.quantile(strength, 0.9)
    weight = np.clip(strength / max(usual, 1e-6), 0, 1.5)
    good = weight > MIN_COHERENCE
    angle = np.ma.masked_array(np.angle(wave), mask=~good)
    turns = ski.restoration.unwrap_phase(angle) / (2 * np.pi) if good.any() else angle
    centre = carrier[cut][CELL_PX // 2 :: CELL_PX, CELL_PX // 2 :: CELL_PX]
    before = carrier[cut][CELL_PX // 2 - 1 :: CELL_PX, CELL_PX // 2 - 1 :: CELL_PX]
    mm = (np.ma.filled(turns, 0.0) + (centre + before) / 2) * mm_per_cycle
    return _Phase(mm=mm, weight=np.where(good, weight, 0.0))


def _cell_centres(shape: tuple[int, ...], factor: int) -> tuple[np.ndarray, np.ndarray]:
    """Full-size pixel coordinates (x, y) of the cell centres."""
    y, x = (np.mgrid[: shape[0], : shape[1]] + 0.5) * CELL_PX * factor - 0.5
    return x, y


def _largest_part(seen: np.ndarray) -> np.ndarray:
    """The largest connected part of a mask: phase is only comparable within one part."""
    labels, count = sp.ndimage.label(seen, structure=np.ones((3, 3)))
    if count <= 1:
        return seen
    return labels == 1 + np.argmax(np.bincount(labels.ravel())[1:])


def _flat_part(
    seen: np.ndarray, px: tuple[np.ndarray, np.ndarray], mm: tuple[np.ndarray, np.ndarray]
) -> np.ndarray:
    """The cells that lie on one plane, as those of a scanned page do, unless they are too few.

    Where little is left of a ruling, its phase slips by whole cycles from cell to cell.
    """
    places_px, places_mm = (np.stack([v[seen] for v in pair], axis=1) for pair in (px, mm))
    _, flat = cv2.estimateAffine2D(
        places_px, places_mm, method=cv2.RANSAC, ransacReprojThreshold=FLAT_MM
    )
    if flat is None or np.mean(flat) < MOSTLY_FLAT:
        return seen
    part = seen.copy()
    part[seen] = flat.ravel() > 0
    return part


def _without_grid(page: Page, options: Options) -> Grid:
    """The map of a page whose scale a person gave."""
    if options.px_per_mm is None:
        raise NoGrid(
            "no ruled grid found, so the scale is unknown; "
            "rescan at 200 dpi or more, or give --px-per-mm"
        )
    across, down = options.px_per_mm
    rows, cols = page.pixels.shape[:2]
    return Grid(
        page_map=uniform_page_map(across, down),
        source="given",
        method="pixels per millimetre given",
        px_per_mm=(across, down),
        scale_se=0.01,
        residual_mm=0.0,
        ruled_mm=(0.0, 0.0, cols / across, rows / down),
    )

"""The two line families of ruled paper: their frequency everywhere on the page.

Tile spectra show the lattice as a comb of harmonics of the 5 mm (or 1 mm) spacing. The spacing is
settled on the clearest tiles by all harmonics at once, then followed from tile to tile, and a low
polynomial phase is fitted whose gradient is the frequency seen: the carrier for demodulation.
"""

import heapq
from collections.abc import Iterator
from dataclasses import dataclass

import cv2
import numpy as np
import scipy as sp

from digitize.comb import CLEAR, Comb, find_comb, trackable

TILE_PX = 192
STRIDE_PX = 96
FFT_PX = 256
CONE = np.tan(np.deg2rad(40.0))  # a line family lies within this of its axis
MIN_HZ = 1 / 75  # cycles per pixel: 5 mm at 15 px/mm
HUMP = 15  # cells over which a hump of the spectrum is level
STANDS_OUT = 2.5
USUAL_PAGE_MM = 260.0  # common practice: A4, Letter and strips; only to tell 1 mm from 5 mm
SAME_SPACING = 0.2  # natural log: perspective changes the spacing less than this
SPACINGS = 3  # distinct spacings considered per family
VOTERS = 40  # tiles whose comb is looked at
PX_PER_MM_RANGE = (2.4, 40.0)


@dataclass(frozen=True, eq=False)
class Lattice:
    """Carrier phases of the two families, in cycles at each pixel of the (reduced) picture."""

    phase_x: np.ndarray
    phase_y: np.ndarray
    mm_per_cycle_x: float
    mm_per_cycle_y: float
    lines: str  # which lines were seen, in words
    score: float  # mean clearness of the followed peaks times the share of tiles


@dataclass(frozen=True, eq=False)
class _Vote:
    """What one tile says: its number, the direction of its strongest peak, the comb along it."""

    tile: int
    direction: tuple[float, float]
    comb: Comb


@dataclass(frozen=True)
class _Family:
    """One line family, settled on the clearest tiles."""

    px_per_mm: float
    tooth: int  # the followed peak is this multiple of 1 / 5 mm
    seed: tuple[int, int]
    seed_hz: tuple[float, float]
    evidence: float


def find_lattice(
    contrast: np.ndarray, *, factor: int, dpi: tuple[float, float] | None
) -> Lattice | None:
    """Return the lattice of a contrast picture, None where no ruling stands out.

    Parameters
    ----------
    contrast : float32 array, (rows, cols)
        Grid lines positive, local strength about 1.
    factor : int
        Full-size pixels per pixel of the picture.
    dpi : (float, float) or None
        What the file says about itself, across and down: weak evidence.
    """
    spectra, centres = _tile_spectra(contrast)
    settled = []
    for axis in (0, 1):
        width_px = contrast.shape[1 - axis] * factor
        candidates = _settle(spectra, axis, factor, dpi[axis] if dpi else None, width_px)
        if not candidates:
            return None
        settled.append(candidates)
    across, down = _agree(settled[0], settled[1], dpi)
    phases, shares = [], []
    for axis, family in ((0, across), (1, down)):
        hz, weight = _follow(spectra, axis, family)
        if np.count_nonzero(weight) < 4:
            return None
        gradient = hz if axis == 0 else hz[..., ::-1]
        phases.append(_carrier(gradient, weight, centres, contrast.shape))
        shares.append(float(np.mean(np.minimum(weight / CLEAR, 3.0))))
    return Lattice(
        phase_x=phases[0],
        phase_y=phases[1],
        mm_per_cycle_x=5 / across.tooth,
        mm_per_cycle_y=5 / down.tooth,
        lines="1 mm lines" if across.tooth == 5 else "5 mm lines",
        score=min(shares),
    )


def _tile_spectra(contrast: np.ndarray) -> tuple[np.ndarray, tuple[np.ndarray, np.ndarray]]:
    """Amplitude spectra in units of each tile's usual level, (tiles down, tiles across, fy, fx).

    fx runs over the non-negative half, fy is shifted so that 0 stands in the middle.
    """
    rows, cols = contrast.shape
    size_y, size_x = min(TILE_PX, rows), min(TILE_PX, cols)
    tops = _starts(rows, size_y)
    lefts = _starts(cols, size_x)
    window = np.outer(np.hanning(size_y), np.hanning(size_x)).astype(np.float32)
    spectra = np.empty((len(tops), len(lefts), FFT_PX, FFT_PX // 2 + 1), np.float32)
    for i, top in enumerate(tops):
        tiles = np.stack([contrast[top : top + size_y, left : left + size_x] for left in lefts])
        tiles = (tiles - tiles.mean(axis=(1, 2), keepdims=True)) * window
        spectrum = np.abs(sp.fft.rfft2(tiles, (FFT_PX, FFT_PX), axes=(1, 2)))
        usual = np.median(spectrum[:, ::4, ::4], axis=(1, 2), keepdims=True)
        shifted = np.fft.fftshift(spectrum / np.maximum(usual, 1e-6), axes=1)
        spectra[i] = np.stack([_peaks_alone(one) for one in shifted])
    return spectra, (np.array(tops) + size_y / 2 - 0.5, np.array(lefts) + size_x / 2 - 0.5)


def _peaks_alone(spectrum: np.ndarray) -> np.ndarray:
    """What stands out of a spectrum: traces and shade make broad humps, a lattice sharp peaks."""
    around = cv2.blur(spectrum, (HUMP, HUMP))
    return np.where(spectrum > STANDS_OUT * around, spectrum - around, 0.0)


def _starts(length: int, size: int) -> list[int]:
    count = max(1, int(np.ceil((length - size) / STRIDE_PX)) + 1)
    return [round(s) for s in np.linspace(0, length - size, count)]


def _frequencies(axis: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(along, other) frequency of each spectrum cell for a family, and the mask of its cone."""
    fx = np.arange(FFT_PX // 2 + 1)[None, :] / FFT_PX
    fy = np.arange(-FFT_PX // 2, FFT_PX // 2)[:, None] / FFT_PX
    if axis == 0:
        along, other = fx + 0 * fy, fy + 0 * fx
    else:
        sign = np.where(fy < 0, -1.0, 1.0)
        along, other = np.abs(fy) + 0 * fx, fx * sign
    cone = (np.abs(other) <= CONE * along) & (along >= MIN_HZ) & (np.hypot(along, other) < 0.49)
    return along, other, cone


def _sample(spectrum: np.ndarray, axis: int, along: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Bilinear values of one spectrum at frequencies of a family."""
    fx, fy = (along, other) if axis == 0 else (other, along)
    flip = fx < 0
    fx, fy = np.where(flip, -fx, fx), np.where(flip, -fy, fy)
    at = np.stack([fy * FFT_PX + FFT_PX / 2, fx * FFT_PX])
    return sp.ndimage.map_coordinates(spectrum, at, order=1, mode="nearest")


def _settle(
    spectra: np.ndarray, axis: int, factor: int, dpi: float | None, page_px: int
) -> list[_Family]:
    """Hypotheses on the spacing of one family, the most likely first."""
    along, other, cone = _frequencies(axis)
    flat = spectra.reshape(-1, *spectra.shape[2:])
    strongest = np.array([np.argmax(np.where(cone, s, 0)) for s in flat])
    height = flat.reshape(len(flat), -1)[np.arange(len(flat)), strongest]
    clear = np.argsort(height)[::-1]
    clear = clear[height[clear] > CLEAR]
    # The strongest peaks may be edges of the sheet or of shadows: hear tiles of every strength.
    clear = clear[:: max(1, len(clear) // VOTERS)]
    votes: list[_Vote] = []
    for tile in clear:
        peak = (along.flat[strongest[tile]], other.flat[strongest[tile]])
        length = float(np.hypot(*peak))
        ray = np.arange(0.006, 0.49, 1 / 2048)
        profile = _sample(flat[tile], axis, ray * peak[0] / length, ray * peak[1] / length)
        comb = find_comb(ray, profile)
        if comb is not None:
            votes.append(_Vote(int(tile), (peak[0] / length, peak[1] / length), comb))
    if not votes:
        return []
    spacing = np.array([vote.comb.spacing_px for vote in votes])
    score = np.array([vote.comb.score for vote in votes])
    weight = np.minimum(score, 3 * np.median(score))
    alike = np.abs(np.log(spacing[:, None] / spacing)) < SAME_SPACING
    families = []
    left = np.ones(len(votes), bool)
    for _ in range(SPACINGS):
        if not left.any():
            break
        support = np.where(left, alike @ (weight * left), -1.0)
        group = alike[int(np.argmax(support))] & left
        left &= ~group
        voters = [v for v, inside in zip(votes, group, strict=True) if inside]
        share = float(weight[group].sum() / weight.sum()) + 1e-6
        for mm in (5.0, 1.0):
            teeth = np.median([vote.comb.teeth for vote in voters], axis=0)
            px_per_mm = float(np.median(spacing[group])) / mm * factor
            evidence = _evidence(mm, teeth, px_per_mm, dpi, page_px) + 3 * np.log(share)
            families.append(_family(mm, teeth, px_per_mm, voters, evidence, spectra.shape))
    return sorted(families, key=lambda f: -f.evidence)


def _family(
    mm: float,
    teeth: np.ndarray,
    px_per_mm: float,
    voters: list[_Vote],
    evidence: float,
    shape: tuple[int, ...],
) -> _Family:
    """The hypothesis that a comb is that of `mm`, followed from its clearest tile."""
    clearest = max(voters, key=lambda vote: vote.comb.score)
    tooth = trackable(teeth) if mm == 5 else 5
    hz = (tooth if mm == 5 else 1) / clearest.comb.spacing_px
    row, col = np.unravel_index(clearest.tile, shape[:2])
    return _Family(
        px_per_mm=px_per_mm,
        tooth=tooth,
        seed=(int(row), int(col)),
        seed_hz=(clearest.direction[0] * hz, clearest.direction[1] * hz),
        evidence=float(evidence),
    )


def _evidence(
    mm: float, teeth: np.ndarray, px_per_mm: float, dpi: float | None, page_px: int
) -> float:
    """Log likelihood that the comb's spacing is `mm`: line pattern, page size, file's own dpi."""
    low, high = PX_PER_MM_RANGE
    if not low <= px_per_mm <= high:
        return -np.inf
    fifth = teeth[4] / max(np.mean([teeth[3], teeth[5]]), 1.0)
    pattern = float(np.clip(3 * np.log(max(fifth, 0.1)), -2, 4)) if mm == 5 else 0.0
    size = -0.5 * (np.log(page_px / px_per_mm / USUAL_PAGE_MM) / 0.5) ** 2
    told = 0.0
    if dpi:
        off = np.log(px_per_mm * 25.4 / dpi) / 0.1
        told = float(np.log(np.exp(-0.5 * off * off) + 0.02))
    return pattern + max(size, -12.0) + told


def _agree(
    across: list[_Family], down: list[_Family], dpi: tuple[float, float] | None
) -> tuple[_Family, _Family]:
    """The pair of hypotheses that is likeliest together: pixels are square, or as a fax's."""
    usual = [1.0, 204 / 98, 204 / 196, 204 / 391]
    if dpi:
        usual.append(dpi[0] / dpi[1])

    def together(a: _Family, d: _Family) -> float:
        off = min(abs(np.log(a.px_per_mm / d.px_per_mm / r)) for r in usual)
        return a.evidence + d.evidence - min(0.5 * (off / 0.08) ** 2, 30.0)

    return max(((a, d) for a in across for d in down), key=lambda pair: together(*pair))


def _follow(spectra: np.ndarray, axis: int, family: _Family) -> tuple[np.ndarray, np.ndarray]:
    """Follow one peak from the seed over all tiles, the clearest first.

    Returns frequency (tiles down, tiles across, 2) along and other, and the height of the peak
    in each tile, 0 where it was lost.
    """
    shape = spectra.shape[:2]
    hz = np.zeros((*shape, 2))
    weight = np.zeros(shape)
    expected = {family.seed: family.seed_hz}
    queue = [(-1.0, family.seed)]
    done = set()
    while queue:
        _, tile = heapq.heappop(queue)
        if tile in done:
            continue
        done.add(tile)
        found, height = _local_peak(spectra[tile], axis, expected[tile])
        if height < CLEAR * 0.7:
            continue
        hz[tile], weight[tile] = found, height
        for near in _neighbours(tile, shape):
            if near not in done:
                expected[near] = found
                heapq.heappush(queue, (-height, near))
    return hz, weight


def _neighbours(tile: tuple[int, int], shape: tuple[int, ...]) -> Iterator[tuple[int, int]]:
    for di, dj in ((0, 1), (1, 0), (0, -1), (-1, 0)):
        i, j = tile[0] + di, tile[1] + dj
        if 0 <= i < shape[0] and 0 <= j < shape[1]:
            yield i, j


def _local_peak(
    spectrum: np.ndarray, axis: int, hz: tuple[float, float]
) -> tuple[tuple[float, float], float]:
    """Sub-cell peak of a spectrum near a frequency, and its height."""
    reach = max(1.5 / FFT_PX, 0.08 * float(np.hypot(*hz)))
    step = np.linspace(-reach, reach, 15)
    along, other = np.meshgrid(hz[0] + step, hz[1] + step, indexing="ij")
    height = _sample(spectrum, axis, along, other)
    i, j = np.unravel_index(np.argmax(height), height.shape)
    core = height > 0.6 * height[i, j]
    near = (np.abs(along - along[i, j]) < 2.5 / FFT_PX) & (
        np.abs(other - other[i, j]) < 2.5 / FFT_PX
    )
    w = np.where(core & near, height, 0.0) ** 2 + 1e-12
    return (
        (float(np.sum(w * along) / np.sum(w)), float(np.sum(w * other) / np.sum(w))),
        float(height[i, j]),
    )


def _carrier(
    gradient: np.ndarray,
    weight: np.ndarray,
    centres: tuple[np.ndarray, np.ndarray],
    shape: tuple[int, ...],
) -> np.ndarray:
    """Polynomial phase (cycles, float64 per pixel) whose gradient fits the tile frequencies.

    `gradient` is (tiles down, tiles across, 2): cycles per pixel along x and along y.
    """
    rows, cols = shape
    scale = max(rows, cols) / 2
    u = (centres[1] - cols / 2) / scale
    v = (centres[0] - rows / 2) / scale
    vv, uu = np.meshgrid(v, u, indexing="ij")
    seen = weight > 0
    degree = 3 if np.count_nonzero(seen) >= 24 else 2 if np.count_nonzero(seen) >= 10 else 1
    powers = [(m, n) for m in range(degree + 1) for n in range(degree + 1 - m) if m + n > 0]
    x, y = uu[seen], vv[seen]
    du = np.stack([m * x ** max(m - 1, 0) * y**n for m, n in powers], 1)
    dv = np.stack([n * x**m * y ** max(n - 1, 0) for m, n in powers], 1)
    target = np.concatenate([gradient[..., 0][seen], gradient[..., 1][seen]]) * scale
    w = np.tile(np.minimum(weight[seen], 4 * CLEAR), 2)
    design = np.concatenate([du, dv])
    for _ in range(4):
        c = np.linalg.lstsq(design * w[:, None], target * w, rcond=None)[0]
        off = np.abs(target - design @ c)
        w = np.tile(np.minimum(weight[seen], 4 * CLEAR), 2) / (
            1 + (off / (3 * np.median(off) + 1e-9)) ** 2
        )
    table = np.zeros((degree + 1, degree + 1))
    for (m, n), value in zip(powers, c, strict=True):
        table[m, n] = value
    px = (np.arange(cols) - cols / 2) / scale
    py = (np.arange(rows) - rows / 2) / scale
    return np.polynomial.polynomial.polygrid2d(py, px, table.T)

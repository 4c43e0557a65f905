"""The smooth map from millimetres of paper to pixels: projective plus a spline."""

from dataclasses import dataclass

import numpy as np
import scipy as sp

KNOT_MM = 18.0  # spacing of the spline: paper curls and folds on no shorter scale
BEND_STIFFNESS = 0.3  # weight of the second differences of the spline against one cell


@dataclass(frozen=True, eq=False)
class PageMap:
    """Smooth map from millimetres of paper to pixels of the page.

    `homography` is (3, 3) and takes (x_mm, y_mm, 1) to pixels. `bend_px` is (2, m, n), the
    coefficients of two tensor cubic B-splines (dx, dy in pixels) over `extent_mm` (left, top,
    right, bottom); rows follow y. Pixel (0, 0) is the centre of the first pixel; x across, y down.
    """

    homography: np.ndarray
    bend_px: np.ndarray
    extent_mm: tuple[float, float, float, float]

    def to_px(self, x_mm: np.ndarray, y_mm: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Pixel coordinates (x, y) of places on the paper; arrays of equal shape."""
        x_mm, y_mm = np.asarray(x_mm, float), np.asarray(y_mm, float)
        x_px, y_px = _project(self.homography, x_mm, y_mm)
        at = np.stack(_knots(x_mm, y_mm, self.extent_mm, self.bend_px.shape[1:])[::-1])
        dx, dy = (
            sp.ndimage.map_coordinates(c, at, order=3, prefilter=False, mode="nearest")
            for c in self.bend_px
        )
        return x_px + dx, y_px + dy

    def to_mm(self, x_px: np.ndarray, y_px: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Places on the paper (x_mm, y_mm) of pixel coordinates, by fixed-point steps."""
        x_px, y_px = np.asarray(x_px, float), np.asarray(y_px, float)
        inverse = np.linalg.inv(self.homography)
        tx, ty = x_px, y_px
        for _ in range(8):
            x_mm, y_mm = _project(inverse, tx, ty)
            got_x, got_y = self.to_px(x_mm, y_mm)
            tx, ty = tx + (x_px - got_x), ty + (y_px - got_y)
        return _project(inverse, tx, ty)

    def scale_px_per_mm(self) -> tuple[float, float]:
        """Pixels per millimetre along the paper's x and y at the middle of the page."""
        left, top, right, bottom = self.extent_mm
        x, y = (left + right) / 2, (top + bottom) / 2
        px, py = self.to_px(np.array([x, x + 1, x]), np.array([y, y, y + 1]))
        return (
            float(np.hypot(px[1] - px[0], py[1] - py[0])),
            float(np.hypot(px[2] - px[0], py[2] - py[0])),
        )


def uniform_page_map(across_px_per_mm: float, down_px_per_mm: float) -> PageMap:
    """Map of a flat page scanned straight."""
    scale = np.diag([across_px_per_mm, down_px_per_mm, 1.0])
    return PageMap(scale, np.zeros((2, 4, 4)), (0.0, 0.0, 1000.0, 1000.0))


def fit_page_map(
    x_px: np.ndarray,
    y_px: np.ndarray,
    x_mm: np.ndarray,
    y_mm: np.ndarray,
    weight: np.ndarray,
    page_shape: tuple[int, int],
) -> tuple[PageMap, float]:
    """Return the map through places seen both in pixels and in millimetres, and its scatter.

    Parameters
    ----------
    x_px, y_px, x_mm, y_mm, weight : (n,) arrays
        The same places in pixels and in millimetres; a weight of 0 does not count.
    page_shape : tuple of int
        Rows and columns of the page; the spline is defined over all of it and stays nearly flat
        where no place was seen.

    Returns
    -------
    page_map : PageMap
        Whole millimetres stay on grid lines; the origin is moved next to the top left corner.
    residual_mm : float
        Robust standard deviation of the places about the map.
    """
    x_mm = x_mm - np.floor(x_mm.min())
    y_mm = y_mm - np.floor(y_mm.min())
    w = weight.copy()
    for _ in range(4):
        homography = _fit_homography(x_mm, y_mm, x_px, y_px, w)
        hx, hy = _project(homography, x_mm, y_mm)
        rx, ry = x_px - hx, y_px - hy
        off = np.hypot(rx, ry)
        w = weight / (1 + (off / (3 * np.median(off) + 1e-6)) ** 2)
    extent = _page_extent(homography, page_shape)
    bend, residual_px = _fit_bend(x_mm, y_mm, rx, ry, weight, extent)
    page_map = PageMap(homography, bend, extent)
    return page_map, residual_px / float(np.mean(page_map.scale_px_per_mm()))


def _project(h: np.ndarray, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    w = h[2, 0] * x + h[2, 1] * y + h[2, 2]
    return (h[0, 0] * x + h[0, 1] * y + h[0, 2]) / w, (h[1, 0] * x + h[1, 1] * y + h[1, 2]) / w


def _knots(
    x_mm: np.ndarray,
    y_mm: np.ndarray,
    extent_mm: tuple[float, float, float, float],
    shape: tuple[int, ...],
) -> tuple[np.ndarray, np.ndarray]:
    """Spline coordinates (x, y): the extent runs from knot 1 to the last but one."""
    left, top, right, bottom = extent_mm
    rows, cols = shape
    return (
        (x_mm - left) / (right - left) * (cols - 3) + 1,
        (y_mm - top) / (bottom - top) * (rows - 3) + 1,
    )


def _fit_homography(
    x: np.ndarray, y: np.ndarray, u: np.ndarray, v: np.ndarray, weight: np.ndarray
) -> np.ndarray:
    """Weighted direct linear transform with both sides normalised (Hartley 1997)."""

    def normal(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        s = 1 / max(a.std(), b.std(), 1e-9)
        return np.array([[s, 0, -s * a.mean()], [0, s, -s * b.mean()], [0, 0, 1]])

    t_from, t_to = normal(x, y), normal(u, v)
    x, y = _project(t_from, x, y)
    u, v = _project(t_to, u, v)
    one, nil = np.ones_like(x), np.zeros_like(x)
    rows = np.concatenate(
        [
            np.stack([x, y, one, nil, nil, nil, -u * x, -u * y], 1),
            np.stack([nil, nil, nil, x, y, one, -v * x, -v * y], 1),
        ]
    )
    w = np.sqrt(np.concatenate([weight, weight]))
    solution = np.linalg.lstsq(rows * w[:, None], np.concatenate([u, v]) * w, rcond=None)[0]
    h = np.linalg.inv(t_to) @ np.append(solution, 1).reshape(3, 3) @ t_from
    return h / h[2, 2]


def _page_extent(
    homography: np.ndarray, page_shape: tuple[int, int]
) -> tuple[float, float, float, float]:
    """Bounding box of the whole page in millimetres."""
    rows, cols = page_shape
    u = np.array([0, cols / 2, cols, 0, cols, 0, cols / 2, cols], float)
    v = np.array([0, 0, 0, rows / 2, rows / 2, rows, rows, rows], float)
    x, y = _project(np.linalg.inv(homography), u, v)
    return float(x.min()), float(y.min()), float(x.max()), float(y.max())


def _fit_bend(
    x_mm: np.ndarray,
    y_mm: np.ndarray,
    rx: np.ndarray,
    ry: np.ndarray,
    weight: np.ndarray,
    extent: tuple[float, float, float, float],
) -> tuple[np.ndarray, float]:
    """Robust smoothing spline through the residuals of the projective part."""
    left, top, right, bottom = extent
    cols = max(4, round((right - left) / KNOT_MM) + 3)
    rows = max(4, round((bottom - top) / KNOT_MM) + 3)
    kx, ky = _knots(x_mm, y_mm, extent, (rows, cols))
    basis = _tensor_basis(kx, ky, rows, cols)
    stiff = BEND_STIFFNESS * _second_differences(rows, cols)
    ridge = 1e-3 * sp.sparse.eye_array(rows * cols)
    penalty = stiff.T @ stiff + ridge
    w = weight.copy()
    for _ in range(4):
        left_side = (basis.T @ sp.sparse.diags_array(w) @ basis + penalty).tocsc()
        solve = sp.sparse.linalg.factorized(left_side)
        cx, cy = solve(basis.T @ (w * rx)), solve(basis.T @ (w * ry))
        off = np.hypot(rx - basis @ cx, ry - basis @ cy)
        scale = float(np.median(off)) / 1.18 + 1e-9  # Rayleigh median
        w = weight / (1 + (off / (3 * scale)) ** 2)
    return np.stack([cx.reshape(rows, cols), cy.reshape(rows, cols)]), scale


def _tensor_basis(kx: np.ndarray, ky: np.ndarray, rows: int, cols: int) -> sp.sparse.csr_array:
    """Values of the uniform cubic B-splines at the places, sparse (n, rows * cols)."""

    def weights(k: np.ndarray, n: int) -> tuple[np.ndarray, np.ndarray]:
        base = np.clip(np.floor(k).astype(int), 1, n - 3)
        t = k - base
        w = np.stack(
            [
                (1 - t) ** 3,
                3 * t**3 - 6 * t**2 + 4,
                -3 * t**3 + 3 * t**2 + 3 * t + 1,
                t**3,
            ]
        )
        return base[None] + np.arange(-1, 3)[:, None], w / 6

    ix, wx = weights(kx, cols)
    iy, wy = weights(ky, rows)
    column = iy[:, None] * cols + ix[None]
    value = wy[:, None] * wx[None]
    place = np.broadcast_to(np.arange(len(kx)), column.shape)
    return sp.sparse.csr_array(
        (value.ravel(), (place.ravel(), column.ravel())), shape=(len(kx), rows * cols)
    )


def _second_differences(rows: int, cols: int) -> sp.sparse.csr_array:
    """Second differences of a (rows, cols) lattice along both axes and across them."""

    def d(n: int, order: int) -> sp.sparse.csr_array:
        step = {1: [-1.0, 1.0], 2: [1.0, -2.0, 1.0]}[order]
        return sp.sparse.diags_array(
            step, offsets=range(order + 1), shape=(n - order, n), dtype=float
        )

    eye = sp.sparse.eye_array
    return sp.sparse.vstack(
        [
            sp.sparse.kron(eye(rows), d(cols, 2)),
            sp.sparse.kron(d(rows, 2), eye(cols)),
            np.sqrt(2) * sp.sparse.kron(d(rows, 1), d(cols, 1)),
        ]
    ).tocsr()

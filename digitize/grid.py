"""The ruled paper: a smooth map between pixels and millimetres."""

from dataclasses import dataclass

import numpy as np
import scipy as sp

from digitize.tracing import Origin


@dataclass(frozen=True, eq=False)
class PageMap:
    """Smooth map from millimetres of paper to pixels of the page: projective plus a spline.

    `homography` is (3, 3) and takes (x_mm, y_mm, 1) to pixels. `bend_px` is (2, m, n), the
    coefficients of two tensor cubic B-splines (dx, dy in pixels) over `extent_mm` (left, top,
    right, bottom); rows follow y. Pixel (0, 0) is the centre of the first pixel; x across, y down.
    """

    homography: np.ndarray
    bend_px: np.ndarray
    extent_mm: tuple[float, float, float, float]

    def to_px(self, x_mm, y_mm):
        """Pixel coordinates (x, y) of places on the paper; arrays of equal shape."""
        x_mm, y_mm = np.asarray(x_mm, float), np.asarray(y_mm, float)
        h = self.homography
        w = h[2, 0] * x_mm + h[2, 1] * y_mm + h[2, 2]
        x_px = (h[0, 0] * x_mm + h[0, 1] * y_mm + h[0, 2]) / w
        y_px = (h[1, 0] * x_mm + h[1, 1] * y_mm + h[1, 2]) / w
        left, top, right, bottom = self.extent_mm
        rows, cols = self.bend_px.shape[1:]
        at = np.stack(
            [
                (y_mm - top) / (bottom - top) * (rows - 3) + 1,
                (x_mm - left) / (right - left) * (cols - 3) + 1,
            ]
        )
        dx, dy = (
            sp.ndimage.map_coordinates(c, at, order=3, prefilter=False, mode="nearest")
            for c in self.bend_px
        )
        return x_px + dx, y_px + dy

    def to_mm(self, x_px, y_px):
        """Places on the paper (x_mm, y_mm) of pixel coordinates: Newton steps on `to_px`."""
        x_px, y_px = np.asarray(x_px, float), np.asarray(y_px, float)
        inv = np.linalg.inv(self.homography)
        tx, ty = x_px, y_px
        for _ in range(6):
            w = inv[2, 0] * tx + inv[2, 1] * ty + inv[2, 2]
            x_mm = (inv[0, 0] * tx + inv[0, 1] * ty + inv[0, 2]) / w
            y_mm = (inv[1, 0] * tx + inv[1, 1] * ty + inv[1, 2]) / w
            got_x, got_y = self.to_px(x_mm, y_mm)
            tx, ty = tx + (x_px - got_x), ty + (y_px - got_y)
        return x_mm, y_mm


@dataclass(frozen=True, eq=False)
class Grid:
    """The millimetre map of one page and how far to trust it."""

    page_map: PageMap
    source: Origin  # found on the page, or given by the person
    method: str  # in words: how the scale was found
    px_per_mm: tuple[float, float]  # across, down, at the middle of the page
    scale_se: float  # relative standard error of the scale
    residual_mm: float  # scatter of the read grid phase about the map

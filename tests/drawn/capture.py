"""How the sheet becomes pixels: an exact map from millimetres, and one resampling through it.

A scanner is an affine map; a camera adds perspective, a wavy sheet and a lens. The map runs from
millimetres to pixels in closed form; its inverse, needed for sampling, is found by fixed-point
steps on a coarse net of pixels and interpolated between.
"""

from dataclasses import dataclass

import cv2
import numpy as np

from digitize.sheet import Raster
from tests.drawn.spec import CaptureSpec, PaperSpec, PhotoSpec

MM_PER_INCH = 25.4
_NET_PX = 16  # spacing of the net on which the inverse map is found


@dataclass(frozen=True, eq=False)
class CaptureMap:
    """Millimetres of paper to pixels; pixel (0, 0) is the centre of the first one.

    `homography` takes (x_mm, y_mm, 1) to pixels of a flat sheet under a perfect lens. A raised
    point of the sheet moves along `lift` (3,) in homogeneous pixels per mm of height.
    """

    homography: np.ndarray
    lift: np.ndarray
    paper: PaperSpec
    photo: PhotoSpec | None
    size_px: tuple[int, int]  # across, down

    @property
    def extent_mm(self) -> tuple[float, float, float, float]:
        """Left, top, right and bottom edge of the sheet."""
        left, top = -self.paper.offset_mm[0], -self.paper.offset_mm[1]
        return left, top, left + self.paper.size_mm[0], top + self.paper.size_mm[1]

    def to_px(self, x_mm: np.ndarray, y_mm: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Pixel coordinates (x, y) of places on the paper."""
        x_mm, y_mm = np.asarray(x_mm, float), np.asarray(y_mm, float)
        h = self.homography
        raised = 0.0 if self.photo is None else self._height_mm(x_mm)
        along, down, depth = (
            h[k, 0] * x_mm + h[k, 1] * y_mm + h[k, 2] + self.lift[k] * raised for k in range(3)
        )
        x_px, y_px = along / depth, down / depth
        if self.photo is None:
            return x_px, y_px
        mid_x, mid_y = (self.size_px[0] - 1) / 2, (self.size_px[1] - 1) / 2
        off_x, off_y = x_px - mid_x, y_px - mid_y
        swell = 1 + self.photo.barrel * (off_x**2 + off_y**2) / (mid_x**2 + mid_y**2)
        return mid_x + off_x * swell, mid_y + off_y * swell

    def to_mm(self, x_px: np.ndarray, y_px: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Places on the paper of pixel coordinates, by fixed-point steps on `to_px`."""
        inverse = np.linalg.inv(self.homography)
        x_px, y_px = np.asarray(x_px, float), np.asarray(y_px, float)
        aim_x, aim_y = x_px, y_px
        for _ in range(1 if self.photo is None else 12):
            along, down, depth = (
                inverse[k, 0] * aim_x + inverse[k, 1] * aim_y + inverse[k, 2] for k in range(3)
            )
            x_mm, y_mm = along / depth, down / depth
            got_x, got_y = self.to_px(x_mm, y_mm)
            aim_x, aim_y = aim_x + x_px - got_x, aim_y + y_px - got_y
        return x_mm, y_mm

    def _height_mm(self, x_mm: np.ndarray) -> np.ndarray:
        """Height of the sheet over the desk: a wave, and a ridge where it was folded."""
        assert self.photo is not None
        across = (x_mm + self.paper.offset_mm[0]) / self.paper.size_mm[0]
        wave = self.photo.curl_mm * (1 - np.cos(2 * np.pi * self.photo.curl_waves * across)) / 2
        fold = self.photo.fold_mm * np.exp(-np.abs(across - 0.5) * 12)
        return wave + fold


def scan_map(capture: CaptureSpec, paper: PaperSpec) -> CaptureMap:
    """Return the affine map of a scanner: the sheet tilted on the glass, the picture turned."""
    wide_mm, high_mm = paper.size_mm
    tilt = np.deg2rad(capture.tilt_deg)
    turn = np.deg2rad(capture.turn_deg)
    middle = np.array([wide_mm / 2 - paper.offset_mm[0], high_mm / 2 - paper.offset_mm[1]])
    if capture.turn_deg % 180:
        wide_mm, high_mm = high_mm, wide_mm
    scale = np.array(capture.dpi) / MM_PER_INCH
    size_px = np.round(np.array([wide_mm, high_mm]) * scale).astype(int)
    angle = tilt + turn
    rotate = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    linear = scale[:, None] * rotate
    shift = (size_px - 1) / 2 - linear @ middle
    homography = np.eye(3)
    homography[:2, :2], homography[:2, 2] = linear, shift
    return CaptureMap(homography, np.zeros(3), paper, None, (int(size_px[0]), int(size_px[1])))


def photo_map(capture: CaptureSpec, photo: PhotoSpec, paper: PaperSpec) -> CaptureMap:
    """Return the map of a camera: a pinhole over the wavy sheet, then a lens.

    `capture.dpi` is the scale at the middle of the page.
    """
    wide_mm, high_mm = paper.size_mm
    middle = np.array([wide_mm / 2 - paper.offset_mm[0], high_mm / 2 - paper.offset_mm[1]])
    distance_mm = photo.distance_pages * wide_mm
    focal_px = capture.dpi[0] / MM_PER_INCH * distance_mm
    yaw, pitch, roll = np.deg2rad(
        [photo.yaw_deg, photo.pitch_deg, capture.tilt_deg + capture.turn_deg]
    )
    about_x = np.array(
        [[1, 0, 0], [0, np.cos(pitch), -np.sin(pitch)], [0, np.sin(pitch), np.cos(pitch)]]
    )
    about_y = np.array([[np.cos(yaw), 0, np.sin(yaw)], [0, 1, 0], [-np.sin(yaw), 0, np.cos(yaw)]])
    about_z = np.array(
        [[np.cos(roll), -np.sin(roll), 0], [np.sin(roll), np.cos(roll), 0], [0, 0, 1]]
    )
    pose = np.diag([focal_px, focal_px, 1.0]) @ about_x @ about_y @ about_z
    # The sheet's middle lies straight ahead; a raised point comes towards the camera (-z).
    at_middle = np.array([[1, 0, -middle[0]], [0, 1, -middle[1]], [0, 0, 1.0]])
    homography = np.column_stack([pose[:, 0], pose[:, 1], [0, 0, distance_mm]]) @ at_middle
    corners = np.array([[0, 1, 0, 1], [0, 0, 1, 1]]) * np.array([[wide_mm], [high_mm]])
    corners = np.vstack([corners - np.array(paper.offset_mm)[:, None], np.ones(4)])
    seen = homography @ corners
    seen = seen[:2] / seen[2]
    margin_px = photo.margin * np.ptp(seen[0])
    size_px = np.round(np.ptp(seen, axis=1) + 2 * margin_px).astype(int)
    shift = np.eye(3)
    shift[:2, 2] = margin_px - seen.min(axis=1)
    size = (int(size_px[0]), int(size_px[1]))
    return CaptureMap(shift @ homography, -(shift @ pose[:, 2]), paper, photo, size)


def resample(sheet: np.ndarray, raster: Raster, page_map: CaptureMap, outside: float) -> np.ndarray:
    """Return one channel of the sheet sampled at every pixel of the picture, float32."""
    wide_px, high_px = page_map.size_px
    net_x = np.arange(-_NET_PX, wide_px + 2 * _NET_PX, _NET_PX, dtype=float)
    net_y = np.arange(-_NET_PX, high_px + 2 * _NET_PX, _NET_PX, dtype=float)
    x_mm, y_mm = page_map.to_mm(*np.meshgrid(net_x, net_y))
    cols = _fill(raster.col(x_mm), wide_px, high_px)
    rows = _fill(raster.row(y_mm), wide_px, high_px)
    return cv2.remap(
        sheet,
        cols,
        rows,
        cv2.INTER_LINEAR,
        borderMode=cv2.BORDER_CONSTANT,
        borderValue=outside,
    )


def _fill(net: np.ndarray, wide_px: int, high_px: int) -> np.ndarray:
    """A coarse net of values at every pixel, by linear interpolation."""
    to_net = np.array([[1 / _NET_PX, 0, 1], [0, 1 / _NET_PX, 1]])
    return cv2.warpAffine(
        net.astype(np.float32),
        to_net,
        (wide_px, high_px),
        flags=cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP,
    )

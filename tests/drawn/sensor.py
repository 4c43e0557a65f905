"""Light into pixels: the lamp over a photographed page, the sensor, the copier, the fax."""

import cv2
import numpy as np
import scipy as sp
from PIL import Image

from tests.drawn.spec import CaptureSpec, PageSpec, PhotoSpec

_GAMMA = 2.2  # sRGB as a plain power
_LIGHT_STEPS = 65535


def to_light(code: float) -> float:
    """Linear light of a code value (IEC 61966-2-1, as a plain power of 2.2)."""
    return float((code / 255) ** _GAMMA)


def light_up(
    light: np.ndarray, photo: PhotoSpec, channels: tuple[int, ...], rng: np.random.Generator
) -> np.ndarray:
    """Return a photographed page under its lamp: fall-off, shadow, colour cast, motion."""
    high, wide = light.shape[:2]
    down, across = np.ogrid[-1 : 1 : high * 1j, -1 : 1 : wide * 1j]
    angle = rng.uniform(0, 2 * np.pi)
    slope = (np.cos(angle) * across + np.sin(angle) * down) / np.sqrt(2)
    lamp = 1 - photo.shade * (0.5 + 0.5 * slope) - photo.corners * (across**2 + down**2) / 2
    if photo.shadow:
        edge = rng.uniform(-0.5, 0.5)
        turn = rng.uniform(0, 2 * np.pi)
        away = np.cos(turn) * across + np.sin(turn) * down - edge
        # The edge of a hand's shadow under a ceiling lamp is a few millimetres wide.
        lamp = lamp * (1 - photo.shadow * sp.special.expit(away * 150))
    if photo.finger:
        light = _with_finger(light, channels, rng)
    lit = light * lamp[..., None] * np.array(photo.cast)[list(channels)]
    lit = lit.astype(np.float32)
    if photo.motion_px >= 1:
        kernel = _smear(photo.motion_px, rng.uniform(0, np.pi))
        lit = cv2.filter2D(lit, -1, kernel).reshape(lit.shape)
    return lit


def _with_finger(
    light: np.ndarray, channels: tuple[int, ...], rng: np.random.Generator
) -> np.ndarray:
    """A fingertip reaching in from the left or right edge of the picture."""
    high, wide = light.shape[:2]
    size_px = 0.05 * wide
    row = rng.uniform(0.2, 0.8) * high
    right = rng.random() < 0.5
    rows, cols = np.ogrid[:high, :wide]
    inward = (wide - 1 - cols) if right else cols
    tip = np.hypot((inward - 1.6 * size_px) / 1.25, rows - row) < size_px
    finger = tip | ((np.abs(rows - row) < size_px) & (inward < 1.6 * size_px))
    skin = np.array([to_light(c) for c in (196, 150, 126)], np.float32)[list(channels)]
    edge = cv2.GaussianBlur(finger.astype(np.float32), (0, 0), 0.04 * size_px)[..., None]
    return light * (1 - edge) + skin * edge


def _smear(length_px: float, angle: float) -> np.ndarray:
    """Kernel of a straight motion of so many pixels."""
    size = 2 * int(length_px) + 1
    kernel = np.zeros((size, size), np.float32)
    step = length_px / 2 * np.array([np.cos(angle), np.sin(angle)])
    first, last = (np.round((size // 2 + sign * step) * 16).astype(int) for sign in (-1, 1))
    cv2.line(kernel, first.tolist(), last.tolist(), 1.0, 1, cv2.LINE_AA, 4)
    return kernel / kernel.sum()


def to_pixels(light: np.ndarray, spec: PageSpec, rng: np.random.Generator) -> np.ndarray:
    """Return uint8 pixels of linear light (rows, cols, channels), in the asked mode."""
    capture = spec.capture
    table = 255 * (np.arange(_LIGHT_STEPS + 1, dtype=np.float32) / _LIGHT_STEPS) ** (1 / _GAMMA)
    code = table[(np.clip(light, 0, 1) * _LIGHT_STEPS).astype(np.uint16)]
    for _ in range(spec.wear.copies):
        code = _copied(code, capture, rng)
    if capture.noise:
        code += np.float32(capture.noise) * rng.standard_normal(code.shape, np.float32)
    code = code if code.shape[-1] == 3 else code[..., 0]
    if capture.mode == "bilevel":
        return _without_lost_lines(np.where(code < capture.threshold, 0, 255), capture, rng)
    grey = np.clip(np.round(code), 0, 255).astype(np.uint8)
    if capture.mode == "diffused":  # Floyd and Steinberg's error diffusion
        black = np.asarray(Image.fromarray(grey).convert("1")).astype(np.uint8)
        return _without_lost_lines(black * 255, capture, rng)
    return grey


def _copied(code: np.ndarray, capture: CaptureSpec, rng: np.random.Generator) -> np.ndarray:
    """A photocopy: a little softer, a steeper tone curve, uneven toner."""
    sigma_px = 0.06 / 25.4 * np.array(capture.dpi)
    soft = cv2.GaussianBlur(code, (0, 0), sigmaX=float(sigma_px[0]), sigmaY=float(sigma_px[1]))
    soft = soft.reshape(code.shape)
    middle = rng.uniform(140, 175)
    steep = 255 * sp.special.expit((soft - middle) / 28)
    knots = rng.normal(0, 4, (6, 6)).astype(np.float32)
    uneven = cv2.resize(knots, (code.shape[1], code.shape[0]), interpolation=cv2.INTER_CUBIC)
    return (0.7 * steep + 0.3 * soft + uneven[..., None]).astype(np.float32)


def _without_lost_lines(
    pixels: np.ndarray, capture: CaptureSpec, rng: np.random.Generator
) -> np.ndarray:
    """A fax on which some lines repeat the line before, as receivers conceal errors."""
    kept = pixels.astype(np.uint8)
    for row in rng.integers(1, len(kept), capture.dropped_lines):
        kept[row] = kept[row - 1]
    return kept

"""The few SVG elements that the drawings use; coordinates in millimetres."""

from html import escape

import numpy as np

_RIM = ' stroke="#fff" stroke-width="0.6" paint-order="stroke"'


def line(
    x0: float, y0: float, x1: float, y1: float, *, colour: str, width_mm: float, dash: str = ""
) -> str:
    """A straight line."""
    broken = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<line x1="{x0:.2f}" y1="{y0:.2f}" x2="{x1:.2f}" y2="{y1:.2f}" stroke="{colour}" '
        f'stroke-width="{width_mm:g}"{broken}/>'
    )


def rect(
    x: float,
    y: float,
    width: float,
    height: float,
    *,
    colour: str = "none",
    width_mm: float = 0.0,
    fill: str = "none",
    opacity: float = 1.0,
) -> str:
    """A rectangle, drawn or filled."""
    return (
        f'<rect x="{x:.2f}" y="{y:.2f}" width="{width:.2f}" height="{height:.2f}" fill="{fill}" '
        f'fill-opacity="{opacity:g}" stroke="{colour}" stroke-width="{width_mm:g}"/>'
    )


def polyline(x: np.ndarray, y: np.ndarray, colour: str, *, width_mm: float, dash: str = "") -> str:
    """A line through points."""
    broken = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<polyline points="{_points(x, y)}" fill="none" stroke="{colour}" '
        f'stroke-width="{width_mm:g}" stroke-linejoin="round"{broken}/>'
    )


def polygon(
    x: np.ndarray, y: np.ndarray, fill: str, *, opacity: float = 1.0, edge: str = "none"
) -> str:
    """A filled outline."""
    return (
        f'<polygon points="{_points(x, y)}" fill="{fill}" fill-opacity="{opacity:g}" '
        f'stroke="{edge}" stroke-width="0.3"/>'
    )


def text(
    x: float,
    y: float,
    words: str,
    *,
    size: float,
    anchor: str = "start",
    bold: bool = False,
    colour: str = "#16212b",
) -> str:
    """Words with their baseline at y; a white rim keeps them readable over a trace."""
    weight = ' font-weight="bold"' if bold else ""
    return (
        f'<text x="{x:.2f}" y="{y:.2f}" font-size="{size:g}" text-anchor="{anchor}" '
        f'fill="{colour}"{weight}{_RIM} '
        f'font-family="DejaVu Sans, Verdana, sans-serif">{escape(words)}</text>'
    )


def without_rims(drawing: str) -> str:
    """Return a drawing whose words have no rim: not every reader paints it beneath them."""
    return drawing.replace(_RIM, "")


def _points(x: np.ndarray, y: np.ndarray) -> str:
    return " ".join(f"{a:.2f},{b:.2f}" for a, b in zip(x, y, strict=True))

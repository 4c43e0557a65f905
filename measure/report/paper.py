"""Ruled millimetre paper under a drawn beat, and the frame of a drawing."""

import math
from html import escape

from measure.report.svg import rect


def ruled(
    left: float, top: float, width: float, height: float, zero_mm: float, thin: str, thick: str
) -> str:
    """Millimetre lines; the fifths are heavier and one of them stands at 0 mV."""
    light: list[str] = []
    heavy: list[str] = []
    for k in range(int(width) + 1):
        (light if k % 5 else heavy).append(f"M{left + k:g} {top:g}v{height:g}")
    first = math.ceil(top - zero_mm)
    for k in range(first, first + int(height) + 1):
        (light if k % 5 else heavy).append(f"M{left:g} {zero_mm + k:g}h{width:g}")
    return (
        f'<path d="{"".join(light)}" stroke="{thin}" stroke-width="0.1" fill="none"/>'
        f'<path d="{"".join(heavy)}" stroke="{thick}" stroke-width="0.16" fill="none"/>'
        + rect(left, top, width, height, colour=thick, width_mm=0.25)
    )


def drawing(width: float, height: float, label: str, body: str) -> str:
    """A drawing in true millimetres, described by `label` for those who cannot see it."""
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width:g}mm" height="{height:g}mm" '
        f'viewBox="0 0 {width:g} {height:g}" role="img" aria-label="{escape(label)}">{body}</svg>'
    )

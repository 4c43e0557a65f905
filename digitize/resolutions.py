"""Which scales a page can have by its size in pixels and by what its file says of itself.

Arithmetic alone: no pixel is looked at. A file's tag is often wrong (a fax that says 72 dpi), but a
page whose two sides are both those of a usual sheet at a usual resolution is hardly so by chance.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

MM_PER_INCH = 25.4
# ITU-T T.4: 1728 pels on a line of 215 mm; 3.85, 7.7 or 15.4 lines per mm (from memory).
FAX_LINE_PX, FAX_PELS_PER_MM = 1728, 1728 / 215
FAX_LINES_PER_MM = (3.85, 7.7, 15.4)
SCANNER_DPI = (100, 120, 150, 200, 240, 300, 400, 600)  # common practice
SHEETS_MM = {  # ISO 216; ANSI/ASME Y14.1 and its legal size. A3 at 98 lines is A4 at 196: left out
    "A4": (297.0, 210.0),
    "Letter": (279.4, 215.9),
    "Legal": (355.6, 215.9),
}
SHEET_TOLERANCE = 0.006  # of either side: the edge of a scan, a few lines of a fax
SAME = 0.02  # scales this near to each other are one
LONG_SIDE_MM = (130.0, 440.0)  # no chart is smaller or larger


@dataclass(frozen=True)
class Resolution:
    """A scale in pixels per millimetre, across and down, and in words what speaks for it."""

    across: float
    down: float
    reasons: tuple[str, ...]
    tagged: bool = False
    fax_line: bool = False
    sheet: bool = False


def possible_resolutions(
    width_px: int, height_px: int, dpi: tuple[float, float] | None, *, bilevel: bool
) -> tuple[Resolution, ...]:
    """Return the scales that size and tag speak for, each once, the best supported first.

    Parameters
    ----------
    width_px, height_px : int
    dpi : (float, float) or None
        What the file says, across and down.
    bilevel : bool
        Whether the page is black and white: faxes are.
    """
    found: list[Resolution] = []
    for one in _all(width_px, height_px, dpi, bilevel):
        if not LONG_SIDE_MM[0] < max(width_px / one.across, height_px / one.down) < LONG_SIDE_MM[1]:
            continue
        for k, known in enumerate(found):
            if same_scale(known, one):
                found[k] = replace(
                    known,
                    reasons=known.reasons + one.reasons,
                    tagged=known.tagged or one.tagged,
                    fax_line=known.fax_line or one.fax_line,
                    sheet=known.sheet or one.sheet,
                )
                break
        else:
            found.append(one)
    return tuple(sorted(found, key=lambda one: -len(one.reasons)))


def same_scale(one: Resolution, other: Resolution) -> bool:
    """Whether two scales agree on both axes."""
    pairs = ((one.across, other.across), (one.down, other.down))
    return all(abs(float(np.log(a / b))) < SAME for a, b in pairs)


def _all(
    width_px: int, height_px: int, dpi: tuple[float, float] | None, bilevel: bool
) -> Iterator[Resolution]:
    """Every scale that anything speaks for."""
    faxes = [(FAX_PELS_PER_MM, lines) for lines in FAX_LINES_PER_MM]
    scanners = [(n / MM_PER_INCH, n / MM_PER_INCH) for n in SCANNER_DPI]
    turned = [(down, across) for across, down in faxes]
    for across, down in (*faxes, *turned, *scanners) if bilevel else scanners:
        sheet = _sheet(width_px / across, height_px / down)
        if sheet is not None:
            # paper is cut better than it is fed: T.4 allows lines 1 % nearer or wider (from memory)
            name, wide_mm, high_mm = sheet
            reason = f"the page is {name} at {_dpi(across, down)}"
            yield Resolution(width_px / wide_mm, height_px / high_mm, (reason,), sheet=True)
    if bilevel and abs(width_px - FAX_LINE_PX) <= 2:
        for across, down in faxes:
            yield Resolution(across, down, ("a fax line of 1728 pels",), fax_line=True)
    if bilevel and abs(height_px - FAX_LINE_PX) <= 2:
        for across, down in turned:
            yield Resolution(across, down, ("a fax line of 1728 pels",), fax_line=True)
    if dpi is not None:
        across, down = dpi[0] / MM_PER_INCH, dpi[1] / MM_PER_INCH
        yield Resolution(
            across, down, (f"the file says {dpi[0]:.0f} x {dpi[1]:.0f} dpi",), tagged=True
        )


def _sheet(width_mm: float, height_mm: float) -> tuple[str, float, float] | None:
    """Name, width and height of the sheet that has about that size, either way up."""
    for name, (long_mm, short_mm) in SHEETS_MM.items():
        sheet = (long_mm, short_mm) if width_mm > height_mm else (short_mm, long_mm)
        off = abs(width_mm / sheet[0] - 1), abs(height_mm / sheet[1] - 1)
        if max(off) < SHEET_TOLERANCE:
            return name, *sheet
    return None


def _dpi(across: float, down: float) -> str:
    return f"{across * MM_PER_INCH:.0f} x {down * MM_PER_INCH:.0f} dpi"

"""What a PDF page draws, read from its objects instead of from its pixels.

Form XObjects are entered with their matrices, subpaths become lines of their own, Bézier curves
are flattened, and what lies outside a clip is cut off: what the page does not show is not read.
"""

import ctypes
import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pypdfium2 as pdfium
import pypdfium2.raw as pdfium_c

from digitize.drawing import Drawing, DrawnLine
from digitize.pdf_words import words_of

MOST_OBJECTS = 400_000  # a drawing of more is no chart
DEEPEST_FORM = 8
CURVE_PARTS = 8  # straight parts of a flattened curve
FAINTEST_ALPHA = 26  # of 255: a tenth, less is no line that anyone sees
MOST_DECIMALS = 5
BAR = 40.0  # a filled rectangle so many times longer than thick is a line

_POINTS_PER_MM = 72 / 25.4
_FINE = 1000  # places are asked for in thousandths of a pixel: the library answers in integers


Frame = tuple[float, float, float, float]  # left, top, right, bottom


@dataclass(frozen=True)
class _State:
    """How the objects of a form reach the page: matrix to pixels, visible box in pixels."""

    matrix: tuple[float, ...]  # a b c d e f of ISO 32000-1, 8.3.3
    box: Frame


@dataclass(frozen=True)
class _Subpath:
    """Vertices in the path's own space, and what takes them to the page."""

    points: list[tuple[float, float]]
    width: float
    state: _State


def read_drawing(page: pdfium.PdfPage, width_px: int, height_px: int) -> Drawing | None:
    """Return what a page draws as lines and text, None where it draws no line.

    Parameters
    ----------
    page : PdfPage
    width_px, height_px : int
        Size at which the page is rendered: the pixels in which the drawing is wanted.

    References
    ----------
    ISO 32000-1:2008, 8.5 (paths), 8.10 (form XObjects), 9.4 (text objects).
    """
    if pdfium_c.FPDFPage_CountObjects(page) > MOST_OBJECTS:
        return None
    to_px = _to_pixels(page, width_px, height_px)
    state = _State(to_px, (-0.5, -0.5, width_px - 0.5, height_px - 0.5))
    count = pdfium_c.FPDFPage_CountObjects(page)
    objects = (pdfium_c.FPDFPage_GetObject(page, k) for k in range(count))
    lines = _to_lines([path for item in objects for path in _subpaths_of(item, state, 0)])
    if not lines:
        return None
    return Drawing(lines, tuple(words_of(page, to_px)), _scale(to_px) * _POINTS_PER_MM)


def _to_pixels(page: pdfium.PdfPage, width_px: int, height_px: int) -> tuple[float, ...]:
    """The matrix from page space to pixels, crop box and page rotation included."""
    found = []
    for x, y in ((0.0, 0.0), (1000.0, 0.0), (0.0, 1000.0)):
        u, v = ctypes.c_int(), ctypes.c_int()
        size = width_px * _FINE, height_px * _FINE
        pdfium_c.FPDF_PageToDevice(page, 0, 0, *size, 0, x, y, u, v)
        found.append((u.value / _FINE - 0.5, v.value / _FINE - 0.5))
    (e, f), right, up = found
    return (right[0] - e) / 1e3, (right[1] - f) / 1e3, (up[0] - e) / 1e3, (up[1] - f) / 1e3, e, f


def _scale(matrix: tuple[float, ...]) -> float:
    a, b, c, d, _, _ = matrix
    return math.sqrt(abs(a * d - b * c))


def _moved(points: np.ndarray, matrix: tuple[float, ...]) -> np.ndarray:
    a, b, c, d, e, f = matrix
    return points @ np.array([[a, b], [c, d]]) + np.array([e, f])


def _within(item: pdfium_c.FPDF_PAGEOBJECT, state: _State) -> _State:
    """What takes an object's own space to the page; a clip of any shape counts by its box."""
    m = pdfium_c.FS_MATRIX()
    pdfium_c.FPDFPageObj_GetMatrix(item, m)
    a, b, c, d, e, f = state.matrix
    matrix = (
        *(a * m.a + c * m.b, b * m.a + d * m.b),
        *(a * m.c + c * m.d, b * m.c + d * m.d),
        *(a * m.e + c * m.f + e, b * m.e + d * m.f + f),
    )
    left, top, right, bottom = state.box
    clip = pdfium_c.FPDFPageObj_GetClipPath(item)
    for k in range(max(pdfium_c.FPDFClipPath_CountPaths(clip), 0)):
        count = pdfium_c.FPDFClipPath_CountPathSegments(clip, k)
        raw = [_point(pdfium_c.FPDFClipPath_GetPathSegment(clip, k, j)) for j in range(count)]
        if raw:
            points = _moved(np.array(raw), state.matrix)
            (x0, y0), (x1, y1) = points.min(axis=0).tolist(), points.max(axis=0).tolist()
            left, top, right, bottom = max(left, x0), max(top, y0), min(right, x1), min(bottom, y1)
    return _State(matrix, (left, top, right, bottom))


def _point(segment: pdfium_c.FPDF_PATHSEGMENT) -> tuple[float, float]:
    x, y = ctypes.c_float(), ctypes.c_float()
    pdfium_c.FPDFPathSegment_GetPoint(segment, x, y)
    return x.value, y.value


def _subpaths_of(item: pdfium_c.FPDF_PAGEOBJECT, state: _State, depth: int) -> Iterator[_Subpath]:
    """Stroked subpaths of one object; those of a form's objects where it is one."""
    kind = pdfium_c.FPDFPageObj_GetType(item)
    if kind == pdfium_c.FPDF_PAGEOBJ_PATH and _is_stroked(item):
        width, inner = ctypes.c_float(), _within(item, state)
        pdfium_c.FPDFPageObj_GetStrokeWidth(item, width)
        for points in _subpaths(item):
            yield _Subpath(points, width.value, inner)
    elif kind == pdfium_c.FPDF_PAGEOBJ_PATH:
        inner = _within(item, state)
        for points in _subpaths(item):
            rule = _thin_bar(points)
            if rule is not None:
                yield _Subpath(rule[0], rule[1], inner)
    elif kind == pdfium_c.FPDF_PAGEOBJ_FORM and depth < DEEPEST_FORM:
        inner = _within(item, state)
        for k in range(pdfium_c.FPDFFormObj_CountObjects(item)):
            yield from _subpaths_of(pdfium_c.FPDFFormObj_GetObject(item, k), inner, depth + 1)


def _thin_bar(
    points: list[tuple[float, float]],
) -> tuple[list[tuple[float, float]], float] | None:
    """Middle line and width of a filled bar: many programs rule paper with them."""
    corners = set(points)
    xs, ys = sorted({x for x, _ in corners}), sorted({y for _, y in corners})
    if len(corners) != 4 or len(xs) != 2 or len(ys) != 2:
        return None
    wide, high = xs[1] - xs[0], ys[1] - ys[0]
    if max(wide, high) < BAR * min(wide, high):
        return None
    x, y = (xs[0] + xs[1]) / 2, (ys[0] + ys[1]) / 2
    middle = [(xs[0], y), (xs[1], y)] if wide > high else [(x, ys[0]), (x, ys[1])]
    return middle, min(wide, high)


def _is_stroked(item: pdfium_c.FPDF_PAGEOBJECT) -> bool:
    fill, stroke = ctypes.c_int(), ctypes.c_int()
    pdfium_c.FPDFPath_GetDrawMode(item, fill, stroke)
    if not stroke.value:
        return False
    colour = [ctypes.c_uint() for _ in range(4)]
    pdfium_c.FPDFPageObj_GetStrokeColor(item, *colour)
    return colour[3].value >= FAINTEST_ALPHA


def _subpaths(item: pdfium_c.FPDF_PAGEOBJECT) -> Iterator[list[tuple[float, float]]]:
    """Vertices of each subpath of a path."""
    points: list[tuple[float, float]] = []
    curve: list[tuple[float, float]] = []
    for k in range(pdfium_c.FPDFPath_CountSegments(item)):
        segment = pdfium_c.FPDFPath_GetPathSegment(item, k)
        kind = pdfium_c.FPDFPathSegment_GetType(segment)
        if kind == pdfium_c.FPDF_SEGMENT_MOVETO:
            if len(points) > 1:
                yield points
            points = [_point(segment)]
        elif kind == pdfium_c.FPDF_SEGMENT_BEZIERTO:
            curve.append(_point(segment))
            if len(curve) == 3:
                points += _flattened(points[-1], *curve)
                curve = []
        else:
            points.append(_point(segment))
        if pdfium_c.FPDFPathSegment_GetClose(segment) and points[0] != points[-1]:
            points.append(points[0])
    if len(points) > 1:
        yield points


def _to_lines(paths: list[_Subpath]) -> tuple[DrawnLine, ...]:
    """Visible lines in pixels, in the order of the subpaths; those of one state moved at once."""
    groups: dict[_State, list[int]] = {}
    for k, path in enumerate(paths):
        groups.setdefault(path.state, []).append(k)
    lines: list[tuple[int, DrawnLine]] = []
    for state, members in groups.items():
        points = np.concatenate([paths[k].points for k in members])
        scale, step = _scale(state.matrix), _resolution(points)
        ends = np.cumsum([len(paths[k].points) for k in members])[:-1]
        for k, own in zip(members, np.split(_moved(points, state.matrix), ends), strict=True):
            width = paths[k].width * scale
            for part in _visible(own, state.box, width / 2):
                lines.append((k, DrawnLine(part, width, step * scale)))
    return tuple(line for _, line in sorted(lines, key=lambda numbered: numbered[0]))


def _flattened(*control: tuple[float, float]) -> list[tuple[float, float]]:
    """Points along a cubic Bézier curve, its start left out."""
    t = np.arange(1, CURVE_PARTS + 1)[:, None] / CURVE_PARTS
    a, b, c, d = np.array(control)
    curve = (1 - t) ** 3 * a + 3 * t * (1 - t) ** 2 * b + 3 * t**2 * (1 - t) * c + t**3 * d
    return [(float(x), float(y)) for x, y in curve]


def _resolution(points: np.ndarray) -> float:
    """The last decimal that the coordinates use; the library keeps them in single precision."""
    single = float(np.abs(points).max() * np.finfo(np.float32).eps)
    for decimals in range(MOST_DECIMALS):
        scaled = points * 10.0**decimals
        if np.abs(scaled - np.rint(scaled)).max() <= 2 * single * 10.0**decimals + 1e-9:
            return max(10.0**-decimals, single)
    return max(10.0**-MOST_DECIMALS, single)


def _visible(points: np.ndarray, box: Frame, slack_px: float) -> Iterator[np.ndarray]:
    """The parts of a line whose vertices lie inside a box; a crossing straight part counts.

    `slack_px` is half the line's width: a vertex so near to the edge still shows some ink.
    """
    low, high = np.array(box[:2]) - slack_px, np.array(box[2:]) + slack_px
    inside = ((points >= low) & (points <= high)).all(axis=1)
    if inside.all():
        yield points
        return
    if len(points) == 2:  # a ruled line may reach out on both sides
        yield from _straight(points, box)
        return
    edges = np.flatnonzero(np.diff(np.pad(inside.astype(np.int8), 1)))
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if stop - start > 1:
            yield points[start:stop]


def _straight(points: np.ndarray, box: Frame) -> Iterator[np.ndarray]:
    """A straight line cut at a box (Liang and Barsky, ACM Trans Graphics 3:1, 1984)."""
    start, way = points[0], points[1] - points[0]
    enter, leave = 0.0, 1.0
    for axis in (0, 1):
        low, high = box[axis], box[axis + 2]
        if way[axis] == 0:
            if not low <= start[axis] <= high:
                return
            continue
        ends = sorted(((low - start[axis]) / way[axis], (high - start[axis]) / way[axis]))
        enter, leave = max(enter, ends[0]), min(leave, ends[1])
    if enter < leave:
        yield start + np.array([[enter], [leave]]) * way

"""The lines and words that a PDF page draws, read from its objects instead of from its pixels.

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

from digitize.drawing import Drawing, DrawnLine, DrawnWord

MOST_OBJECTS = 400_000  # a drawing of more is no chart
DEEPEST_FORM = 8
CURVE_PARTS = 8  # straight parts of a flattened curve
FAINTEST_ALPHA = 26  # of 255: a tenth, less is no line that anyone sees
MOST_DECIMALS = 5

_POINTS_PER_MM = 72 / 25.4
_FINE = 1000  # places are asked for in thousandths of a pixel: the library answers in integers
_TURNED = 0.02  # radians off level from which text counts as turned
_WORD_GAP, _WORD_OVERLAP = 0.35, 0.4  # of the letter height: letters of one word


@dataclass(frozen=True)
class _State:
    """How the objects of a form reach the page: matrix to pixels, visible box in pixels."""

    matrix: np.ndarray  # (3, 3), column vectors
    box: tuple[float, float, float, float]


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
    lines = tuple(_lines_of_page(page, state))
    if not lines:
        return None
    return Drawing(lines, tuple(_words(page, to_px)), _scale(to_px) * _POINTS_PER_MM)


def _to_pixels(page: pdfium.PdfPage, width_px: int, height_px: int) -> np.ndarray:
    """The matrix from page space to pixels, crop box and page rotation included."""
    corners = np.array([[0.0, 0.0], [1000.0, 0.0], [0.0, 1000.0]])
    found = []
    for x, y in corners:
        u, v = ctypes.c_int(), ctypes.c_int()
        pdfium_c.FPDF_PageToDevice(
            page, 0, 0, width_px * _FINE, height_px * _FINE, 0, x, y, u, v
        )  # fmt: skip
        found.append((u.value / _FINE - 0.5, v.value / _FINE - 0.5))
    origin, right, up = (np.array(place) for place in found)
    matrix = np.eye(3)
    matrix[:2] = np.column_stack([(right - origin) / 1e3, (up - origin) / 1e3, origin])
    return matrix


def _scale(matrix: np.ndarray) -> float:
    return math.sqrt(abs(float(np.linalg.det(matrix[:2, :2]))))


def _lines_of_page(page: pdfium.PdfPage, state: _State) -> Iterator[DrawnLine]:
    for k in range(pdfium_c.FPDFPage_CountObjects(page)):
        yield from _lines_of(pdfium_c.FPDFPage_GetObject(page, k), state, 0)


def _lines_of(item: pdfium_c.FPDF_PAGEOBJECT, state: _State, depth: int) -> Iterator[DrawnLine]:
    """Lines of one object; those of a form's objects where it is one."""
    kind = pdfium_c.FPDFPageObj_GetType(item)
    if kind == pdfium_c.FPDF_PAGEOBJ_PATH and _is_stroked(item):
        inner = _State(state.matrix @ _matrix(item), _clipped(item, state))
        yield from _strokes(item, inner)
    elif kind == pdfium_c.FPDF_PAGEOBJ_FORM and depth < DEEPEST_FORM:
        inner = _State(state.matrix @ _matrix(item), _clipped(item, state))
        for k in range(pdfium_c.FPDFFormObj_CountObjects(item)):
            yield from _lines_of(pdfium_c.FPDFFormObj_GetObject(item, k), inner, depth + 1)


def _is_stroked(item: pdfium_c.FPDF_PAGEOBJECT) -> bool:
    fill, stroke = ctypes.c_int(), ctypes.c_int()
    pdfium_c.FPDFPath_GetDrawMode(item, fill, stroke)
    if not stroke.value:
        return False
    colour = [ctypes.c_uint() for _ in range(4)]
    pdfium_c.FPDFPageObj_GetStrokeColor(item, *colour)
    return colour[3].value >= FAINTEST_ALPHA


def _matrix(item: pdfium_c.FPDF_PAGEOBJECT) -> np.ndarray:
    m = pdfium_c.FS_MATRIX()
    pdfium_c.FPDFPageObj_GetMatrix(item, m)
    return np.array([[m.a, m.c, m.e], [m.b, m.d, m.f], [0, 0, 1]])


def _clipped(item: pdfium_c.FPDF_PAGEOBJECT, state: _State) -> tuple[float, float, float, float]:
    """The visible box, narrowed by the object's own clip; a clip of any shape counts by its box."""
    left, top, right, bottom = state.box
    clip = pdfium_c.FPDFPageObj_GetClipPath(item)
    for k in range(max(pdfium_c.FPDFClipPath_CountPaths(clip), 0)):
        count = pdfium_c.FPDFClipPath_CountPathSegments(clip, k)
        raw = [_point(pdfium_c.FPDFClipPath_GetPathSegment(clip, k, j)) for j in range(count)]
        if raw:
            points = _moved(np.array(raw), state.matrix)
            (x0, y0), (x1, y1) = points.min(axis=0), points.max(axis=0)
            left, top, right, bottom = max(left, x0), max(top, y0), min(right, x1), min(bottom, y1)
    return left, top, right, bottom


def _point(segment: pdfium_c.FPDF_PATHSEGMENT) -> tuple[float, float]:
    x, y = ctypes.c_float(), ctypes.c_float()
    pdfium_c.FPDFPathSegment_GetPoint(segment, x, y)
    return x.value, y.value


def _moved(points: np.ndarray, matrix: np.ndarray) -> np.ndarray:
    return points @ matrix[:2, :2].T + matrix[:2, 2]


def _strokes(item: pdfium_c.FPDF_PAGEOBJECT, state: _State) -> Iterator[DrawnLine]:
    """Visible parts of the subpaths of one path."""
    width = ctypes.c_float()
    pdfium_c.FPDFPageObj_GetStrokeWidth(item, width)
    scale = _scale(state.matrix)
    for points in _subpaths(item):
        step_px = _resolution(points) * scale
        for part in _visible(_moved(points, state.matrix), state.box):
            yield DrawnLine(part, width.value * scale, step_px)


def _subpaths(item: pdfium_c.FPDF_PAGEOBJECT) -> Iterator[np.ndarray]:
    """Vertices of each subpath in the path's own space, (n, 2)."""
    points: list[tuple[float, float]] = []
    curve: list[tuple[float, float]] = []
    for k in range(pdfium_c.FPDFPath_CountSegments(item)):
        segment = pdfium_c.FPDFPath_GetPathSegment(item, k)
        kind = pdfium_c.FPDFPathSegment_GetType(segment)
        if kind == pdfium_c.FPDF_SEGMENT_MOVETO:
            if len(points) > 1:
                yield np.array(points)
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
        yield np.array(points)


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


def _visible(points: np.ndarray, box: tuple[float, float, float, float]) -> Iterator[np.ndarray]:
    """The parts of a line whose vertices lie inside a box; a crossing straight part counts."""
    left, top, right, bottom = box
    x, y = points.T
    inside = (x >= left) & (x <= right) & (y >= top) & (y <= bottom)
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


def _straight(points: np.ndarray, box: tuple[float, float, float, float]) -> Iterator[np.ndarray]:
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


def _words(page: pdfium.PdfPage, to_px: np.ndarray) -> Iterator[DrawnWord]:
    """Words of the page's text: letters that stand close together on one base line."""
    text = page.get_textpage()
    word, box, upright = "", (0.0, 0.0, 0.0, 0.0), True
    for k in range(text.count_chars()):
        letter = chr(pdfium_c.FPDFText_GetUnicode(text, k))
        own = _letter_box(text, k, to_px)
        level = _is_level(text, k, to_px)
        if word and (letter.isspace() or not _follows(box, own) or level != upright):
            yield DrawnWord(word, box, upright)
            word = ""
        if letter.isspace() or not letter.isprintable():
            continue
        upright = level
        box = _around(box, own) if word else own
        word += letter
    if word:
        yield DrawnWord(word, box, upright)
    text.close()


def _letter_box(
    text: pdfium.PdfTextPage, k: int, to_px: np.ndarray
) -> tuple[float, float, float, float]:
    left, right, bottom, top = (ctypes.c_double() for _ in range(4))
    pdfium_c.FPDFText_GetCharBox(text, k, left, right, bottom, top)
    corners = np.array([[left.value, bottom.value], [right.value, top.value]])
    (x0, y0), (x1, y1) = np.sort(_moved(corners, to_px), axis=0)
    return float(x0), float(y0), float(x1), float(y1)


def _is_level(text: pdfium.PdfTextPage, k: int, to_px: np.ndarray) -> bool:
    """Whether a letter stands upright on the rendered page."""
    angle = pdfium_c.FPDFText_GetCharAngle(text, k)
    along = to_px[:2, :2] @ np.array([math.cos(angle), math.sin(angle)])
    return bool(along[0] > 0 and abs(along[1]) < _TURNED * along[0])


def _follows(
    word: tuple[float, float, float, float], letter: tuple[float, float, float, float]
) -> bool:
    """Whether a letter stands next to a word on its line."""
    high = max(word[3] - word[1], letter[3] - letter[1])
    overlap = min(word[3], letter[3]) - max(word[1], letter[1])
    gap = letter[0] - word[2]
    low = min(word[3] - word[1], letter[3] - letter[1])
    return bool(overlap >= _WORD_OVERLAP * low and -high < gap < _WORD_GAP * high)


def _around(
    one: tuple[float, float, float, float], other: tuple[float, float, float, float]
) -> tuple[float, float, float, float]:
    return (
        min(one[0], other[0]),
        min(one[1], other[1]),
        max(one[2], other[2]),
        max(one[3], other[3]),
    )

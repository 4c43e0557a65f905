"""Which of several possible ways the traces took where they cross: the one that can be redrawn."""

import numpy as np

from digitize.course import Course, begin, cut_out, fit, lay, placed
from digitize.crossing import Answer, find_answers, spliced
from digitize.field import Path
from digitize.ink import Ink
from digitize.pen import Pen
from digitize.ways import Routes, Way, to_ways

_END_MM = 0.5  # of each end of a place, where the lines begin out of nothing
_OUTLIER = 4.0


def settle(routes: Routes, ink: Ink, pen: Pen, noise: float) -> list[Path]:
    """Return the paths of all traces, each place of doubt settled by fit.

    Where the paths leave ink over, the possible answers are drawn with the page's own pen, fitted,
    and compared with the ink by the same cost that the fit itself makes small.

    Parameters
    ----------
    routes : Routes
        Shortest paths.
    ink : Ink
    pen : Pen
    noise : float
        Standard deviation of the density.
    """
    paths = routes.paths
    for answers in find_answers(routes.field, routes.paths, routes.anchors):
        paths = spliced(paths, _best(answers, routes, ink, pen, noise))
    return paths


def _best(answers: tuple[Answer, ...], routes: Routes, ink: Ink, pen: Pen, noise: float) -> Answer:
    """The answer whose redrawing is most like the ink; the cheapest of those that draw alike."""
    varied = [
        m
        for m, path in answers[0].paths.items()
        if any((a.paths[m].span != path.span).any() for a in answers[1:])
    ]
    if not varied:
        return answers[0]
    window = _window(answers, varied, routes, ink)
    best, least, drawn = answers[0], np.inf, set()
    for answer in answers:
        ways, courses = _begun(answer, routes, ink, pen)
        key = b"".join(way.edges.tobytes() for way in ways)
        if key in drawn:
            continue
        drawn.add(key)
        for _ in range(2):
            for k, m in enumerate(answer.paths):
                if m in varied and courses[k].inked:
                    cut = cut_out(k, ways, courses, pen, ink, noise)
                    courses[k] = placed(fit(cut, courses[k], pen, rounds=1), cut, courses[k])
        cost = _cost(courses, window, pen, ink, noise)
        if cost < least - 1e-6:
            best, least = answer, cost
    return best


def _begun(
    answer: Answer, routes: Routes, ink: Ink, pen: Pen
) -> tuple[tuple[Way, ...], list[Course]]:
    """The ink along each path of an answer, and the lines as they begin."""
    field, raster = routes.field, ink.raster
    parts = list(answer.paths.values())
    spans_mm = [(field.x_mm[p.left], field.x_mm[p.right - 1]) for p in parts]
    ways = to_ways(routes, parts, spans_mm, raster)
    return ways, [begin(w, *span, pen, ink) for w, span in zip(ways, spans_mm, strict=True)]


def _window(
    answers: tuple[Answer, ...], varied: list[int], routes: Routes, ink: Ink
) -> tuple[slice, slice]:
    """Rows and columns of the ink that the paths in doubt go through."""
    field, raster = routes.field, ink.raster
    parts = [path for answer in answers for m, path in answer.paths.items() if m in varied]
    top = min(int(p.span[0].min()) for p in parts)
    bottom = max(int(p.span[1].max()) for p in parts)
    left, right = min(p.left for p in parts), max(p.right for p in parts) - 1
    rows = raster.row(field.y_mm[top] - 1), raster.row(field.y_mm[bottom] + 1)
    cols = raster.col(field.x_mm[left] + _END_MM), raster.col(field.x_mm[right] - _END_MM)
    return slice(max(int(rows[0]), 0), int(rows[1]) + 1), slice(int(cols[0]), int(cols[1]) + 1)


def _cost(
    courses: list[Course], window: tuple[slice, slice], pen: Pen, ink: Ink, noise: float
) -> float:
    """Sum over the window of the fit's own cost of each pixel."""
    seen = ink.density[window]
    drawn = np.zeros(seen.shape, np.float32)
    full = Pen(pen.width_px, pen.blur_x_px, pen.blur_y_px)
    for course in courses:
        lay(drawn, course, full, window[0].start, window[1].start)
    ratio = (seen - pen.gain * drawn) / (noise * _OUTLIER)
    ratio[ink.hidden[window]] = 0
    return float(_OUTLIER**2 * np.log1p(ratio**2).sum())

"""Which of several possible ways the traces took where they cross: the one that can be redrawn."""

import numpy as np

from digitize.course import Course, begin, cut_out, fit, lay, placed
from digitize.crossing import Answer, find_answers, spliced
from digitize.field import Path
from digitize.ink import Ink
from digitize.pen import Pen
from digitize.ways import Routes, to_ways

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
        best = answers[0]
        if len(answers) > 1:
            best = min(answers, key=lambda a: _misfit(a, answers, routes, ink, pen, noise))
        paths = spliced(paths, best)
    return paths


def _misfit(
    answer: Answer,
    answers: tuple[Answer, ...],
    routes: Routes,
    ink: Ink,
    pen: Pen,
    noise: float,
) -> float:
    """Cost of the ink of one place against its best redrawing by one answer."""
    field, raster = routes.field, ink.raster
    parts = list(answer.paths.values())
    spans_mm = [(field.x_mm[p.left], field.x_mm[p.right - 1]) for p in parts]
    ways = to_ways(routes, parts, spans_mm, raster)
    courses = [begin(w, *span, pen, ink) for w, span in zip(ways, spans_mm, strict=True)]
    for _ in range(2):
        for k, course in enumerate(courses):
            if course.inked:
                cut = cut_out(k, ways, courses, pen, ink, noise)
                courses[k] = placed(fit(cut, course, pen), cut, course)
    return _cost(courses, _window(answers, routes, ink), pen, ink, noise)


def _window(answers: tuple[Answer, ...], routes: Routes, ink: Ink) -> tuple[slice, slice]:
    """Rows and columns of the ink that any of the answers goes through."""
    field, raster = routes.field, ink.raster
    parts = [path for answer in answers for path in answer.paths.values()]
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

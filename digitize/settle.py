"""Which of several possible ways the traces took where they cross: the one that can be redrawn."""

from dataclasses import dataclass, field

import numpy as np

from digitize.course import Course, begin, cut_out, fit, lay, placed
from digitize.crossing import Answer, find_answers, spliced, widened
from digitize.field import Path
from digitize.ink import Ink
from digitize.pen import Pen
from digitize.ways import EDGE, Routes, Way, to_ways

_END_MM = 0.5  # of each end of a place, where the lines begin out of nothing
_OUTLIER = 4.0
_FAIR = 1.8  # of cost for each pixel of ink: about what noise and the pen's own unevenness make
_GAIN = 30.0  # of cost: as much as a few pixels of unexplained ink


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


@dataclass(frozen=True, eq=False)
class _Judge:
    """What it takes to redraw an answer and compare it with the ink of its place."""

    routes: Routes
    ink: Ink
    pen: Pen
    noise: float
    varied: tuple[int, ...]  # traces in doubt; the others are drawn as they begin
    window: tuple[slice, slice]
    known: dict[bytes, float] = field(default_factory=dict)  # costs, by the ink that is explained

    def cost(self, answer: Answer) -> float:
        """Cost of the ink of the place against its best redrawing by one answer."""
        ways, courses = _begun(answer, self.routes, self.ink, self.pen)
        key = b"".join(way.edges.tobytes() for way in ways)
        if key not in self.known:
            for _ in range(2):
                for k, m in enumerate(answer.paths):
                    if m in self.varied and courses[k].inked:
                        cut = cut_out(k, ways, courses, self.pen, self.ink, self.noise)
                        line = fit(cut, courses[k], self.pen, rounds=1)
                        courses[k] = placed(line, cut, courses[k])
            self.known[key] = _cost(courses, self.window, self.pen, self.ink, self.noise)
        return self.known[key]


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
    judge = _Judge(routes, ink, pen, noise, tuple(varied), window)
    best = min(answers, key=judge.cost)
    if judge.cost(best) < _FAIR * np.count_nonzero(ink.density[window] > EDGE):
        return best
    for m in varied:
        for side in (0, 1):
            wider = widened(routes.field, best, m, side)
            if wider is not None and judge.cost(wider) < judge.cost(best) - _GAIN:
                best = wider
    return best


def _begun(
    answer: Answer, routes: Routes, ink: Ink, pen: Pen
) -> tuple[tuple[Way, ...], list[Course]]:
    """The ink along each path of an answer, and the lines as they begin."""
    raster, x_mm = ink.raster, routes.field.x_mm
    parts = list(answer.paths.values())
    spans_mm = [(x_mm[p.left], x_mm[p.right - 1]) for p in parts]
    ways = to_ways(routes, parts, spans_mm, raster)
    return ways, [begin(w, *span, pen, ink) for w, span in zip(ways, spans_mm, strict=True)]


def _window(
    answers: tuple[Answer, ...], varied: list[int], routes: Routes, ink: Ink
) -> tuple[slice, slice]:
    """Rows and columns of the ink that the paths in doubt go through."""
    raster, x_mm, y_mm = ink.raster, routes.field.x_mm, routes.field.y_mm
    parts = [path for answer in answers for m, path in answer.paths.items() if m in varied]
    top = min(int(p.span[0].min()) for p in parts)
    bottom = max(int(p.span[1].max()) for p in parts)
    left, right = min(p.left for p in parts), max(p.right for p in parts) - 1
    rows = raster.row(y_mm[top] - 1), raster.row(y_mm[bottom] + 1)
    cols = raster.col(x_mm[left] + _END_MM), raster.col(x_mm[right] - _END_MM)
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

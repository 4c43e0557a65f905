"""Which line goes on where at a place in which two lines meet: each straight on.

Two lines that cross and two that touch and turn back leave the same ink. No redrawing tells them
apart, but a pen does not change its direction just where another trace passes.
"""

from dataclasses import replace
from itertools import pairwise

import numpy as np

from digitize.course import Course

_NEAR, _FAR = 1, 4  # nodes off a meeting between which a line's slope is taken
_BETTER = 0.7  # of the turns as they are: what crossing over must bring them down to
_MOST_MEETINGS = 400


def uncross(
    courses: list[Course], known: list[np.ndarray], width_px: float
) -> tuple[list[Course], set[int]]:
    """Exchange stretches of lines between two meetings where that makes both go straighter.

    Parameters
    ----------
    courses : list of Course
        Fitted lines.
    known : list of (n,) float arrays
        For each line, columns in which it stands beyond doubt: there it is itself.
    width_px : float
        Of the pen: lines so near to each other meet.

    Returns
    -------
    list of Course
    set of int
        Numbers of the lines that were changed.
    """
    courses, changed = list(courses), set()
    for a in range(len(courses)):
        for b in range(a + 1, len(courses)):
            parts = _exchanged(courses[a], courses[b], known[a], known[b], width_px)
            if parts is not None:
                courses[a], courses[b] = parts
                changed |= {a, b}
    return courses, changed


def _exchanged(
    one: Course, two: Course, known_one: np.ndarray, known_two: np.ndarray, width_px: float
) -> tuple[Course, Course] | None:
    """Both lines with stretches exchanged, or None where they are right as they are."""
    low, high = max(one.x[0], two.x[0]), min(one.x[-1], two.x[-1])
    if high - low < 4 * width_px or not (one.inked and two.inked):
        return None
    x = one.x[(one.x >= low) & (one.x <= high)]
    y = np.interp(x, one.x, one.y), np.interp(x, two.x, two.y)
    meetings = _meetings(y[0] - y[1], width_px)
    if not 0 < len(meetings) <= _MOST_MEETINGS:
        return None
    sure = np.intersect1d(np.rint(known_one), np.rint(known_two))
    crossed = _straightest(y, x, meetings, sure)
    if not crossed.any():
        return None
    over = np.zeros(len(x), bool)
    for state, (start, stop) in zip(crossed, pairwise([0, *meetings, len(x)]), strict=True):
        over[start:stop] = state
    return _with(one, two, x, over), _with(two, one, x, over)


def _meetings(apart: np.ndarray, width_px: float) -> list[int]:
    """Nodes at which two lines cross, or come nearest while they touch."""
    distance = np.where(np.isfinite(apart), np.abs(apart), np.inf)
    inner = distance[1:-1]
    nearest = (inner <= distance[:-2]) & (inner < distance[2:]) & (inner < width_px)
    # a line that begins or ends beside another, however far away, does not cross it
    crossing = np.flatnonzero(apart[:-1] * apart[1:] < 0)
    found = np.union1d(np.flatnonzero(nearest) + 1, crossing)
    merged: list[int] = []
    for node in found:
        if not merged or node - merged[-1] > 2:
            merged.append(int(node))
    return [n for n in merged if _FAR < n < len(apart) - _FAR - 1]


def _straightest(
    y: tuple[np.ndarray, np.ndarray], x: np.ndarray, meetings: list[int], sure: np.ndarray
) -> np.ndarray:
    """Whether lines are exchanged before, between and after meetings, so that they turn least."""
    stay, go = np.array([_turns(y, node) for node in meetings]).T
    bounds = [x[0] - 1, *x[meetings], x[-1] + 1]
    held = [bool(((sure > a) & (sure < b)).any()) for a, b in pairwise(bounds)]
    held[-1] |= not any(held)  # with no hold at all they are what they are in the end
    price = np.array([0.0, np.inf if held[0] else 0.0])  # as they are, and exchanged
    came = np.zeros((len(meetings), 2), int)
    for k in range(len(meetings)):
        same, other = price + stay[k], price[::-1] + go[k]
        came[k] = np.where(same <= other, (0, 1), (1, 0))
        price = np.minimum(same, other)
        if held[k + 1]:
            price[1] = np.inf
    states = [int(price[1] < price[0])]
    for k in range(len(meetings) - 1, -1, -1):
        states.append(int(came[k, states[-1]]))
    return np.array(states[::-1], bool)


def _turns(y: tuple[np.ndarray, np.ndarray], node: int) -> tuple[float, float]:
    """How much both lines turn at a meeting if they go on as they are, and if exchanged."""
    before = [(line[node - _NEAR] - line[node - _FAR]) / (_FAR - _NEAR) for line in y]
    after = [(line[node + _FAR] - line[node + _NEAR]) / (_FAR - _NEAR) for line in y]
    stay = abs(after[0] - before[0]) + abs(after[1] - before[1])
    go = abs(after[1] - before[0]) + abs(after[0] - before[1])
    if not np.isfinite(stay):
        return 0.0, np.inf
    return _BETTER * stay, go


def _with(course: Course, other: Course, x: np.ndarray, over: np.ndarray) -> Course:
    """A line that takes another's heights where `over` is True."""
    taken = np.interp(course.x, x, over.astype(float), left=0, right=0) > 0.5
    y = np.where(taken, np.interp(course.x, other.x, other.y), course.y)
    if course.faded is None or other.faded is None:
        return replace(course, y=y)
    faded = np.where(taken, np.interp(course.x, other.x, other.faded), course.faded)
    return replace(course, y=y, faded=faded)

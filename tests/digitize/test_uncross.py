"""Lines that meet go straight on, unless they are known to stand otherwise."""

import numpy as np
import pytest

from digitize.course import Course
from digitize.uncross import uncross

WIDTH = 3.0
X = np.arange(0.0, 200.0, 0.5)
STEEP = 2.0  # rise from node to node: a meeting is told to the next node
NOWHERE = np.zeros(0)


def _courses(*lines: np.ndarray) -> list[Course]:
    return [Course(X, line) for line in lines]


def test_two_lines_that_bounce_are_made_to_cross_twice():
    deep = 50 + 60 * np.exp(-0.5 * ((X - 100) / 10) ** 2)
    level = np.full(len(X), 80.0)
    bounced = _courses(np.minimum(deep, level), np.maximum(deep, level))
    known = np.array([10.0, 190.0])
    (upper, lower), changed = uncross(bounced, [known, known], WIDTH)
    assert changed == {0, 1}
    assert upper.y == pytest.approx(deep, abs=STEEP)
    assert lower.y == pytest.approx(level, abs=STEEP)


def test_lines_that_cross_straight_are_left_alone():
    deep = 50 + 60 * np.exp(-0.5 * ((X - 100) / 10) ** 2)
    courses = _courses(deep, np.full(len(X), 80.0))
    after, changed = uncross(courses, [NOWHERE, NOWHERE], WIDTH)
    assert not changed
    assert after[0].y == pytest.approx(deep)


def test_one_meeting_between_columns_beyond_doubt_is_no_crossing():
    falling, rising = 20 + 0.4 * X, 100 - 0.4 * X
    apart = _courses(np.minimum(falling, rising), np.maximum(falling, rising))
    known = np.array([10.0, 190.0])
    after, changed = uncross(apart, [known, known], WIDTH)
    assert not changed
    assert after[0].y == pytest.approx(np.minimum(falling, rising))


def test_one_meeting_is_a_crossing_where_one_end_is_open():
    falling, rising = 20 + 0.4 * X, 100 - 0.4 * X
    apart = _courses(np.minimum(falling, rising), np.maximum(falling, rising))
    known = np.array([190.0])
    (upper, lower), _ = uncross(apart, [known, known], WIDTH)
    assert upper.y == pytest.approx(rising, abs=STEEP)
    assert lower.y == pytest.approx(falling, abs=STEEP)


def test_a_gap_is_not_filled_from_the_other_line():
    falling, rising = 20 + 0.4 * X, 100 - 0.4 * X
    upper = np.where((X > 60) & (X < 70), np.nan, np.minimum(falling, rising))
    courses = _courses(upper, np.maximum(falling, rising))
    after, _ = uncross(courses, [np.array([190.0]), np.array([190.0])], WIDTH)
    assert sum(np.isnan(line.y).sum() for line in after) == np.isnan(upper).sum()


def test_gaps_of_lines_far_apart_are_no_meetings():
    upper = np.full(len(X), 20.0)
    upper[np.arange(len(X)) % 40 < 12] = np.nan
    lower = 90 + 3 * np.sin(X / 5)
    after, changed = uncross(_courses(upper, lower), [NOWHERE, NOWHERE], WIDTH)
    assert not changed
    assert np.nanmax(after[0].y) == 20.0


def test_a_line_that_takes_another_s_way_takes_what_faded_there_too():
    deep = 50 + 60 * np.exp(-0.5 * ((X - 100) / 10) ** 2)
    level = np.full(len(X), 80.0)
    faded = np.where(X < 120, np.nan, 1.0), np.where((X > 95) & (X < 105), deep, np.nan)
    lines = np.minimum(deep, level), np.maximum(deep, level)
    courses = [Course(X, y, f) for y, f in zip(lines, faded, strict=True)]
    (upper, lower), _ = uncross(courses, [np.array([10.0, 190.0])] * 2, WIDTH)
    assert (
        np.isfinite(upper.faded).sum() == np.isfinite(faded[0]).sum() + np.isfinite(faded[1]).sum()
    )
    assert np.isnan(lower.faded).all()

"""Curves as lines that lie on or above them."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.schedule.pieces import best_volume_by_duration, concave_hull, lines_above

# Pieces whose slopes agree to 1e-6 are taken as one, which may hide that share of a value
A_MILLIONTH = 1e-5

points = st.lists(
    st.tuples(st.floats(0.1, 10), st.floats(-100, 100)), min_size=1, max_size=15
).map(lambda rows: (np.cumsum([x for x, _ in rows]), np.array([y for _, y in rows])))  # fmt: skip


def height(lines, x: float) -> float:
    return min(offset + slope * x for slope, offset in lines)


def test_a_dent_is_bridged():
    x, y = np.array([0.0, 1, 2, 3]), np.array([0.0, 3, 1, 4])
    assert [c.tolist() for c in concave_hull(x, y)] == [[0, 1, 3], [0, 3, 4]]
    assert lines_above(x, y) == [(3.0, 0.0), (0.5, 2.5)]


def test_points_on_a_line_are_one_line():
    assert lines_above(np.array([0.0, 1, 2, 5]), np.array([1.0, 3, 5, 11])) == [(2.0, 1.0)]


def test_a_single_point_is_a_level_line():
    assert lines_above(np.array([2.0]), np.array([7.0])) == [(0.0, 7.0)]


@given(points)
def test_no_point_lies_above_its_lines_and_the_ends_lie_on_them(curve):
    x, y = curve
    lines = lines_above(x, y)
    heights = np.array([height(lines, at) for at in x])
    scale = A_MILLIONTH * (1 + np.abs(y).max())
    assert np.all(heights >= y - scale)
    assert heights[[0, -1]] == pytest.approx(y[[0, -1]], abs=scale)


@given(points)
def test_slopes_fall(curve):
    slopes = [slope for slope, _ in lines_above(*curve)]
    assert slopes == sorted(slopes, reverse=True)


@given(st.lists(st.tuples(st.floats(0.1, 20), st.floats(0, 50)), min_size=1, max_size=8), st.randoms())
def test_no_choice_of_seconds_beats_the_best_by_duration(rows, chance):
    step_s, rate = np.array([s for s, _ in rows]), np.array([r for _, r in rows])
    duration_s, volume = best_volume_by_duration(step_s, rate)
    used = np.array([chance.random() * step for step in step_s])
    most = np.interp(used.sum(), duration_s, volume)
    assert float(used @ rate) <= most + A_MILLIONTH * (1 + volume[-1])
    assert volume[-1] == pytest.approx(float(step_s @ rate))

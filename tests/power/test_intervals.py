"""Edges, and sessions laid over a week."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from power_examples import week

from planner.power.intervals import Overlay, interval_of, lay_over, merged_edges_s
from planner.power.loads import Draw


def overlay(edges_s, load_w=10.0, array_w=3.0, attitude=2) -> Overlay:
    n = len(edges_s) - 1
    draw = Draw(*(np.full(n, load_w) for _ in range(3)), np.zeros(n))
    return Overlay(np.array(edges_s, dtype=float), draw, np.full(n, array_w), np.full(n, attitude))


def at(intervals, column, time_s):
    return column[interval_of(intervals.edges_s, time_s)]


def test_edges_are_sorted_cut_to_the_span_and_never_closer_than_a_millisecond():
    edges_s = merged_edges_s([50.0, -5.0, 10.0], [10.0004, 99.9999, 130.0], span_s=100.0)
    assert edges_s.tolist() == [0.0, 10.0, 50.0, 100.0]


@given(st.lists(st.floats(-10, 110), max_size=30))
def test_merged_edges_rise_from_0_to_the_end_of_the_span(edges):
    edges_s = merged_edges_s(edges, span_s=100.0)
    assert (edges_s[0], edges_s[-1]) == (0.0, 100.0)
    assert np.all(np.diff(edges_s) > 0)


def test_a_moment_on_an_edge_belongs_to_the_interval_that_begins_there():
    assert interval_of(np.array([0.0, 10.0, 20.0]), np.array([-1.0, 0.0, 9.9, 10.0, 20.0, 25.0])).tolist() == [
        0, 0, 0, 1, 1, 1,
    ]  # fmt: skip


def test_no_session_leaves_the_week_as_it_was():
    idle = week([5.0, 6.0, 7.0], [1.0, 2.0, 3.0])
    same = lay_over(idle, [])
    assert same.array_w.tolist() == [5.0, 6.0, 7.0]
    assert same.load_w.tolist() == [1.0, 2.0, 3.0]


def test_a_session_adds_its_load_and_brings_its_own_panels():
    intervals = lay_over(week(np.full(5, 5.0), np.full(5, 1.0)), [overlay([90.0, 150.0])])
    assert at(intervals, intervals.load_w, [80.0, 100.0, 149.0, 151.0]).tolist() == [1.0, 11.0, 11.0, 1.0]
    assert at(intervals, intervals.array_w, [80.0, 100.0, 149.0, 151.0]).tolist() == [5.0, 3.0, 3.0, 5.0]
    assert at(intervals, intervals.session_w, [80.0, 100.0]).tolist() == [0.0, 10.0]
    assert at(intervals, intervals.attitude, [80.0, 100.0]).tolist() == [0, 2]


def test_where_sessions_overlap_loads_add_and_the_first_that_turns_has_the_attitude():
    first, second = overlay([60.0, 180.0], attitude=2, array_w=3.0), overlay([120.0, 240.0], attitude=1, array_w=4.0)
    intervals = lay_over(week(np.full(5, 5.0), np.full(5, 1.0)), [first, second])
    moments = [90.0, 150.0, 210.0]
    assert at(intervals, intervals.load_w, moments).tolist() == [11.0, 21.0, 11.0]
    assert at(intervals, intervals.array_w, moments).tolist() == [3.0, 3.0, 4.0]
    assert at(intervals, intervals.attitude, moments).tolist() == [2, 2, 1]


def test_a_session_in_the_idle_attitude_leaves_the_attitude_to_the_one_that_turns():
    still, turning = overlay([60.0, 240.0], attitude=0, array_w=9.0), overlay([120.0, 180.0], attitude=2, array_w=3.0)
    intervals = lay_over(week(np.full(5, 5.0), np.full(5, 1.0)), [still, turning])
    assert at(intervals, intervals.attitude, [90.0, 150.0]).tolist() == [0, 2]
    assert at(intervals, intervals.array_w, [90.0, 150.0]).tolist() == [5.0, 3.0]
    assert at(intervals, intervals.load_w, [90.0, 150.0]).tolist() == [11.0, 21.0]


def test_a_session_inside_another_does_not_move_its_attitude():
    outer, inner = overlay([60.0, 240.0], attitude=2), overlay([120.0, 180.0], attitude=1)
    intervals = lay_over(week(np.full(5, 5.0), np.full(5, 1.0)), [outer, inner])
    assert set(at(intervals, intervals.attitude, [70.0, 150.0, 230.0]).tolist()) == {2}


@given(st.lists(st.tuples(st.floats(0, 250), st.floats(1, 50)), max_size=6))
def test_the_energy_of_loads_adds_up(sessions):
    idle = week(np.full(5, 5.0), np.full(5, 1.0))
    overlays = [overlay([begin, begin + length]) for begin, length in sorted(sessions)]
    intervals = lay_over(idle, overlays)
    expected_j = 300.0 + sum(10.0 * (min(begin + length, 300.0) - begin) for begin, length in sessions)
    a_millisecond_of_each_edge_j = 0.1
    assert intervals.load_w @ intervals.duration_s == pytest.approx(expected_j, abs=a_millisecond_of_each_edge_j)


def test_the_idle_week_is_not_touched():
    idle = week(np.full(5, 5.0), np.full(5, 1.0))
    lay_over(idle, [overlay([60.0, 180.0])])
    assert idle.load_w.tolist() == [1.0] * 5
    assert idle.array_w.tolist() == [5.0] * 5

"""On-board storage: closed forms, kinks at empty and full, and that every bit is accounted for."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.data.recorder import rate_on, simulate_recorder

A_BIT_OF_A_GIGABIT = 1e-6  # Mbit: rounding of sums over 1e5 Mbit in double precision stays a thousand times below


def constant(begin_s, end_s, rate):
    return np.array([begin_s, end_s], dtype=float), np.array([rate], dtype=float)


def test_filling_alone_rises_straight():
    series = simulate_recorder(10.0, 1000.0, 100.0, [constant(20, 60, 2.5)], [])
    assert series.time_s.tolist() == [0, 20, 60, 100]
    assert series.stored_mbit.tolist() == [10, 10, 110, 110]
    assert series.lost_mbit[-1] == 0


def test_full_between_two_edges_gets_a_row_and_the_rest_is_lost():
    series = simulate_recorder(0.0, 100.0, 60.0, [constant(0, 60, 2.0)], [])
    assert series.time_s.tolist() == [0, 50, 60]
    assert series.stored_mbit.tolist() == [0, 100, 100]
    assert series.lost_mbit.tolist() == [0, 0, 20]
    assert series.produced_mbit[-1] == 120


def test_empty_between_two_edges_gets_a_row_and_only_what_comes_in_is_delivered():
    series = simulate_recorder(30.0, 100.0, 60.0, [constant(0, 60, 1.0)], [constant(0, 60, 2.0)])
    assert series.time_s.tolist() == [0, 30, 60]
    assert series.stored_mbit.tolist() == [30, 0, 0]
    assert series.delivered_mbit.tolist() == [0, 60, 90]


def test_full_while_sending_loses_only_what_neither_fits_nor_goes():
    series = simulate_recorder(100.0, 100.0, 10.0, [constant(0, 10, 5.0)], [constant(0, 10, 3.0)])
    assert (series.delivered_mbit[-1], series.lost_mbit[-1], series.stored_mbit[-1]) == (30, 20, 100)


def test_a_start_above_the_room_is_full():
    assert simulate_recorder(500.0, 100.0, 10.0, [], []).stored_mbit.tolist() == [100, 100]


def test_nothing_at_all():
    series = simulate_recorder(0.0, 100.0, 10.0, [], [constant(2, 4, 1.0)])
    assert series.stored_mbit.tolist() == [0] * len(series.time_s)
    assert series.delivered_mbit[-1] == 0


def test_what_lies_outside_the_span_does_not_count():
    series = simulate_recorder(0.0, 1e6, 100.0, [constant(-50, 10, 1.0), constant(90, 500, 2.0)], [])
    assert (series.time_s[0], series.time_s[-1]) == (0, 100)
    assert series.stored_mbit[-1] == 10 + 20


def test_two_sources_and_two_sessions_add_up():
    one = simulate_recorder(50, 1e6, 100, [constant(0, 100, 3.0)], [constant(20, 40, 4.0)])
    two = simulate_recorder(50, 1e6, 100, [constant(0, 100, 1.0)] * 3, [constant(20, 40, 1.0)] * 4)
    assert two.stored_at_mbit(70.0) == pytest.approx(one.stored_at_mbit(70.0), abs=A_BIT_OF_A_GIGABIT)


def test_delivered_between_and_stored_at():
    series = simulate_recorder(100.0, 1000.0, 100.0, [], [constant(10, 30, 2.0)])
    assert series.delivered_between_mbit(0, 20) == pytest.approx(20.0)
    assert series.delivered_between_mbit(10, 30) == pytest.approx(40.0)
    assert series.stored_at_mbit(25.0) == pytest.approx(70.0)


def test_a_rate_is_nothing_outside_its_own_edges():
    edges_s = np.array([0.0, 1.0, 2.0, 3.0, 4.0])
    rates = np.array([1.0, 2.0, 3.0]), np.array([5.0, 7.0])
    assert rate_on(edges_s, rates).tolist() == [0, 5, 7, 0]


rates = st.builds(
    lambda edges, values: (np.array(sorted(edges)), np.array(values[: len(edges) - 1])),
    st.lists(st.floats(-50, 250), min_size=2, max_size=5, unique=True),
    st.lists(st.floats(0, 30), min_size=4, max_size=4),
)


@given(st.floats(0, 500), st.floats(1, 500), st.lists(rates, max_size=3), st.lists(rates, max_size=3))
def test_every_bit_is_accounted_for(start, room, produced, offered):
    series = simulate_recorder(start, room, 200.0, produced, offered)
    begin = min(start, room)
    accounted = begin + series.produced_mbit - series.delivered_mbit - series.lost_mbit
    assert series.stored_mbit == pytest.approx(accounted, abs=A_BIT_OF_A_GIGABIT)
    assert np.all(series.stored_mbit >= 0)
    assert np.all(series.stored_mbit <= room)
    for cumulative in (series.produced_mbit, series.delivered_mbit, series.lost_mbit):
        assert np.all(np.diff(cumulative) >= -A_BIT_OF_A_GIGABIT)
    assert np.all(np.diff(series.time_s) >= 0)


@given(st.floats(0, 500), st.lists(rates, max_size=2), st.lists(rates, max_size=2), st.floats(1, 300))
def test_a_larger_recorder_loses_less_and_delivers_no_less(start, produced, offered, room):
    small = simulate_recorder(min(start, room), room, 200.0, produced, offered)
    large = simulate_recorder(min(start, room), 2 * room, 200.0, produced, offered)
    assert large.lost_mbit[-1] <= small.lost_mbit[-1] + A_BIT_OF_A_GIGABIT
    assert large.delivered_mbit[-1] >= small.delivered_mbit[-1] - A_BIT_OF_A_GIGABIT


@given(st.floats(0, 100), st.floats(0.1, 30), st.floats(0.1, 30))
def test_against_steps_of_a_hundredth_of_a_second(start, fill, empty):
    room, span_s, step_s = 100.0, 20.0, 0.01
    series = simulate_recorder(start, room, span_s, [constant(0, 20, fill)], [constant(5, 12, empty)])
    stored = start
    for k in range(round(span_s / step_s)):
        sent = min(empty * step_s, stored + fill * step_s) if 5 <= (k + 0.5) * step_s < 12 else 0.0
        stored = min(stored + fill * step_s - sent, room)
    assert series.stored_mbit[-1] == pytest.approx(stored, abs=30 * step_s)  # one step at the highest rate

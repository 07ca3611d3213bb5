"""Rainflow counting and cycle life."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from power_examples import battery

from planner.power.life import count_cycles, cycles_to_end_of_life, life_used_pct, turning_points

ROUNDING = 1e-12


def counted(history) -> dict[float, float]:
    """Cycles by range."""
    totals = {}
    for cycle in count_cycles(history):
        totals[cycle.depth] = totals.get(cycle.depth, 0.0) + cycle.count
    return totals


def test_the_worked_example_of_the_standard():
    """ASTM E1049-85, fig. 6: history -2 1 -3 5 -1 3 -4 4 -2; cycles by range 3: 0.5, 4: 1.5, 6: 0.5, 8: 1, 9: 0.5."""
    assert counted([-2, 1, -3, 5, -1, 3, -4, 4, -2]) == {3.0: 0.5, 4.0: 1.5, 6.0: 0.5, 8.0: 1.0, 9.0: 0.5}


def test_a_swing_there_and_back_is_two_halves():
    assert counted([90, 70, 90]) == {20.0: 1.0}


def test_points_on_the_way_and_level_stretches_do_not_count():
    assert counted([90, 85, 80, 80, 75, 70, 70, 80, 90, 90]) == {20.0: 1.0}
    assert turning_points([90, 85, 85, 70, 70, 90]).tolist() == [0, 3, 5]


@pytest.mark.parametrize("history", [[], [80.0], [80.0, 80.0, 80.0]])
def test_a_level_history_has_no_cycles(history):
    assert count_cycles(history) == []


@given(st.lists(st.integers(0, 100), min_size=2, max_size=60))
def test_every_reversal_is_half_a_cycle_and_the_largest_range_is_found(history):
    cycles = count_cycles(history)
    assert sum(cycle.count for cycle in cycles) == max(len(turning_points(history)) - 1, 0) / 2
    assert max((cycle.depth for cycle in cycles), default=0) == max(history) - min(history)


def test_cycle_life_follows_its_table_and_is_straight_in_the_logarithms():
    own = battery(cycle_life=((10.0, 40_000.0), (40.0, 10_000.0)))
    assert cycles_to_end_of_life(own, 10.0) == pytest.approx(40_000.0)
    assert cycles_to_end_of_life(own, 20.0) == pytest.approx(20_000.0)
    assert cycles_to_end_of_life(own, np.array([5.0, 80.0])) == pytest.approx([80_000.0, 5_000.0])


def test_life_used_is_the_sum_of_damages():
    """Palmgren's and Miner's rule: 15 cycles a day of 20 %, of 20 000, use 0.075 % of the life."""
    own = battery(cycle_life=((10.0, 40_000.0), (40.0, 10_000.0)))
    assert life_used_pct(own, [90.0, *[70.0, 90.0] * 15]) == pytest.approx(100 * 15 / 20_000, rel=ROUNDING)


HUNDREDTHS = st.integers(2_000, 10_000).map(lambda hundredths: hundredths / 100)  # apart by more than rounding


@given(st.lists(HUNDREDTHS, min_size=3, max_size=30), st.floats(1.0, 2.0))
def test_deeper_cycles_use_more_life(history, stretch):
    deeper = 100 - (100 - np.array(history)) * stretch
    assert life_used_pct(battery(), deeper) >= life_used_pct(battery(), history) * (1 - 1e-9)

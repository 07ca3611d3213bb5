"""The charge through time: closed forms, an integration by a library, and what must hold for every input."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from power_examples import FLAT_CURVE, LEAKLESS, LEVEL_RESISTANCE, SMALLEST_R_MOHM, cell, rising_curves
from scipy.integrate import solve_ivp

from planner.power.recurrence import CellIntervals, charge_course_c

A_MILLIONTH = 1e-6  # of the quantity: rounding over a week of intervals stays far below
A_MILLICOULOMB = 1e-3  # a ten-millionth of the cells used here


def drive(surplus_w, duration_s=60.0, limit_a=10.0, factor=1.0):
    surplus_w = np.atleast_1d(np.asarray(surplus_w, dtype=float))
    columns = np.broadcast_arrays(duration_s, surplus_w, factor, limit_a)
    return CellIntervals(*(column.astype(float) for column in columns))


def test_hours_to_the_floor_under_a_constant_load():
    """No Sun, no losses: stored energy falls as a straight line, whatever the shape of the curve."""
    own = cell(cell_resistance_mohm=SMALLEST_R_MOHM, **LEAKLESS)
    start_c, floor_c = own.charge_at_c([92.0, 60.0])
    hours = (own.stored_energy_j(start_c) - own.stored_energy_j(floor_c)) / 5.0 / 3600
    course_c = charge_course_c(own, float(start_c), drive(np.full(100, -5.0), duration_s=hours * 36))
    assert course_c[-1] == pytest.approx(floor_c, rel=A_MILLIONTH)


def test_on_a_level_curve_the_quadratic_is_the_whole_answer():
    own = cell(open_circuit=FLAT_CURVE, cell_resistance_mohm=20.0, **LEVEL_RESISTANCE, **LEAKLESS)
    course_c = charge_course_c(own, 9000.0, drive(np.full(10, -10.0)))
    current_a = (3.3 - np.sqrt(3.3**2 - 4 * 0.020 * 10.0)) / (2 * 0.020)
    assert np.diff(course_c) == pytest.approx(np.full(10, -current_a * 60), rel=A_MILLIONTH)


def test_discharge_agrees_with_an_integration_by_scipy():
    """solve_ivp on dq/dt = -I(q), the same circuit in continuous time."""
    own = cell(**LEAKLESS)
    start_c = float(own.charge_at_c(95.0))

    def rate(_time_s, charge_c):
        volt, ohm = own.open_circuit_v(charge_c), own.resistance_ohm(charge_c)
        return -(volt - np.sqrt(volt**2 - 4 * ohm * 6.0)) / (2 * ohm)

    exact = solve_ivp(rate, (0, 3600), [start_c], rtol=1e-10, atol=1e-8, max_step=10.0).y[0, -1]
    course_c = charge_course_c(own, start_c, drive(np.full(60, -6.0)))
    half_a_second_of_load_c = 1.0  # 60 s intervals against continuous time, over an hour
    assert course_c[-1] == pytest.approx(exact, abs=half_a_second_of_load_c)


def test_constant_current_charging_is_a_straight_line():
    own = cell(**LEAKLESS)
    course_c = charge_course_c(own, 3000.0, drive(np.full(10, 50.0), limit_a=1.25))
    assert np.diff(course_c) == pytest.approx(np.full(10, 75.0), rel=A_MILLIONTH)


def test_coulombic_loss_is_charge_that_does_not_arrive():
    own = cell(coulombic_efficiency=0.99, self_discharge_pct_month=0.0)
    course_c = charge_course_c(own, 3000.0, drive([50.0], limit_a=1.25))
    assert course_c[1] - course_c[0] == pytest.approx(0.99 * 1.25 * 60, rel=A_MILLIONTH)


def test_constant_voltage_charging_approaches_full_as_an_exponential():
    """On a straight curve of slope g the current through R dies away with the time constant R / g."""
    straight = {"open_circuit": ((0.0, 3.0), (100.0, 3.6)), "cell_resistance_mohm": 100.0} | LEVEL_RESISTANCE
    own = cell(**straight, **LEAKLESS)
    time_constant_s = 0.100 / (0.6 / own.capacity_c)
    start_c = own.capacity_c * 0.99
    seconds = 600
    course_c = charge_course_c(own, start_c, drive(np.full(seconds, 50.0), duration_s=1.0, limit_a=5.0))
    left_c = (own.capacity_c - start_c) * np.exp(-seconds / time_constant_s)
    implicit_euler = 1.0 / time_constant_s  # relative error of one-second steps over one time constant
    assert own.capacity_c - course_c[-1] == pytest.approx(left_c, rel=implicit_euler)


def test_a_full_cell_takes_nothing():
    own = cell(**LEAKLESS)
    assert charge_course_c(own, own.capacity_c, drive([50.0, 50.0])) == pytest.approx([own.capacity_c] * 3)


def test_the_upper_voltage_is_held_at_the_end_of_every_interval():
    own = cell(cell_max_v=3.45, **LEAKLESS)
    course_c = charge_course_c(own, float(own.charge_at_c(90.0)), drive(np.full(200, 10.0), limit_a=2.5))
    end_v = own.open_circuit_v(course_c[1:]) + np.diff(course_c) / 60 * own.resistance_ohm(course_c[:-1])
    a_microvolt = 1e-6
    assert end_v.max() == pytest.approx(3.45, abs=a_microvolt)
    assert own.open_circuit_v(course_c[-1]) == pytest.approx(3.45, abs=a_microvolt)


def test_an_upper_voltage_above_the_curve_lets_the_cell_fill_to_the_brim():
    own = cell(cell_max_v=3.65, **LEAKLESS)
    course_c = charge_course_c(own, float(own.charge_at_c(98.0)), drive(np.full(10, 8.0), limit_a=2.5))
    assert course_c[-1] == own.capacity_c


def test_no_charge_where_none_is_allowed():
    own = cell(**LEAKLESS)
    assert charge_course_c(own, 5000.0, drive([10.0, 10.0], limit_a=0.0)) == pytest.approx([5000.0] * 3)


def test_an_empty_cell_gives_nothing_and_stays_empty():
    course_c = charge_course_c(cell(), 10.0, drive(np.full(5, -5.0)))
    assert course_c[1:] == pytest.approx(np.zeros(5))


def test_a_load_beyond_the_circuit_takes_its_largest_power():
    own = cell(open_circuit=FLAT_CURVE, cell_resistance_mohm=500.0, **LEVEL_RESISTANCE, **LEAKLESS)
    course_c = charge_course_c(own, 9000.0, drive([-100.0]))
    assert course_c[0] - course_c[1] == pytest.approx(3.3 / (2 * 0.5) * 60, rel=A_MILLIONTH)


def test_self_discharge_alone_loses_its_stated_share_in_a_month():
    own = cell(self_discharge_pct_month=2.0)
    month_s = 365.25 * 86_400 / 12
    course_c = charge_course_c(own, own.capacity_c, drive(np.zeros(1000), duration_s=month_s / 1000))
    assert own.soc_pct(course_c[-1]) == pytest.approx(98.0, rel=A_MILLIONTH)


powers_w = st.lists(st.floats(-30.0, 30.0), min_size=1, max_size=40)


@given(rising_curves(), powers_w, st.floats(0.0, 1.0), st.floats(1.0, 60.0), st.floats(0.5, 10.0))
def test_charge_stays_inside_the_cell(curve, surplus_w, share, duration_s, limit_a):
    own = cell(open_circuit=curve)
    course_c = charge_course_c(own, share * own.capacity_c, drive(surplus_w, duration_s, limit_a))
    assert np.all((course_c >= 0) & (course_c <= own.capacity_c))
    gained_a = np.diff(course_c) / duration_s
    assert np.all(gained_a <= limit_a * (1 + A_MILLIONTH))


@given(rising_curves(), powers_w, st.floats(0.0, 1.0), st.integers(0, 39), st.floats(0.0, 20.0))
def test_more_load_never_leaves_more_charge(curve, surplus_w, share, where, extra_w):
    own = cell(open_circuit=curve)
    start_c, more = share * own.capacity_c, np.array(surplus_w)
    more[where % len(more)] -= extra_w
    less_c = charge_course_c(own, start_c, drive(surplus_w))
    more_c = charge_course_c(own, start_c, drive(more))
    assert np.all(more_c <= less_c + A_MILLICOULOMB)


@given(powers_w, st.floats(0.0, 1.0), st.floats(0.0, 0.3))
def test_more_start_charge_never_ends_lower(surplus_w, share, extra):
    own = cell()
    starts_c = share * own.capacity_c, min(share + extra, 1.0) * own.capacity_c
    low_c, high_c = (charge_course_c(own, start_c, drive(surplus_w)) for start_c in starts_c)
    assert np.all(low_c <= high_c + A_MILLICOULOMB)


@given(st.lists(st.floats(-4.0, 4.0), min_size=1, max_size=60), st.floats(0.4, 0.9), st.floats(0.3, 1.0))
def test_more_capacity_never_breaks_a_floor_in_watt_hours_that_less_held(surplus_w, share, fill):
    """Start and floor in stored energy. Without losses the larger cell follows the smaller one until that is full."""
    losses = {"cell_resistance_mohm": SMALLEST_R_MOHM, "cell_max_v": 3.6} | LEAKLESS
    small, large = (cell(cell_capacity_ah=2.5 * size, **losses) for size in (share, 1.0))
    start_j = fill * small.stored_j[-1]
    courses_j = [
        one.stored_energy_j(charge_course_c(one, float(one.charge_with_energy_c(start_j)), drive(surplus_w)))
        for one in (small, large)
    ]
    a_hundredth_of_a_joule = 0.01
    assert np.all(courses_j[1] >= courses_j[0] - a_hundredth_of_a_joule)


def test_shorter_intervals_change_the_answer_by_less_than_a_hundredth_of_a_per_cent():
    own = cell()
    rng = np.random.default_rng(3)
    surplus_w = rng.uniform(-4, 4, 600)
    ends = [
        charge_course_c(own, 7000.0, drive(np.repeat(surplus_w, cuts), 60.0 / cuts, 1.25))[-1] for cuts in (1, 4, 16)
    ]
    differences_pct = [abs(own.soc_pct(b) - own.soc_pct(a)) for a, b in pairwise(ends)]
    assert differences_pct[0] < 0.01
    assert differences_pct[1] < 0.01

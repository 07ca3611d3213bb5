"""The cell circuit against published points, its own algebra and an integration by a library."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from power_examples import battery, cell, rising_curves
from scipy.integrate import quad

from planner.power.battery import battery_current_a, chemical_power_w, describe_cell

A_MICROJOULE = 1e-6  # quadrature of a curve with bends is good to this
ROUNDING = 1e-9  # relative, a few thousand roundings of a double
ONE_MILLIVOLT = 1e-3  # the published points are given to this


# PyBaMM 26.10, parameter set Prada2013, recorded numbers: state of charge [%] and full-cell open-circuit voltage [V]
@pytest.mark.parametrize(
    ("soc_pct", "volt"),
    [(0, 2.000), (5, 2.785), (20, 3.169), (50, 3.266), (80, 3.310), (95, 3.3164), (98.5, 3.3743), (100, 3.6)],
)
def test_the_built_in_curve_holds_the_recorded_points(soc_pct, volt):
    lifepo4 = cell()
    assert lifepo4.open_circuit_v(lifepo4.charge_at_c(soc_pct)) == pytest.approx(volt, abs=ONE_MILLIVOLT / 2)


def test_the_plateau_is_as_flat_as_recorded():
    """PyBaMM's Prada2013: between 40 and 95 % the curve moves 64 mV, so voltage does not tell the charge."""
    lifepo4 = cell()
    rise_v = np.diff(lifepo4.open_circuit_v(lifepo4.charge_at_c([40.0, 95.0])))[0]
    assert rise_v == pytest.approx(0.064, abs=ONE_MILLIVOLT)


@pytest.mark.parametrize(("chemistry", "low_v", "high_v"), [("LiFePO4", 2.0, 3.6), ("Li-ion", 3.0, 4.2)])
def test_the_curves_end_at_the_window_of_their_chemistry(chemistry, low_v, high_v):
    """Common practice, no source; the Li-ion curve as a whole is from memory."""
    curve = cell(chemistry=chemistry)
    assert (curve.knot_v[0], curve.knot_v[-1]) == (low_v, high_v)


def test_energy_of_a_full_cell_is_near_capacity_times_nominal_voltage():
    """2.5 Ah at the 3.2 V that makers print on LiFePO4 cells (common practice, no source)."""
    printing = 0.03  # makers round the voltage to a tenth
    assert cell().stored_j[-1] / 3600 == pytest.approx(2.5 * 3.2, rel=printing)


@given(rising_curves(), st.floats(0.0, 100.0))
def test_stored_energy_is_the_integral_of_the_curve(curve, soc_pct):
    own = cell(open_circuit=curve)
    charge_c = float(own.charge_at_c(soc_pct))
    knots = own.charge_c[(own.charge_c > 0) & (own.charge_c < charge_c)]
    integral_j = sum(
        quad(own.open_circuit_v, low, high)[0] for low, high in zip([0, *knots], [*knots, charge_c], strict=True)
    )
    assert float(own.stored_energy_j(charge_c)) == pytest.approx(integral_j, rel=ROUNDING, abs=A_MICROJOULE)


@given(rising_curves(), st.floats(0.0, 1.0))
def test_charge_and_stored_energy_are_each_others_inverse(curve, share):
    own = cell(open_circuit=curve)
    charge_c = share * own.capacity_c
    a_nanocoulomb = 1e-6
    assert float(own.charge_with_energy_c(own.stored_energy_j(charge_c))) == pytest.approx(charge_c, abs=a_nanocoulomb)


def test_a_scalar_gives_what_a_one_element_array_gives():
    own = cell()
    for law in (own.open_circuit_v, own.stored_energy_j, own.charge_with_energy_c, own.resistance_ohm, own.soc_pct):
        assert float(law(5000.0)) == law(np.array([5000.0]))[0]
    assert float(battery_current_a(10.0, 3.3, 0.01)) == battery_current_a(np.array([10.0]), 3.3, 0.01)[0]
    assert float(chemical_power_w(10.0, 3.3, 0.01)) == chemical_power_w(np.array([10.0]), 3.3, 0.01)[0]


def test_health_shrinks_capacity_and_the_curve_with_it():
    aged = describe_cell(battery(), health=0.8)
    assert aged.capacity_c == pytest.approx(0.8 * 2.5 * 3600)
    assert aged.open_circuit_v(aged.charge_at_c(50)) == pytest.approx(3.266, abs=ONE_MILLIVOLT)


def test_resistance_is_the_stated_one_at_25_degrees_and_half_charge():
    own = cell(cell_resistance_mohm=14.0)
    assert own.resistance_ohm(own.charge_at_c(50), 25.0) == pytest.approx(0.014)


def test_cold_and_an_empty_cell_raise_the_resistance():
    own = cell()
    by_temperature = own.resistance_ohm(own.charge_at_c(50), np.array([-20.0, 0.0, 25.0, 40.0]))
    by_charge = own.resistance_ohm(own.charge_at_c(np.array([0.0, 10.0, 50.0])))
    assert np.all(np.diff(by_temperature) < 0)
    assert np.all(np.diff(by_charge) < 0)


@given(
    st.floats(-200, 200),
    st.floats(2.0, 40.0),
    st.floats(0.0, 0.5),
)
def test_the_current_gives_the_power_asked_for_or_none_can(terminal_w, open_circuit_v, resistance_ohm):
    current_a = battery_current_a(terminal_w, open_circuit_v, resistance_ohm)
    largest_w = open_circuit_v**2 / (4 * resistance_ohm) if resistance_ohm else np.inf
    if terminal_w > largest_w * (1 + ROUNDING):
        assert np.isnan(current_a)
    elif terminal_w < largest_w * (1 - ROUNDING):
        a_microwatt = 1e-6
        assert (open_circuit_v - current_a * resistance_ohm) * current_a == pytest.approx(terminal_w, abs=a_microwatt)


def test_at_the_largest_power_half_the_voltage_is_left():
    """The maximum power transfer theorem."""
    current_a = battery_current_a(3.3**2 / (4 * 0.02), 3.3, 0.02)
    assert current_a == pytest.approx(3.3 / (2 * 0.02))
    assert 3.3 - current_a * 0.02 == pytest.approx(3.3 / 2)


def test_without_resistance_current_is_power_over_voltage():
    assert battery_current_a(np.array([33.0, -33.0]), 3.3, 0.0) == pytest.approx([10.0, -10.0])


def test_chemical_power_counts_the_loss_on_both_ways():
    out_w, in_w = chemical_power_w(np.array([10.0, -10.0]), 3.3, 0.02)
    assert out_w > 10.0
    assert -10.0 < in_w < 0.0
    out_a = battery_current_a(10.0, 3.3, 0.02)
    assert out_w - 10.0 == pytest.approx(out_a**2 * 0.02)


def test_chemical_power_of_a_load_beyond_the_circuit_is_infinite():
    assert chemical_power_w(1000.0, 3.3, 0.02) == np.inf

"""Faults in what the user describes are told by key, rule and value; nothing wrong passes silently."""

import pytest
from power_examples import battery
from pydantic import ValidationError

from planner.mission.power import Battery, Load, Panel


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"open_circuit": ()}, "a table needs two rows or more, got 0; leave the key out for the built-in table"),
        ({"open_circuit": ((0.0, 3.0),)}, "a table needs two rows or more, got 1"),
        (
            {"open_circuit": ((0.0, 3.2), (50.0, 3.2), (100.0, 3.4))},
            "cell_v must rise with charge, got [3.2, 3.2, 3.4]",
        ),
        ({"open_circuit": ((0.0, 3.0), (90.0, 3.4))}, "soc_pct must run from 0 to 100, got 0 to 90"),
        ({"open_circuit": ((0.0, 0.0), (100.0, 3.4))}, "the second column must be above 0, got [0.0, 3.4]"),
        ({"resistance_by_temperature": ((20.0, 1.0), (0.0, 2.0))}, "the first column must rise, got [20.0, 0.0]"),
        ({"resistance_by_charge": ()}, "a table needs two rows or more, got 0"),
        ({"cycle_life": ((10.0, 100.0), (20.0, 200.0))}, "cycles must not grow with depth, got [100.0, 200.0]"),
        ({"cycle_life": ((0.0, 200.0), (20.0, 100.0))}, "depth_pct must be above 0, got 0"),
        ({"cell_min_v": 3.6, "cell_max_v": 2.8}, "cell_min_v must be below cell_max_v, got 3.6 and 2.8"),
        ({"cell_max_v": 4.2}, "cell_max_v must be at most 3.65 for LiFePO4 cells, got 4.2"),
        ({"cell_min_v": 1.0}, "cell_min_v must be at least 2 for LiFePO4 cells, got 1"),
        ({"chemistry": "Li-ion", "cell_max_v": 5.2}, "cell_max_v must be at most 4.5 for Li-ion cells, got 5.2"),
        (
            {"open_circuit": ((0.0, 3.0), (100.0, 3.9)), "cell_max_v": 4.2},
            "cell_max_v must be at most 4.1 for LiFePO4 cells and a full cell of open_circuit, got 4.2",
        ),
        ({"charge_min_c": 50.0}, "charge_min_c must be below charge_max_c, got 50.0 and 45.0"),
        ({"health": 1.2}, "less than or equal to 1"),
        ({"cell_capacity_ah": "2.5"}, "valid number"),
        ({"heater_w": 2.0}, "Extra inputs are not permitted"),
    ],
)
def test_a_faulty_battery(changes, told):
    with pytest.raises(ValidationError) as caught:
        battery(**changes)
    assert told in str(caught.value)


@pytest.mark.parametrize(("chemistry", "low_v", "high_v"), [("LiFePO4", 2.8, 3.5), ("Li-ion", 3.0, 4.1)])
def test_the_voltage_window_follows_the_chemistry_unless_it_is_given(chemistry, low_v, high_v):
    """Common practice, no source."""
    plain = {"cells_series": 1, "cells_parallel": 1, "cell_capacity_ah": 2.0, "cell_resistance_mohm": 20.0}
    plain |= {"cell_max_discharge_a": 4.0, "cell_max_charge_a": 1.0, "chemistry": chemistry}
    own = Battery.model_validate(plain)
    assert (own.cell_min_v, own.cell_max_v) == (low_v, high_v)
    assert Battery.model_validate(plain | {"cell_max_v": 3.3}).cell_max_v == 3.3
    assert Battery.model_validate(own.model_dump()) == own


def test_watts_as_text_are_refused():
    with pytest.raises(ValidationError, match="valid number"):
        Load.model_validate({"name": "heater", "power_w": "2 W"})


def test_a_hinge_angle_without_an_axis_is_refused():
    with pytest.raises(ValidationError, match="hinge_axis must be given with hinge_angle_deg, got none and 90 deg"):
        Panel(name="wing", normal=(0.0, 0.0, 1.0), cell_area_m2=0.1, hinge_angle_deg=90.0)

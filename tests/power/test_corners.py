"""What the corners assume."""

import pytest
from power_examples import battery, craft, satellite

from planner.mission.power import Panel, Pessimistic
from planner.power.corners import corner_of

WORSE = Pessimistic(
    health=0.8,
    resistance_factor=2.0,
    battery_colder_k=7.0,
    array_factor=0.9,
    load_factor=1.1,
    transmitter_factor=1.2,
)


def test_nominal_is_the_description_as_it_stands():
    corner = corner_of(satellite(craft(battery(health=0.9), pessimistic=WORSE)), "nominal")
    assert corner.cell.capacity_c == pytest.approx(0.9 * 2.5 * 3600)
    assert (corner.start_soc_pct, corner.battery_colder_k, corner.load_factor) == (90.0, 0.0, 1.0)
    assert corner.panel_factor == (1.0,)


def test_pessimistic_is_worse_in_every_respect():
    ship = craft(
        battery(health=0.9),
        pessimistic=WORSE,
        panel=(Panel(name="top", normal=(0.0, 0.0, 1.0), cell_area_m2=0.1, end_of_life_factor=0.85),),
    )
    corner = corner_of(satellite(ship), "pessimistic")
    nominal = corner_of(satellite(ship), "nominal")
    assert corner.cell.capacity_c == pytest.approx(0.8 * 2.5 * 3600)
    assert corner.cell.knot_ohm == pytest.approx(2.0 * nominal.cell.knot_ohm)
    assert corner.start_soc_pct == 86.0
    assert corner.panel_factor == pytest.approx((0.9 * 0.85,))
    assert (corner.battery_colder_k, corner.load_factor, corner.transmitter_factor) == (7.0, 1.1, 1.2)


def test_a_battery_already_worse_than_the_pessimistic_health_keeps_its_own():
    corner = corner_of(satellite(craft(battery(health=0.7), pessimistic=WORSE)), "pessimistic")
    assert corner.cell.capacity_c == pytest.approx(0.7 * 2.5 * 3600)


def test_the_start_charge_does_not_fall_below_empty():
    assert corner_of(satellite(soc_pct=2.0, soc_error_pct=5.0), "pessimistic").start_soc_pct == 0.0


@pytest.mark.parametrize("corner", ["nominal", "pessimistic"])
def test_the_start_charge_is_not_above_what_the_upper_voltage_allows(corner):
    """3.415 V is the recorded open-circuit voltage at 99 % (PyBaMM 26.10, Prada2013)."""
    ship = craft(battery(cell_max_v=3.415))
    assert corner_of(satellite(ship, soc_pct=100.0, soc_error_pct=0.5), corner).start_soc_pct == pytest.approx(99.0)


def test_panels_stay_new_where_the_corner_says_so():
    ship = craft(pessimistic=Pessimistic(array_end_of_life=False, array_factor=0.97))
    assert corner_of(satellite(ship), "pessimistic").panel_factor == (0.97,)


def test_another_name_is_refused_with_the_names_there_are():
    with pytest.raises(ValueError, match="corner must be one of nominal, pessimistic, got 'hopeful'"):
        corner_of(satellite(), "hopeful")

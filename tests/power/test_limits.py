"""Each limit breaks alone, at its time and by its size."""

from dataclasses import replace

import numpy as np
import pytest
from power_examples import LEAKLESS, battery, craft, policy, run, satellite, session, transmitter, week

from planner.power.corners import corner_of
from planner.power.loads import Draw
from planner.power.series import run_battery


def pack(**changes):
    return craft(battery(cells_series=4, cells_parallel=2, **changes))


def breaches(series, limit, **policy_changes):
    return [breach for breach in series.breaches(policy(**policy_changes)) if breach.limit == limit]


def test_a_quiet_week_breaks_nothing():
    assert run(pack(), week(np.full(10, 5.0), np.full(10, 5.0))).breaches(policy()) == ()


def test_the_floor_tells_when_it_breaks_and_how_deep_it_gets():
    intervals = week([0, 0, 60, 60, 0, 0, 60], [60, 60, 0, 0, 60, 60, 0])
    series = run(pack(cell_max_charge_a=10.0), intervals, 70.0)
    found = breaches(series, "SoC floor", soc_floor_pct=68.0, soc_end_pct=68.0)
    assert [(breach.time_s, breach.value) for breach in found] == [
        (120.0, series.soc_pct[2]),
        (360.0, series.soc_pct[6]),
    ]
    assert (found[0].bound, found[0].unit) == (68.0, "%")


def test_energy_borrowed_from_next_week():
    series = run(pack(), week([0.0], [10.0]), 86.0)
    (found,) = breaches(series, "end-of-span SoC", soc_end_pct=86.0)
    assert (found.time_s, found.value, found.bound) == (60.0, series.soc_pct[-1], 86.0)


def test_cell_voltage_under_load():
    series = run(pack(cell_min_v=3.24), week([0.0, 0.0], [5.0, 80.0]), 70.0)
    (found,) = breaches(series, "cell voltage under load")
    assert found.time_s == 60.0
    assert found.value == series.lowest_cell_v[1] < 3.24


def test_a_peak_alone_can_break_the_cell_voltage():
    intervals = week([0.0], [5.0], draw=Draw(*(np.array([x]) for x in (5.0, 5.0, 5.0, 15.0))))
    assert breaches(run(pack(cell_min_v=3.2), intervals, 70.0), "cell voltage under load")


def test_a_cell_above_its_upper_voltage():
    """No charger brings it there; a start charge of one's own may."""
    ship = pack(cell_max_v=3.4)
    overfull = replace(corner_of(satellite(ship), "nominal"), start_soc_pct=100.0)
    series = run_battery(overfull, ship, week([0.0], [0.0]), ())
    (found,) = breaches(series, "cell voltage")
    assert (found.value, found.bound, found.unit) == (pytest.approx(3.6, abs=1e-3), 3.4, "V")


def test_charging_up_to_the_upper_voltage_is_no_breach():
    series = run(pack(cell_max_v=3.5), week(np.full(120, 40.0), np.full(120, 1.0)), 95.0)
    assert series.cell_v.max() == pytest.approx(3.5, abs=1e-3)
    assert breaches(series, "cell voltage") == []


def test_cell_discharge_current():
    series = run(pack(cell_max_discharge_a=2.0), week([0.0], [80.0]))
    (found,) = breaches(series, "cell discharge current")
    assert (found.value, found.bound, found.unit) == (-series.peak_cell_a[0], 2.0, "A")


def test_bus_trip():
    series = run(pack(bus_trip_a=3.0), week([0.0, 0.0], [10.0, 60.0]))
    (found,) = breaches(series, "bus over-current trip")
    assert (found.time_s, found.value, found.bound) == (60.0, series.peak_bus_a[1], 3.0)


def test_the_array_does_not_hide_a_bus_current():
    assert breaches(run(pack(bus_trip_a=3.0), week([60.0], [60.0])), "bus over-current trip")


@pytest.mark.parametrize(("battery_c", "limit"), [(-3.0, "charging too cold"), (50.0, "charging too hot")])
def test_charging_at_a_forbidden_temperature(battery_c, limit):
    cold = week([20.0, 0.0], [5.0, 5.0], battery_c=np.full(2, battery_c))
    (found,) = breaches(run(pack(charge_inhibit=False), cold, 50.0), limit)
    assert (found.time_s, found.value, found.unit) == (0.0, battery_c, "degC")
    assert breaches(run(pack(), cold, 50.0), limit) == []


def test_brown_out_tells_what_was_asked_and_what_there_was():
    series = run(pack(cell_resistance_mohm=200.0), week([0.0, 0.0], [5.0, 1000.0]), 80.0)
    (found,) = breaches(series, "brown-out")
    assert (found.time_s, found.value, found.unit) == (60.0, 1000.0, "W")
    assert found.bound == pytest.approx(-series.battery_w[1])


def test_longest_transmission():
    ship = craft(transmitter=(transmitter(longest_on_s=600.0),))
    series = run(ship, week([1.0] * 20, [1.0] * 20), sessions=[session(0.0, 600.0), session(700.0, 1301.0)])
    (found,) = breaches(series, "longest transmission")
    assert (found.time_s, found.value, found.bound, found.unit) == (700.0, 601.0, 600.0, "s")


def test_cool_down_before_the_next_warm_up():
    ship = craft(transmitter=(transmitter(cooldown_s=120.0, warmup_s=30.0), transmitter(mode="S")))
    sessions = [session(0, 100), session(150, 160, "S"), session(250, 300), session(449, 500)]
    series = run(ship, week([1.0] * 20, [1.0] * 20), sessions=sessions)
    (found,) = breaches(series, "cool-down")
    assert (found.time_s, found.value, found.bound, found.unit) == (449, 119.0, 120.0, "s")


def test_depth_of_discharge_of_each_cycle():
    intervals = week([0] * 10 + [200] * 40, [100] * 10 + [0] * 40)
    own = pack(max_cycle_depth_pct=10.0, cell_max_charge_a=10.0, **LEAKLESS)
    series = run(own, intervals, 90.0)
    found = breaches(series, "depth of discharge")
    assert found
    assert found[0].value == pytest.approx(series.soc_pct[0] - series.soc_pct.min())
    assert (found[0].time_s, found[0].bound) == (0.0, 10.0)


def test_breaches_come_in_order_of_time():
    series = run(pack(bus_trip_a=3.0), week([0.0] * 60, [60.0] * 60), 70.0)
    times_s = [breach.time_s for breach in series.breaches(policy())]
    assert len(times_s) >= 3
    assert times_s == sorted(times_s)


def test_breaches_that_harm_a_lithium_cell_carry_a_caution():
    cold = week([20.0], [5.0], battery_c=np.full(1, -3.0))
    (found,) = breaches(run(pack(charge_inhibit=False), cold, 50.0), "charging too cold")
    assert "cell maker's data sheet" in found.caution
    (floor,) = breaches(run(pack(), week([0.0], [10.0]), 60.0), "SoC floor")
    assert floor.caution == ""

"""Loads: when they draw, what the bus gives for it, and what the over-current trip sees."""

from datetime import UTC, datetime
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from power_examples import craft, transmitter

from planner.mission.pointing import Pointing
from planner.mission.power import Load
from planner.power.loads import load_draw, on_share, session_draw, steady_draw

MIDDLE_S = np.array([10.0, 30.0, 50.0, 70.0])
SUN = np.array([1.0, 0.5, 0.0, 0.0])
BATTERY_C = np.array([12.0, 9.0, 7.0, 6.0])
WINDOW = (datetime(2026, 12, 7, 10, tzinfo=UTC), datetime(2026, 12, 7, 11, tzinfo=UTC))


def load(**changes) -> Load:
    return Load.model_validate({"name": "thing", "power_w": 4.0, "converter_efficiency": 0.8} | changes)


@pytest.mark.parametrize(
    ("changes", "share"),
    [
        ({}, [1, 1, 1, 1]),
        ({"when": "sunlit"}, [1, 0.5, 0, 0]),
        ({"when": "eclipse"}, [0, 0.5, 1, 1]),
        ({"when": "eclipse", "on_below_c": 8.0}, [0, 0, 1, 1]),
        ({"on_below_c": 8.0}, [0, 0, 1, 1]),
        ({"when": "windows", "windows": (WINDOW,)}, [0, 1, 1, 0]),
    ],
)
def test_when_a_load_draws(changes, share):
    assert on_share(load(**changes), MIDDLE_S, SUN, BATTERY_C, ((20.0, 60.0),)) == pytest.approx(share)


def test_the_bus_gives_more_than_the_load_gets():
    draw = load_draw(load(), np.ones(2), factor=1.0)
    assert draw.delivered_w == pytest.approx([4.0, 4.0])
    assert draw.bus_w == pytest.approx([5.0, 5.0])


def test_a_duty_cycle_averages_the_energy_but_not_the_peak():
    draw = load_draw(load(duty=0.25), np.array([1.0, 0.0]), factor=1.0)
    assert draw.bus_w == pytest.approx([1.25, 0.0])
    assert draw.peak_w == pytest.approx([5.0, 0.0])


def test_in_penumbra_the_peak_is_the_full_power():
    assert load_draw(load(), np.array([0.5]), factor=1.0).peak_w == pytest.approx([5.0])


def test_a_stated_peak_current_replaces_the_power_as_peak():
    draw = load_draw(load(peak_current_a=2.0), np.array([1.0, 0.0]), factor=1.0)
    assert draw.peak_a == pytest.approx([2.0, 0.0])
    assert draw.peak_w == pytest.approx([0.0, 0.0])


def test_the_corner_factor_raises_the_power():
    assert load_draw(load(), np.ones(1), factor=1.05).bus_w == pytest.approx([5.25])


@given(st.lists(st.floats(0, 1), min_size=1, max_size=20), st.floats(0, 100))
def test_a_sunlit_and_an_eclipse_load_of_one_power_are_one_steady_load(sun, power_w):
    sun = np.array(sun)
    pair = tuple(load(power_w=power_w, when=when) for when in ("sunlit", "eclipse"))
    total = steady_draw(pair, np.arange(len(sun)) + 0.5, sun, np.zeros(len(sun)), ((), ()), 1.0)
    a_nanowatt = 1e-9
    assert total.bus_w == pytest.approx(np.full(len(sun), power_w / 0.8), abs=a_nanowatt)


def test_a_session_draws_by_phase():
    radio = transmitter(dc_power_w=15.0, warmup_power_w=6.0, cooldown_power_w=1.0, converter_efficiency=0.95)
    ship = craft(transmitter=(radio,), pointing=Pointing(slew_power_w=2.0))
    phases = SimpleNamespace(
        warming=np.array([False, True, False, False]),
        transmitting=np.array([False, False, True, False]),
        cooling=np.array([False, False, False, True]),
        slewing=np.array([True, True, False, False]),
    )
    draw = session_draw(ship, radio, phases, load_factor=1.0, transmitter_factor=1.0)
    assert draw.bus_w == pytest.approx([2.0, 2.0 + 6.0 / 0.95, 15.0 / 0.95, 1.0 / 0.95])
    draw = session_draw(ship, radio, phases, load_factor=1.1, transmitter_factor=1.2)
    assert draw.bus_w == pytest.approx([2.2, 2.2 + 7.2 / 0.95, 18.0 / 0.95, 1.2 / 0.95])


def test_worked_case_of_a_ten_minute_transmission():
    """Computed: 15 W for 10 min through 0.95 is 2.63 Wh, 8.8 % of a 30 Wh pack."""
    radio = transmitter(dc_power_w=15.0, converter_efficiency=0.95)
    nothing = np.array([False])
    phases = SimpleNamespace(warming=nothing, transmitting=~nothing, cooling=nothing, slewing=nothing)
    energy_wh = session_draw(craft(), radio, phases, 1.0, 1.0).bus_w[0] * 10 / 60
    the_last_digit_printed = 0.005
    assert energy_wh == pytest.approx(2.63, abs=the_last_digit_printed)
    assert energy_wh / 30 * 100 == pytest.approx(8.8, abs=0.05)

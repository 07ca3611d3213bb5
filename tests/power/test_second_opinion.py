"""A day simulated again from the description alone: second by second, its own geometry, its own circuit.

Shared with the planner are only the satellite's and the Sun's positions. Shadow here is a cylinder, the body axes are
written out for looking down and for following the station, and the charge steps forward by explicit Euler.
"""

from math import sqrt

import numpy as np
import pytest
from power_examples import START, battery, craft, mission, power_of, transmitter

from planner.mission.contacts import Session
from planner.mission.pointing import Law, Pointing
from planner.mission.power import ArrayConversion, Load, Panel
from planner.power.chemistry import LIFEPO4_OPEN_CIRCUIT
from planner.sky.clock import Clock
from planner.sky.sun import sun_position_km
from planner.sky.track import track_satellite

A_QUARTER_PER_CENT = 0.25  # of charge: eight seconds of penumbra at each edge, and one-second steps
TEN_MILLIVOLT = 0.010
ON_S, OFF_S = 16_000.0, 16_480.0
STATION_KM = 6378.137 * np.array([np.cos(np.radians(10.0)), np.sin(np.radians(10.0)), 0.0])


def described():
    return mission(
        craft(
            battery(
                cells_series=4,
                cells_parallel=2,
                cell_max_v=3.5,
                resistance_by_temperature=((-50.0, 1.0), (80.0, 1.0)),
                resistance_by_charge=((0.0, 1.0), (100.0, 1.0)),
                self_discharge_pct_month=0.0,
            ),
            transmitter=(transmitter(dc_power_w=17.0, warmup_s=60.0, warmup_power_w=6.0),),
            panel=(
                Panel(name="top", normal=(0.0, 0.0, -1.0), cell_area_m2=0.05, temperature_sunlit_c=60.0),
                Panel(name="side", normal=(0.0, -1.0, 0.0), cell_area_m2=0.02, temperature_sunlit_c=60.0),
            ),
            array=ArrayConversion(converter_efficiency=0.92, tracking_efficiency=0.97),
            load=(Load(name="bus", power_w=5.0), Load(name="camera", power_w=3.0, when="sunlit", duty=0.5)),
            pointing=Pointing(
                idle=Law(law="nadir"),
                session=Law(law="station", second_axis=(0.0, -1.0, 0.0), second_target="sun"),
                slew_rate_deg_s=100.0,
                settle_s=0.0,
            ),
        )
    )


def unit(rows):
    return rows / np.linalg.norm(rows, axis=1, keepdims=True)


def sunlight_and_panels_w(flown, time_s):
    """Sunlit or not, and array power at the bus, at each second."""
    clock = Clock(START, flown.span_s)
    position_km, velocity_km_s = track_satellite(clock, flown.satellites[0]).at(time_s)
    sun_km = sun_position_km(clock, time_s)
    sun = unit(sun_km)
    along_km = np.sum(position_km * sun, axis=1)
    aside_km = np.linalg.norm(position_km - along_km[:, None] * sun, axis=1)
    sunlit = (along_km > 0) | (aside_km > 6378.137)
    spin = np.stack([-position_km[:, 1], position_km[:, 0], np.zeros(len(time_s))], axis=1) * 7.2921150e-5
    talking = ((time_s >= ON_S) & (time_s < OFF_S))[:, None]
    z = unit(np.where(talking, STATION_KM - position_km, -position_km))
    # y is left of the flight, away from the Sun as near as it gets in the session
    flight = unit(velocity_km_s + spin)
    y = unit(np.where(talking, -(sun - np.sum(sun * z, axis=1)[:, None] * z), np.cross(z, flight)))
    efficiency = 0.298 * (1 - 0.0025 * (60 - 28))
    flux = 1361.0 * (149_597_870.7 / np.linalg.norm(sun_km - position_km, axis=1)) ** 2 * sunlit
    seen_m2 = 0.05 * np.maximum(-np.sum(z * sun, axis=1), 0) + 0.02 * np.maximum(-np.sum(y * sun, axis=1), 0)
    return sunlit, seen_m2 * efficiency * flux * 0.97 * 0.92


def walked(array_w, load_w, start_share):
    """Charge [C] and voltage [V] of a cell, second by second."""
    points = np.array(LIFEPO4_OPEN_CIRCUIT)
    full_c = 2.5 * 3600
    fine = np.interp(np.linspace(0, 100, 10_001), *points.T).tolist()
    charge_c, charges, volts = start_share * full_c, [], []
    for array, load in zip((array_w / 8).tolist(), (load_w / 8).tolist(), strict=True):
        emf_v, ohm = fine[int(charge_c / full_c * 10_000)], 0.014
        wanted_w = load - array
        out_a = (emf_v - sqrt(emf_v * emf_v - 4 * ohm * wanted_w)) / (2 * ohm)
        if out_a < 0:
            out_a = -max(min(-out_a, 1.25, (3.5 - emf_v) / ohm), 0.0)
        charges.append(charge_c)
        volts.append(emf_v - out_a * ohm)
        charge_c -= out_a if out_a > 0 else 0.995 * out_a
    return np.array(charges), np.array(volts)


def test_both_agree_on_a_day_with_a_session():
    flown = described()
    time_s = np.arange(0.0, 86_400.0) + 0.5
    sunlit, array_w = sunlight_and_panels_w(flown, time_s)
    load_w = 5.0 / 0.95 + 1.5 / 0.95 * sunlit
    load_w += np.where((time_s >= ON_S) & (time_s < OFF_S), 17.0 / 0.95, 0.0)
    load_w += np.where((time_s >= ON_S - 60) & (time_s < ON_S), 6.0 / 0.95, 0.0)
    charge_c, cell_v = walked(array_w, load_w, 0.90)

    series = power_of(flown).simulate([Session(ON_S, OFF_S, "TEST-1", "Reed Point", "K", "P")], "nominal")
    assert series.soc_at_pct(time_s) == pytest.approx(100 * charge_c / 9000.0, abs=A_QUARTER_PER_CENT)
    during = (time_s > ON_S + 60) & (time_s < OFF_S - 60)
    rows = np.searchsorted(series.time_s, time_s[during], side="right") - 1
    assert series.cell_v[rows] == pytest.approx(cell_v[during], abs=TEN_MILLIVOLT)

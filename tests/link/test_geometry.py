import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from link_examples import make_mission, make_station, make_transmitter

from planner.errors import InputError
from planner.link.geometry import (
    circular_geometry,
    circular_slant_range_km,
    free_space_loss_db,
    mean_radius_km,
    sampled_geometry,
)
from planner.mission.pointing import Law
from planner.mission.transmitter import Isotropic

EARTH_KM = 6378.137
TABLE_ROUNDING_KM = 0.06  # ranges are given with one decimal
P525_ROUNDING_DB = 0.05  # ITU-R P.525 rounds its constant (32.4 for MHz and km) to 0.1 dB
HALF_A_KILOMETRE = 0.5
FLATTENING = 0.05  # at 52 N the ground is 13 km below the round Earth: 2.5 % of the height, more of the range when low
NEW_ELEMENTS_DAYS = 1.0


def craft(**changes):
    return make_mission([make_transmitter(**changes)], [make_station()]).satellites[0]


def geometry(elevation_deg, **changes):
    satellite = craft(**changes)
    mode = satellite.spacecraft.transmitter[0]
    return circular_geometry(satellite, mode, elevation_deg, NEW_ELEMENTS_DAYS)


@pytest.mark.parametrize(("elevation_deg", "range_km"), [(5, 2205.9), (10, 1815.7), (30, 992.9), (90, 550.0)])
def test_slant_ranges_to_550_km(elevation_deg, range_km):
    # computed, spherical Earth, R = 6378.137 km
    computed = circular_slant_range_km(elevation_deg, EARTH_KM + 550, EARTH_KM)
    assert computed == pytest.approx(range_km, abs=TABLE_ROUNDING_KM)


def test_free_space_loss_agrees_with_the_rounded_form_of_p525():
    expected = 32.4 + 20 * np.log10(26_000) + 20 * np.log10(1000)
    assert free_space_loss_db(1000.0, 26e9) == pytest.approx(expected, abs=P525_ROUNDING_DB)


@given(st.floats(1, 1e6), st.floats(1e8, 5e10))
def test_doubling_range_or_frequency_costs_six_decibels(range_km, frequency_hz):
    loss = free_space_loss_db(range_km, frequency_hz)
    assert free_space_loss_db(2 * range_km, frequency_hz) - loss == pytest.approx(20 * np.log10(2))
    assert free_space_loss_db(range_km, 2 * frequency_hz) - loss == pytest.approx(20 * np.log10(2))


def test_the_mean_height_is_keplers():
    # references: circular orbit at 500 km takes 94.616 min (mu = 398600.4418, R = 6378.137 km)
    satellite = craft()
    elements = satellite.elements.model_copy(update={"mean_motion_rev_day": 1440 / 94.616})
    radius_km = mean_radius_km(satellite.model_copy(update={"elements": elements}))
    assert radius_km - EARTH_KM == pytest.approx(500, abs=HALF_A_KILOMETRE)


def test_an_antenna_on_the_station_looks_straight_at_it():
    assert geometry(20.0).off_axis_deg[0] == pytest.approx(0.0, abs=1e-6)


def test_an_antenna_on_nadir_sees_the_station_at_the_nadir_angle():
    # sine rule on a round Earth: sin(nadir angle) = R cos(elevation) / (R + h)
    seen = geometry(20.0, session_law=Law(law="nadir"))
    radius_km = mean_radius_km(craft())
    nadir_deg = np.rad2deg(np.arcsin(EARTH_KM * np.cos(np.deg2rad(20)) / radius_km))
    assert seen.off_axis_deg[0] == pytest.approx(nadir_deg, abs=1e-6)


def test_the_range_rate_is_the_speed_along_the_line_of_sight():
    # straight below there is none; on the horizon v R / (R + h)
    assert geometry(90.0).range_rate_km_s[0] == pytest.approx(0.0, abs=1e-9)
    radius_km = mean_radius_km(craft())
    speed = np.sqrt(398600.4418 / radius_km)
    assert abs(geometry(0.0).range_rate_km_s[0]) == pytest.approx(speed * EARTH_KM / radius_km)


def test_a_pass_and_a_circular_orbit_agree_on_range(day):
    mission, sky = day
    satellite, station = mission.satellites[0], mission.stations[0]
    mode = satellite.spacecraft.transmitter[0]
    own = np.flatnonzero(np.repeat(sky.passes.station, np.diff(sky.samples.offsets)) == station.name)
    seen = sampled_geometry(sky, satellite, mode, station, own, NEW_ELEMENTS_DAYS)
    for k in range(0, len(own), 25):
        flat = circular_geometry(satellite, mode, float(seen.elevation_deg[k]), NEW_ELEMENTS_DAYS)
        assert flat.slant_range_km[0] == pytest.approx(seen.slant_range_km[k], rel=FLATTENING)


def test_a_bore_sight_aside_of_the_laws_axis_keeps_its_angle():
    tilted = geometry(30.0, boresight=(0.0, 1.0, 1.0))
    assert tilted.off_axis_deg[0] == pytest.approx(45.0)


def test_by_the_sun_no_elevation_tells_the_angle():
    with pytest.raises(InputError, match=r"mode 'K' points by the Sun .* give a pass instead of an elevation"):
        geometry(30.0, session_law=Law(law="sun"))
    with pytest.raises(InputError, match="points by the Sun"):
        geometry(30.0, session_law=Law(law="nadir", second_target="sun"), boresight=(1.0, 0.0, 1.0))


def test_a_tumbling_satellite_needs_an_antenna_without_direction():
    tumbling = Law(law="tumbling")
    with pytest.raises(InputError, match="only an antenna of kind \"isotropic\" has a known gain, got 'parabola'"):
        geometry(30.0, session_law=tumbling)
    geometry(30.0, session_law=tumbling, antenna=Isotropic(kind="isotropic"))


def test_older_elements_let_the_dish_point_further_off():
    satellite = craft()
    mode = satellite.spacecraft.transmitter[0]
    day, week = (circular_geometry(satellite, mode, 60.0, age).element_error_deg[0] for age in (1.0, 7.0))
    # 1 + 2 + 0.5 km at one day, seen almost square at about 630 km: a third of a degree
    assert day == pytest.approx(0.3, abs=0.05)
    assert week > 5 * day

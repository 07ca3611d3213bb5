"""Places on the ellipsoid, the horizon's line, and the look from them."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sky_examples import Truth, clock_of, elements_of, sites, station
from skyfield.api import wgs84

from planner.sky.sites import Sites, local_axes, look, mask_deg, rates_deg_s, station_position_km
from planner.sky.track import track_elements

A_MILLIMETRE_KM = 1e-6
LINE = ((10.0, 4.0), (90.0, 20.0), (350.0, 12.0))


@given(sites())
def test_positions_are_skyfields(site):
    theirs = wgs84.latlon(site.latitude_deg, site.longitude_deg, elevation_m=site.altitude_m).itrs_xyz.km
    assert station_position_km(site) == pytest.approx(theirs, abs=A_MILLIMETRE_KM)


@given(sites())
def test_local_axes_are_east_north_and_up(site):
    axes = local_axes(site)
    assert axes @ axes.T == pytest.approx(np.eye(3), abs=1e-12)
    higher = site.model_copy(update={"altitude_m": site.altitude_m + 1000.0})
    assert station_position_km(higher) - station_position_km(site) == pytest.approx(axes[2], abs=A_MILLIMETRE_KM)
    assert axes[0, 2] == 0.0
    assert np.cross(axes[0], axes[1]) == pytest.approx(axes[2], abs=1e-12)


@pytest.mark.parametrize(
    ("azimuth_deg", "expected"),
    [
        (10.0, 4.0),
        (50.0, 12.0),
        (90.0, 20.0),
        (220.0, 16.0),
        (350.0, 12.0),
        (0.0, 8.0),
        (360.0, 8.0),
        (5.0, 6.0),
        (355.0, 10.0),
    ],
)
def test_the_line_is_straight_between_its_points_and_across_north(azimuth_deg, expected):
    assert mask_deg(station(horizon=LINE, min_elevation_deg=0.0), azimuth_deg) == pytest.approx(expected)


def test_the_larger_of_line_and_minimum_elevation_holds():
    assert list(mask_deg(station(horizon=LINE, min_elevation_deg=10.0), np.array([10.0, 90.0]))) == [10.0, 20.0]
    assert list(mask_deg(station(min_elevation_deg=7.0), np.array([10.0, 90.0]))) == [7.0, 7.0]
    assert Sites.of([station(horizon=LINE, min_elevation_deg=0.0), station()]).floor_deg.tolist() == [4.0, 5.0]


def test_one_point_makes_a_level_line():
    assert mask_deg(station(horizon=((77.0, 9.0),)), 200.0) == pytest.approx(9.0)


def test_looks_are_skyfields():
    clock, elements, site = clock_of(1.0), elements_of("low_inclination"), station(-23.0, -67.0, altitude_m=4000.0)
    time_s = np.linspace(0, 86_400, 500)
    states = track_elements(clock, "t", elements).at(time_s)
    view = look(*states, site)
    elevation, azimuth, range_km = Truth(clock, elements, site).altaz(time_s)
    angle = np.degrees(1e-3 / range_km)  # a metre
    assert (np.abs(view.elevation_deg - elevation) < angle + 1e-6).all()
    assert (np.abs((view.azimuth_deg - azimuth + 180) % 360 - 180) * np.cos(np.radians(elevation)) < angle + 1e-6).all()
    assert np.abs(view.range_km - range_km).max() < 1e-3


def test_rates_are_the_slopes_of_what_is_seen():
    site = station()
    track = track_elements(clock_of(1.0), "t", elements_of("marshlight"))
    time_s = np.linspace(100, 86_000, 900)
    before, after = (look(*track.at(time_s + dt), site) for dt in (-0.05, 0.05))
    place = station_position_km(site), local_axes(site)
    azimuth_rate, elevation_rate = rates_deg_s(*track.at(time_s), *place)
    assert elevation_rate == pytest.approx((after.elevation_deg - before.elevation_deg) / 0.1, abs=1e-4)
    turned = ((after.azimuth_deg - before.azimuth_deg + 180) % 360 - 180) / 0.1
    assert azimuth_rate == pytest.approx(turned, rel=1e-3, abs=1e-4)
    assert look(*track.at(time_s), site).range_rate_km_s == pytest.approx(
        (after.range_km - before.range_km) / 0.1, abs=1e-5
    )


@given(st.floats(-90, 90), st.floats(-180, 180))
def test_straight_up_is_at_ninety_degrees(latitude, longitude):
    site = station(latitude, longitude)
    overhead = station_position_km(site) + 500 * local_axes(site)[2]
    view = look(overhead, np.zeros(3), site)
    assert view.elevation_deg == pytest.approx(90.0, abs=1e-5)
    assert view.range_km == pytest.approx(500.0)
    assert view.elevation_deg.shape == ()

"""Element age: the model, the published figures, and what they cost in time, pointing and newest epoch."""

import numpy as np
import pytest
from sky_examples import clock_of, elements_of, station

from planner.mission.models import ElementAging
from planner.sky.aging import (
    FRESH_FROM_THE_STATION,
    in_track_error_km,
    oldest_age_days,
    pointing_error_deg,
    timing_error_s,
)
from planner.sky.sites import station_position_km
from planner.sky.track import track_elements

ORDINARY = ElementAging()
OVERHEAD = np.array([[7378.137, 0.0, 0.0]])
ALONG = np.array([[0.0, 7.35 - 7378.137 * 7.292115e-5, 0.0]])  # 7.35 km/s along y seen from space
BELOW = np.array([6378.137, 0.0, 0.0])


@pytest.mark.parametrize(("age_days", "least_km", "most_km"), [(1.0, 10.0, 30.0), (2.0, 20.0, 70.0)])
def test_cubesats_from_the_station_err_as_published(age_days, least_km, most_km):
    """Riesing, Small Satellite Conference 2015, SSC15-VIII-5: 10-30 km at one day, 20-70 km at two."""
    assert least_km <= in_track_error_km(FRESH_FROM_THE_STATION, age_days) <= most_km


@pytest.mark.parametrize("age_days", [1.0, 2.0])
def test_an_ordinary_orbit_errs_a_kilometre_and_one_to_three_a_day(age_days):
    """Vallado and Kelso, from memory: about 1 km at epoch and 1 to 3 km a day."""
    assert in_track_error_km(ORDINARY, 0.0) == pytest.approx(1.0)
    assert 1 + 1 * age_days <= in_track_error_km(ORDINARY, age_days) <= 1 + 3 * age_days


def test_ten_to_thirty_kilometres_are_one_to_four_seconds():
    """Computed: 10-30 km over the 7.7 km/s of a 400 km orbit is 1.3-3.9 s."""
    for error_km, seconds in ((10.0, 1.3), (30.0, 3.9)):
        aging = ElementAging(in_track_at_epoch_km=error_km, in_track_km_per_day=0.0, in_track_km_per_day2=0.0)
        state = np.array([[6778.0, 0, 0]]), np.array([[0, 7.67 - 6778 * 7.292115e-5, 0]])
        assert timing_error_s(aging, 0.0, *state)[0] == pytest.approx(seconds, abs=0.05)


def test_pointing_error_is_the_error_seen_across_the_line_of_sight():
    five_km = ElementAging(in_track_at_epoch_km=5.0, in_track_km_per_day=0.0, in_track_km_per_day2=0.0)
    # 5 km at 1000 km range is 0.29 deg: a 2.8 m dish's half-power beam at 26 GHz.
    assert pointing_error_deg(five_km, 0.0, OVERHEAD, ALONG, BELOW)[0] == pytest.approx(0.286, abs=0.001)


def test_an_error_along_the_line_of_sight_is_not_seen():
    ahead = np.array([7378.137, -3000.0, 0.0])
    assert pointing_error_deg(ORDINARY, 1.0, OVERHEAD, ALONG, ahead)[0] == pytest.approx(0.0, abs=1e-3)


def test_at_the_oldest_age_the_error_is_half_the_beam():
    states = track_elements(clock_of(1.0), "t", elements_of("marshlight")).at(np.linspace(30_000, 30_600, 61))
    place = station_position_km(station())
    age = oldest_age_days(ORDINARY, 0.29, *states, place)
    assert pointing_error_deg(ORDINARY, age, *states, place).max() == pytest.approx(0.145, rel=1e-6)


def test_a_small_dish_forgives_days_and_a_large_one_at_k_band_does_not():
    """A 0.29 deg beam at 1000 km is 5 km wide: half of it is spent within a day on an ordinary orbit."""
    k_band = oldest_age_days(ORDINARY, 0.29, OVERHEAD, ALONG, BELOW)
    s_band = oldest_age_days(ORDINARY, 3.3, OVERHEAD, ALONG, BELOW)
    assert 0.5 < k_band < 1.0
    assert s_band > 5.0
    assert oldest_age_days(ORDINARY, 0.29, OVERHEAD, ALONG, BELOW, sigmas=2.0) < k_band


def test_ages_without_growth_or_without_hope():
    steady = ElementAging(in_track_at_epoch_km=1.0, in_track_km_per_day=0.0, in_track_km_per_day2=0.0)
    assert oldest_age_days(steady, 0.29, OVERHEAD, ALONG, BELOW) == np.inf
    assert oldest_age_days(FRESH_FROM_THE_STATION, 0.1, OVERHEAD, ALONG, BELOW) == 0.0
    linear = ElementAging(in_track_at_epoch_km=0.0, in_track_km_per_day=1.0, in_track_km_per_day2=0.0)
    assert oldest_age_days(linear, 0.29, OVERHEAD, ALONG, BELOW) == pytest.approx(1000 * np.tan(np.radians(0.145)))


def test_arrays_of_ages():
    ages = np.array([0.0, 1.0, 2.0])
    assert list(in_track_error_km(ORDINARY, ages)) == [in_track_error_km(ORDINARY, age) for age in ages]

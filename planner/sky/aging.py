"""What the age of an element set costs: timing, pointing, and how new a set must be."""

import numpy as np

from planner.mission.models import ElementAging
from planner.sky.frames import inertial_velocity_km_s
from planner.units import dot

# CubeSats in their first weeks after leaving the ISS: inside the bands of Riesing, SSC15-VIII-5 (2015).
FRESH_FROM_THE_STATION = ElementAging(in_track_at_epoch_km=4.0, in_track_km_per_day=10.0, in_track_km_per_day2=4.0)


def in_track_error_km(aging: ElementAging, age_days):
    """One-sigma in-track error of a set of that age, shape of `age_days` [km].

    A polynomial of the age with settable coefficients: the error at epoch, a rate error's linear growth, and the
    quadratic growth of a drag error. The defaults are those of an ordinary low orbit (about 1 km at epoch and 1 to
    3 km a day: Vallado and Kelso, from memory). CubeSats fresh from the ISS do worse, 10 to 30 km at one day and 20 to
    70 km at two (Riesing, SSC15-VIII-5, 2015): FRESH_FROM_THE_STATION.
    """
    age = np.asarray(age_days, dtype=float)
    return aging.in_track_at_epoch_km + aging.in_track_km_per_day * age + aging.in_track_km_per_day2 * age**2


def timing_error_s(aging: ElementAging, age_days, position_km, velocity_km_s):
    """One-sigma error of AOS and LOS: the in-track error over the orbital speed at states (n, 3), (n,) [s]."""
    velocity = inertial_velocity_km_s(position_km, velocity_km_s)
    return in_track_error_km(aging, age_days) / np.sqrt(dot(velocity, velocity))


def pointing_error_deg(aging: ElementAging, age_days, position_km, velocity_km_s, station_km):
    """One-sigma angle by which the ground antenna misses the satellite, (n,) [deg].

    The in-track error seen across the line of sight from `station_km` (3,) or (n, 3) to states (n, 3).
    """
    return _angle_deg(in_track_error_km(aging, age_days), *_across(position_km, velocity_km_s, station_km))


def _across(position_km, velocity_km_s, station_km):
    """Range [km], and sine and cosine of the angle between line of sight and orbital velocity."""
    velocity = inertial_velocity_km_s(position_km, velocity_km_s)
    away_km = position_km - station_km
    range_km = np.sqrt(dot(away_km, away_km))
    cosine = dot(away_km, velocity) / range_km / np.sqrt(dot(velocity, velocity))
    return range_km, np.sqrt(np.maximum(1 - cosine**2, 0.0)), cosine


def _angle_deg(error_km, range_km, sine, cosine):
    return np.degrees(np.arctan2(error_km * sine, range_km - error_km * np.abs(cosine)))


def oldest_age_days(aging: ElementAging, half_power_beam_deg, position_km, velocity_km_s, station_km, sigmas=1.0):
    """Greatest age at which the satellite stays inside the ground antenna's half-power beam at every state.

    `sigmas` standard deviations of in-track error are allowed for. 0 when even a set of no age fails, inf when the
    error does not grow. States (n, 3); returns a float [days].
    """
    range_km, sine, cosine = _across(position_km, velocity_km_s, station_km)
    tangent = np.tan(np.radians(half_power_beam_deg / 2))
    # error x sine = tangent x (range - error x |cosine|)
    most_km = np.min(tangent * range_km / (sine + tangent * np.abs(cosine))) / sigmas
    a, b, c = aging.in_track_km_per_day2, aging.in_track_km_per_day, aging.in_track_at_epoch_km - most_km
    if c >= 0:
        return 0.0
    if a == 0:
        return float(-c / b) if b else np.inf
    return float((-b + np.sqrt(b * b - 4 * a * c)) / (2 * a))

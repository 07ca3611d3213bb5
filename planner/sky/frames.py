"""Between axes that turn with the Earth and axes that do not."""

from functools import lru_cache

import numpy as np

from planner.sky.clock import Clock, timescale
from planner.units import DAY_S, EARTH_GM_KM3_S2, EARTH_RATE_RAD_S, dot

# The celestial pole's motion within six hours is smooth to a hundredth of a milliarcsecond.
POLE_SAMPLE_S = DAY_S / 4
BEYOND_SPAN_S = 3 * DAY_S  # tracks reach nearly as far


def turn(vector, angle_rad):
    """`vector` (..., 3) seen from axes that are turned about z by `angle_rad` (...)."""
    c, s = np.cos(angle_rad), np.sin(angle_rad)
    x, y, z = vector[..., 0], vector[..., 1], vector[..., 2]
    return np.stack([c * x + s * y, c * y - s * x, z], axis=-1)


def fixed_from_teme(clock: Clock, time_s, position_km, velocity_km_s):
    """TEME position and velocity (n, 3) turned into the Earth-fixed frame, velocity relative to the turning Earth."""
    angle_rad, rate_rad_s = clock.earth_angle_rad(time_s)
    position_km, velocity_km_s = turn(np.stack([position_km, velocity_km_s]), angle_rad)
    velocity_km_s[..., 0] += rate_rad_s * position_km[..., 1]
    velocity_km_s[..., 1] -= rate_rad_s * position_km[..., 0]
    return position_km, velocity_km_s


def fixed_position_km(clock: Clock, time_s, position_km, frame: str):
    """Positions (n, 3) in TEME, ITRF, EME2000 or GCRF in the Earth-fixed frame."""
    if frame == "ITRF":
        return position_km
    if frame == "EME2000":
        from skyfield.framelib import ICRS_to_J2000

        position_km = position_km @ ICRS_to_J2000  # the transpose, from J2000 to ICRS, acting on rows
    if frame in ("EME2000", "GCRF"):
        position_km = np.einsum("nij,nj->ni", _pole_spline(clock)(time_s), position_km)
    return turn(position_km, clock.earth_angle_rad(time_s)[0])


@lru_cache(maxsize=8)
def _pole_spline(clock: Clock):
    """Rotation from GCRF to axes that the angle of GMST 1982 turns into the Earth-fixed ones, by skyfield."""
    from scipy.interpolate import CubicSpline
    from skyfield.framelib import itrs

    time_s = np.arange(-BEYOND_SPAN_S, clock.span_s + BEYOND_SPAN_S + POLE_SAMPLE_S, POLE_SAMPLE_S)
    rotation = np.moveaxis(itrs.rotation_at(moments(clock, time_s)), -1, 0)
    columns = np.swapaxes(rotation, 1, 2)  # so that each row is an image to turn back
    unturned = turn(columns, -clock.earth_angle_rad(time_s)[0][:, None])
    return CubicSpline(time_s, np.swapaxes(unturned, 1, 2))


def moments(clock: Clock, time_s):
    """Skyfield's Time of seconds after start."""
    start = clock.start
    second = start.second + start.microsecond / 1e6 + np.asarray(time_s)
    return timescale().utc(start.year, start.month, start.day, start.hour, start.minute, second)


def inertial_velocity_km_s(position_km, velocity_km_s):
    """The velocity seen from space, in Earth-fixed axes (..., 3): the Earth's turning is added."""
    x, y = position_km[..., 0], position_km[..., 1]
    carried = np.stack([-EARTH_RATE_RAD_S * y, EARTH_RATE_RAD_S * x, np.zeros_like(x)], axis=-1)
    return velocity_km_s + carried


def acceleration_km_s2(position_km, velocity_km_s):
    """Acceleration relative to the turning Earth (..., 3): central gravity, Coriolis and centrifugal terms.

    The Earth's flattening is neglected: 1e-3 of the central term in low orbit.
    """
    w = EARTH_RATE_RAD_S
    radius_km = np.sqrt(dot(position_km, position_km))[..., None]
    x, y, vx, vy = position_km[..., 0], position_km[..., 1], velocity_km_s[..., 0], velocity_km_s[..., 1]
    turning = np.stack([2 * w * vy + w * w * x, w * w * y - 2 * w * vx, np.zeros_like(x)], axis=-1)
    return turning - EARTH_GM_KM3_S2 * position_km / radius_km**3

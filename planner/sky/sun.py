"""The Sun: where it is, how much of its disc the satellite sees, and when that changes."""

import warnings
from functools import lru_cache

import numpy as np

from planner.sky.clock import Clock
from planner.sky.frames import BEYOND_SPAN_S, inertial_velocity_km_s, moments, turn
from planner.sky.roots import crossings
from planner.sky.track import place
from planner.units import DAY_S, EARTH_FLATTENING, EARTH_RADIUS_KM, SUN_RADIUS_KM, dot, unit_vector

SAMPLE_S = DAY_S / 4  # a spline through these is within 0.001 arc seconds of the ephemeris
TABLE_S = DAY_S / 48  # straight lines between these in longitude: within 0.001 arc seconds again


@lru_cache(maxsize=1)
def _ephemeris():
    from skyfield.api import Loader
    from skyfield_data import get_skyfield_data_path

    with warnings.catch_warnings():
        # The Earth-orientation file beside the ephemeris has expired; it is not read here.
        warnings.filterwarnings("ignore", message="The file finals2000A.all has expired", category=RuntimeWarning)
        return Loader(get_skyfield_data_path(), verbose=False)("de421.bsp")


@lru_cache(maxsize=8)
def _sun_table(clock: Clock):
    """Moments (n,) and, in columns, the Sun's Earth-fixed longitude [rad], distance from the axis and z [km].

    Apparent geocentric Sun of DE421 with light time and aberration, by skyfield. The longitude runs on without jumps.
    """
    from scipy.interpolate import CubicSpline
    from skyfield.framelib import itrs

    time_s = np.arange(-BEYOND_SPAN_S, clock.span_s + BEYOND_SPAN_S + SAMPLE_S, SAMPLE_S)
    ephemeris = _ephemeris()
    fixed_km = ephemeris["earth"].at(moments(clock, time_s)).observe(ephemeris["sun"]).apparent().frame_xyz(itrs).km.T
    # smooth only in axes that do not turn with the Earth
    unturned = CubicSpline(time_s, turn(fixed_km, -clock.earth_angle_rad(time_s)[0]))
    time_s = np.arange(time_s[0], time_s[-1], TABLE_S)
    x, y, z = turn(unturned(time_s), clock.earth_angle_rad(time_s)[0]).T
    return time_s, np.unwrap(np.arctan2(y, x)), np.hypot(x, y), z


def sun_position_km(clock: Clock, time_s):
    """Apparent geocentric position of the Sun, Earth-fixed, (..., 3) [km] for moments (...) [s after start]."""
    at_s, longitude, across, along = _sun_table(clock)
    longitude_rad, across_km, z_km = (np.interp(time_s, at_s, column) for column in (longitude, across, along))
    return np.stack([across_km * np.cos(longitude_rad), across_km * np.sin(longitude_rad), z_km], axis=-1)


# The polar axis is stretched so that the oblate Earth becomes a sphere: sight lines and tangents stay so.
STRETCH = np.array([1.0, 1.0, 1 / (1 - EARTH_FLATTENING)])

A_MILLIMETRE_KM = np.array([3e-7, 5e-7, 8e-7])  # keeps a direction across the line through Sun and Earth, on that line


def _lines_of_sight(position_km, sun_km, sides):
    """Stretched place (..., 3), and unit vectors to points of the Sun's disc, on a line through the Earth's centre.

    Side -1 is the Sun's edge nearest the Earth, 0 its centre, +1 the edge farthest from it.
    """
    to_sun_km = sun_km - position_km
    to_sun = to_sun_km / _length(to_sun_km)
    aside = position_km + A_MILLIMETRE_KM
    outwards = aside - dot(aside, to_sun)[..., None] * to_sun
    outwards = outwards * (SUN_RADIUS_KM / _length(outwards))
    lines = [(to_sun_km + side * outwards) * STRETCH for side in sides]
    return position_km * STRETCH, [line / _length(line) for line in lines]


def _length(vector):
    return np.sqrt(dot(vector, vector))[..., None]


def _height_km(here, line):
    """Height over the sphere of a line of sight from `here`, where it comes nearest, (...)."""
    ahead_km = np.minimum(dot(here, line), 0.0)
    return np.sqrt(dot(here, here) - ahead_km**2) - EARTH_RADIUS_KM


def visible_sun_fraction(position_km, sun_km):
    """Share of the Sun's disc that the oblate Earth leaves visible, (...) from 0 (umbra) to 1 (sunlight).

    Cones over the ellipsoid, so the penumbra is included; the disc is uniform (no limb darkening), air is neglected.
    For satellites nearer than the umbra's tip at 1.38 million km, where the Earth covers the whole Sun.
    """
    position_km, sun_km = np.broadcast_arrays(position_km, sun_km)
    here, (near, far) = _lines_of_sight(position_km, sun_km, (-1.0, 1.0))
    near_km, far_km = _height_km(here, near), _height_km(here, far)
    fraction = np.asarray(near_km >= 0, dtype=float)
    partly = (near_km < 0) & (far_km > 0)
    fraction[partly] = _share_above_the_limb(here[partly], near[partly], far[partly])
    return fraction[()]


def _share_above_the_limb(here, near, far):
    """Share of the disc between `near` and `far`, (m, 3) each, that a sphere leaves visible, (m,).

    The overlap of two circles of plane geometry, the Earth's limb with the curvature it has on the sky's sphere.
    """
    radius_km = _length(here)[..., 0]
    earth_rad = np.arcsin(EARTH_RADIUS_KM / radius_km)
    near_rad, far_rad = (np.arccos(np.clip(-dot(here, line) / radius_km, -1, 1)) - earth_rad for line in (near, far))
    sun_rad, limb_rad = (far_rad - near_rad) / 2, np.tan(earth_rad)
    distance = limb_rad + (far_rad + near_rad) / 2
    # half the chord's angles at the Sun's and at the Earth's centre
    a = np.arccos((distance**2 + sun_rad**2 - limb_rad**2) / (2 * distance * sun_rad))
    b = np.arccos((distance**2 + limb_rad**2 - sun_rad**2) / (2 * distance * limb_rad))
    covered = sun_rad**2 * (a - np.sin(2 * a) / 2) + limb_rad**2 * (b - np.sin(2 * b) / 2)
    return np.clip(1 - covered / (np.pi * sun_rad**2), 0.0, 1.0)


def eclipse_edges_s(track, clock: Clock, within=True):
    """Moments inside the track at which the visible fraction leaves or reaches 0 or 1, sorted (n,) [s after start].

    These are the moments at which the Sun's near or far edge stands on the Earth's limb. `within`, a bool for each
    interval of the track's grid, limits the search.
    """
    near = np.flatnonzero(within & _near_the_shadow(track, sun_position_km(clock, track.time_s)))
    interval, side = np.tile(near, 2), np.repeat([-1.0, 1.0], len(near))
    quintics, begin_s = track.quintics[..., interval], track.time_s[interval]

    def height_km(time_s, k):
        position_km = place(quintics[..., k], time_s - begin_s[k]).T
        here, (edge,) = _lines_of_sight(position_km, sun_position_km(clock, time_s), [side[k][:, None]])
        return _height_km(here, edge)

    return np.sort(crossings(height_km, begin_s, track.time_s[interval + 1])[1])


def _near_the_shadow(track, sun_km):
    """Grid intervals that may hold the edge of umbra or penumbra, (n - 1,) bool.

    A cylinder of the Earth's radius, and a belt around it as wide as flattening, cones and the bend of a step ask for.
    """
    to_sun = sun_km / _length(sun_km)
    behind_km = -dot(track.position_km, to_sun)
    square_km2 = dot(track.position_km, track.position_km)
    gap_km = np.sqrt(np.maximum(square_km2 - behind_km**2, 0.0)) - EARTH_RADIUS_KM
    gap_km = np.where(behind_km > -track.bulge_km, gap_km, np.inf)
    belt_km = 30.0 + 0.005 * np.maximum(behind_km, 0.0) + track.bulge_km
    inside, outside = gap_km < -belt_km, gap_km > belt_km
    return ~((inside[:-1] & inside[1:]) | (outside[:-1] & outside[1:]))


def beta_deg(position_km, velocity_km_s, sun_km):
    """Angle between the orbit's plane and the Sun, (...) [deg], positive on the side of the orbit's normal."""
    normal = unit_vector(np.cross(position_km, inertial_velocity_km_s(position_km, velocity_km_s)))
    return np.degrees(np.arcsin(np.clip(dot(normal, unit_vector(sun_km)), -1, 1)))

"""The Sun: where it is, how much of its disc the satellite sees, and when that changes."""

import warnings
from functools import lru_cache

import numpy as np

from planner.sky.clock import Clock
from planner.sky.frames import inertial_velocity_km_s, moments, turn
from planner.sky.roots import crossings
from planner.sky.track import evaluate
from planner.units import DAY_S, EARTH_FLATTENING, EARTH_RADIUS_KM, SUN_RADIUS_KM, dot, unit_vector

SAMPLE_S = DAY_S / 4  # a spline through these is within 0.001 arc seconds of the ephemeris


@lru_cache(maxsize=1)
def _ephemeris():
    from skyfield.api import Loader
    from skyfield_data import get_skyfield_data_path

    with warnings.catch_warnings():
        # The Earth-orientation file beside the ephemeris has expired; it is not read here.
        warnings.filterwarnings("ignore", message="The file finals2000A.all has expired", category=RuntimeWarning)
        return Loader(get_skyfield_data_path(), verbose=False)("de421.bsp")


@lru_cache(maxsize=8)
def _sun_spline(clock: Clock):
    """Apparent geocentric Sun [km] in axes that do not turn with the Earth (mean equinox of date, GMST 1982)."""
    from scipy.interpolate import CubicSpline
    from skyfield.framelib import itrs

    # a day and a half beyond the span: tracks reach there too
    time_s = np.arange(-1.5 * DAY_S, clock.span_s + 1.5 * DAY_S + SAMPLE_S, SAMPLE_S)
    ephemeris = _ephemeris()
    fixed_km = ephemeris["earth"].at(moments(clock, time_s)).observe(ephemeris["sun"]).apparent().frame_xyz(itrs).km.T
    return CubicSpline(time_s, turn(fixed_km, -clock.earth_angle_rad(time_s)[0]))


def sun_position_km(clock: Clock, time_s):
    """Apparent geocentric position of the Sun, Earth-fixed, (..., 3) [km] for moments (...) [s after start].

    DE421 with light time and aberration through skyfield, sampled every six hours and splined between.
    """
    return turn(_sun_spline(clock)(time_s), clock.earth_angle_rad(time_s)[0])


def _shadow_angles_rad(position_km, sun_km):
    """Sun's centre from Earth's limb, and the Sun's half-width towards it, as the satellite sees them.

    The polar axis is stretched so that the oblate Earth becomes a sphere: sight lines stay straight and tangents stay
    tangents, so both angles' signs and ratio are those of cones over the ellipsoid.
    """
    stretch = np.array([1.0, 1.0, 1 / (1 - EARTH_FLATTENING)])
    place = position_km * stretch
    to_sun_km = sun_km - position_km
    towards_earth = -unit_vector(position_km)
    sun_hat = unit_vector(to_sun_km)
    across = unit_vector(towards_earth - dot(towards_earth, sun_hat)[..., None] * sun_hat)
    centre = unit_vector(to_sun_km * stretch)
    limb = unit_vector((to_sun_km + SUN_RADIUS_KM * across) * stretch)
    radius_km = np.sqrt(dot(place, place))
    earth_rad = np.arcsin(np.minimum(EARTH_RADIUS_KM / radius_km, 1.0))
    separation_rad = np.arccos(np.clip(-dot(place, centre) / radius_km, -1, 1))
    half_width_rad = 2 * np.arcsin(np.sqrt(dot(limb - centre, limb - centre)) / 2)
    return separation_rad - earth_rad, half_width_rad, earth_rad


def visible_sun_fraction(position_km, sun_km):
    """Share of the Sun's disc that the oblate Earth leaves visible, (...) from 0 (umbra) to 1 (sunlight).

    Cones over the ellipsoid, so the penumbra is included; the disc is uniform (no limb darkening), air is neglected.
    The overlap of two circles is that of plane geometry with the Earth's limb given its curvature on the sphere.
    """
    above_rad, sun_rad, earth_rad = _shadow_angles_rad(position_km, sun_km)
    limb_rad = np.tan(np.minimum(earth_rad, np.pi / 2 - 1e-6))
    distance = np.clip(limb_rad + above_rad, np.abs(limb_rad - sun_rad), limb_rad + sun_rad)
    # half the chord's angles at the Sun's and at the Earth's centre
    x = (distance**2 + sun_rad**2 - limb_rad**2) / (2 * distance * sun_rad)
    y = (distance**2 + limb_rad**2 - sun_rad**2) / (2 * distance * limb_rad)
    a, b = np.arccos(np.clip(x, -1, 1)), np.arccos(np.clip(y, -1, 1))
    covered = sun_rad**2 * (a - np.sin(2 * a) / 2) + limb_rad**2 * (b - np.sin(2 * b) / 2)
    return np.clip(1 - covered / (np.pi * sun_rad**2), 0.0, 1.0)


def eclipse_edges_s(track, clock: Clock):
    """Moments inside the track at which the visible fraction leaves or reaches 0 or 1, sorted (n,) [s after start].

    These are the moments at which the Sun's upper or lower edge stands on the Earth's limb.
    """
    near = np.flatnonzero(_near_the_shadow(track, sun_position_km(clock, track.time_s)))
    interval, side = np.tile(near, 2), np.repeat([-1.0, 1.0], len(near))
    cubics, begin_s = track.cubics[interval], track.time_s[interval]

    def height_rad(time_s, k):
        position_km, _ = evaluate(cubics[k], time_s - begin_s[k])
        above_rad, sun_rad, _ = _shadow_angles_rad(position_km, sun_position_km(clock, time_s))
        return above_rad + side[k] * sun_rad

    return np.sort(crossings(height_rad, begin_s, track.time_s[interval + 1])[1])


def _near_the_shadow(track, sun_km):
    """Grid intervals that may hold the edge of umbra or penumbra, (n - 1,) bool.

    A cylinder of the Earth's radius, and a belt around it as wide as flattening, cones and a step's bend ask for.
    """
    to_sun = unit_vector(sun_km)
    behind_km = -dot(track.position_km, to_sun)
    square_km2 = dot(track.position_km, track.position_km)
    gap_km = np.sqrt(np.maximum(square_km2 - behind_km**2, 0.0)) - EARTH_RADIUS_KM
    gap_km = np.where(behind_km > 0, gap_km, np.inf)
    belt_km = 50.0 + 0.01 * np.maximum(behind_km, 0.0)
    inside, outside = gap_km < -belt_km, gap_km > belt_km
    return ~((inside[:-1] & inside[1:]) | (outside[:-1] & outside[1:]))


def beta_deg(position_km, velocity_km_s, sun_km):
    """Angle between the orbit's plane and the Sun, (...) [deg], positive on the side of the orbit's normal."""
    normal = unit_vector(np.cross(position_km, inertial_velocity_km_s(position_km, velocity_km_s)))
    return np.degrees(np.arcsin(np.clip(dot(normal, unit_vector(sun_km)), -1, 1)))

"""What the link has to know of where things are: one sample of a pass, or a whole week of them."""

from dataclasses import dataclass

import numpy as np

from planner.errors import InputError
from planner.mission.models import Satellite
from planner.mission.pointing import Law
from planner.mission.station import Station
from planner.mission.transmitter import Isotropic, Transmitter
from planner.sky import Sky
from planner.sky.aging import pointing_error_deg
from planner.sky.attitude import body_axes, off_axis_deg
from planner.sky.sites import station_position_km
from planner.sky.sun import sun_position_km
from planner.units import C_M_S, DAY_S, EARTH_GM_KM3_S2, EARTH_RADIUS_KM, unit_vector

AWAY_FROM_THE_SUN_DEG = 180.0  # where a budget without a date puts the Sun


@dataclass(frozen=True, eq=False)
class Geometry:
    """Arrays (n,) over samples.

    `off_axis_deg` is between the spacecraft antenna's boresight and the station by the attitude law alone;
    `element_error_deg` is how far aged elements let the dish point beside the satellite.
    """

    elevation_deg: np.ndarray
    slant_range_km: np.ndarray
    off_axis_deg: np.ndarray
    range_rate_km_s: np.ndarray
    sun_separation_deg: np.ndarray
    element_error_deg: np.ndarray


def free_space_loss_db(range_km, frequency_hz: float):
    """Loss between isotropic antennas [dB]: 20 log10(4 pi d / lambda) (textbooks; ITU-R P.525, with c exact)."""
    return 20 * np.log10(4 * np.pi * np.asarray(range_km) * 1e3 * frequency_hz / C_M_S)


def session_law(satellite: Satellite, transmitter: Transmitter) -> Law:
    """How the satellite points while this mode transmits: the mode's own law, else the spacecraft's."""
    return transmitter.session_law or satellite.spacecraft.pointing.session


def sampled_geometry(
    sky: Sky, satellite: Satellite, transmitter: Transmitter, station: Station, index, element_age_days: float
) -> Geometry:
    """Geometry at the samples `index` (n,) of `sky.samples`, which must be of that satellite and station.

    InputError where the satellite tumbles and its antenna is not isotropic.
    """
    samples = sky.samples
    states = samples.position_km[index], samples.velocity_km_s[index]
    station_km = station_position_km(station)
    law = session_law(satellite, transmitter)
    axes = body_axes(steady(law, transmitter), *states, sun_position_km(sky.clock, samples.time_s[index]), station_km)
    return Geometry(
        elevation_deg=np.clip(samples.elevation_deg[index], 0.0, 90.0),
        slant_range_km=samples.range_km[index],
        off_axis_deg=off_axis_deg(axes, transmitter.boresight, station_km - states[0]),
        range_rate_km_s=samples.range_rate_km_s[index],
        sun_separation_deg=samples.sun_separation_deg[index],
        element_error_deg=pointing_error_deg(satellite.spacecraft.aging, element_age_days, *states, station_km),
    )


def circular_geometry(
    satellite: Satellite, transmitter: Transmitter, elevation_deg: float, element_age_days: float
) -> Geometry:
    """Geometry of one elevation on a circular orbit at the satellite's mean height.

    The satellite rises in a plane through the station's zenith, on a round Earth of the equatorial radius that does
    not turn; the Sun is out of the beam. Far from the equator the true range is longer, by up to 4 % near the poles.
    Where the attitude depends on the Sun no elevation can tell the angle off the antenna's axis: InputError.
    """
    law = steady(session_law(satellite, transmitter), transmitter)
    parallel = np.linalg.norm(np.cross(unit_vector(law.axis), unit_vector(transmitter.boresight))) < 1e-6
    if law.law == "sun" or (law.second_target == "sun" and law.law not in ("station", "tumbling") and not parallel):
        raise InputError(
            f"mode {transmitter.mode!r} points by the Sun in its session, so its antenna's angle to the station is not"
            " a matter of elevation: give a pass instead of an elevation"
        )
    orbit_radius_km = mean_radius_km(satellite)
    range_km = circular_slant_range_km(elevation_deg, orbit_radius_km, EARTH_RADIUS_KM)
    place = np.deg2rad(elevation_deg)
    station_km = np.array([0.0, 0.0, EARTH_RADIUS_KM])
    position_km = station_km + range_km * np.array([np.cos(place), 0.0, np.sin(place)])
    along = np.cross(np.array([0.0, 1.0, 0.0]), unit_vector(position_km))
    velocity_km_s = -np.sqrt(EARTH_GM_KM3_S2 / orbit_radius_km) * along
    axes = body_axes(law, position_km, velocity_km_s, np.array([0.0, 1e8, 0.0]), station_km)
    states = position_km[None], velocity_km_s[None]
    return Geometry(
        elevation_deg=np.array([float(elevation_deg)]),
        slant_range_km=np.array([range_km]),
        off_axis_deg=np.atleast_1d(off_axis_deg(axes, transmitter.boresight, station_km - position_km)),
        range_rate_km_s=np.atleast_1d(velocity_km_s @ unit_vector(position_km - station_km)),
        sun_separation_deg=np.array([AWAY_FROM_THE_SUN_DEG]),
        element_error_deg=pointing_error_deg(satellite.spacecraft.aging, element_age_days, *states, station_km),
    )


def mean_radius_km(satellite: Satellite) -> float:
    """Radius of the circular orbit that takes as long as the satellite's (Kepler's third law) [km]."""
    rate_rad_s = satellite.elements.mean_motion_rev_day * 2 * np.pi / DAY_S
    return float((EARTH_GM_KM3_S2 / rate_rad_s**2) ** (1 / 3))


def circular_slant_range_km(elevation_deg, orbit_radius_km: float, station_radius_km: float):
    """Distance to a circular orbit seen at an elevation, on a round Earth (cosine rule) [km]."""
    foot_km = station_radius_km * np.sin(np.deg2rad(elevation_deg))
    return np.sqrt(orbit_radius_km**2 - station_radius_km**2 + foot_km**2) - foot_km


def steady(law: Law, transmitter: Transmitter) -> Law:
    """The law, if the antenna can live with it."""
    if law.law == "tumbling" and not isinstance(transmitter.antenna, Isotropic):
        raise InputError(
            f"mode {transmitter.mode!r} transmits while the satellite tumbles, so only an antenna of kind"
            f' "isotropic" has a known gain, got {transmitter.antenna.kind!r}'
        )
    return law

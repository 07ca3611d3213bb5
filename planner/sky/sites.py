"""Stations as places: Earth-fixed position, local axes, the horizon they see over, and the look from them."""

from dataclasses import dataclass

import numpy as np

from planner.units import EARTH_FLATTENING, EARTH_RADIUS_KM, dot


@dataclass(frozen=True)
class Look:
    """From a station to a satellite, geometric (no refraction, no light time); arrays of one shape (n,)."""

    azimuth_deg: np.ndarray
    elevation_deg: np.ndarray
    range_km: np.ndarray
    range_rate_km_s: np.ndarray


@dataclass(frozen=True, eq=False)
class Sites:
    """Stations stacked: position_km (s, 3) and axes (s, 3, 3), whose rows are east, north, up."""

    stations: tuple
    position_km: np.ndarray
    axes: np.ndarray
    floor_deg: np.ndarray  # (s,) lowest elevation that any azimuth allows

    @classmethod
    def of(cls, stations) -> "Sites":
        stations = tuple(stations)
        place = [(station.latitude_deg, station.longitude_deg, station.altitude_m) for station in stations]
        latitude_deg, longitude_deg, altitude_m = np.array(place, dtype=float).reshape(-1, 3).T
        floor_deg = np.array([_lowest_mask_deg(station) for station in stations])
        position_km = _position_km(latitude_deg, longitude_deg, altitude_m)
        return cls(stations, position_km, _axes(latitude_deg, longitude_deg), floor_deg)


def station_position_km(station) -> np.ndarray:
    """Earth-fixed position (3,) [km] of a station on the WGS 84 ellipsoid."""
    return _position_km(station.latitude_deg, station.longitude_deg, station.altitude_m)


def _position_km(latitude_deg, longitude_deg, altitude_m):
    """(..., 3) from geodetic coordinates (...): textbook formula, from memory."""
    latitude, longitude, height_km = np.radians(latitude_deg), np.radians(longitude_deg), altitude_m / 1000
    squeeze = (1 - EARTH_FLATTENING) ** 2
    normal_km = EARTH_RADIUS_KM / np.sqrt(np.cos(latitude) ** 2 + squeeze * np.sin(latitude) ** 2)
    out_km, up_km = (normal_km + height_km) * np.cos(latitude), (squeeze * normal_km + height_km) * np.sin(latitude)
    return np.stack([out_km * np.cos(longitude), out_km * np.sin(longitude), up_km], axis=-1)


def local_axes(station) -> np.ndarray:
    """East, north and up (rows of a (3, 3) array) at a station; at a pole "north" is along its given longitude."""
    return _axes(station.latitude_deg, station.longitude_deg)


def _axes(latitude_deg, longitude_deg):
    latitude, longitude = np.radians(latitude_deg), np.radians(longitude_deg)
    sin_lat, cos_lat, sin_lon, cos_lon = np.sin(latitude), np.cos(latitude), np.sin(longitude), np.cos(longitude)
    east = np.stack([-sin_lon, cos_lon, np.zeros_like(sin_lon)], axis=-1)
    north = np.stack([-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat], axis=-1)
    up = np.stack([cos_lat * cos_lon, cos_lat * sin_lon, sin_lat], axis=-1)
    return np.stack([east, north, up], axis=-2)


def mask_deg(station, azimuth_deg):
    """Lowest usable elevation at an azimuth: the horizon, straight between its points and across north, or
    `min_elevation_deg` where that is higher. Shape of `azimuth_deg`."""
    if not station.horizon:
        return np.full(np.shape(azimuth_deg), float(station.min_elevation_deg))
    azimuths, elevations = np.array(station.horizon).T
    return np.maximum(np.interp(azimuth_deg, azimuths, elevations, period=360.0), station.min_elevation_deg)


def _lowest_mask_deg(station) -> float:
    lowest_point = min((elevation for _, elevation in station.horizon), default=0.0)
    return max(float(station.min_elevation_deg), float(lowest_point))


def look(position_km, velocity_km_s, station) -> Look:
    """Look from a station at states (..., 3) in the Earth-fixed frame."""
    return look_from(position_km, velocity_km_s, station_position_km(station), local_axes(station))


def look_from(position_km, velocity_km_s, site_km, axes) -> Look:
    """As `look`, from places (..., 3) and their local axes (..., 3, 3)."""
    away_km = position_km - site_km
    local_km = np.einsum("...ij,...j->...i", axes, away_km)
    east, north, up = local_km[..., 0], local_km[..., 1], local_km[..., 2]
    range_km = np.sqrt(dot(away_km, away_km))
    return Look(
        azimuth_deg=np.degrees(np.arctan2(east, north)) % 360.0,
        elevation_deg=np.degrees(np.arctan2(up, np.hypot(east, north))),
        range_km=range_km,
        range_rate_km_s=dot(away_km, velocity_km_s) / range_km,
    )


def rates_deg_s(position_km, velocity_km_s, site_km, axes):
    """Azimuth and elevation rates (..., ) [deg/s] of the line of sight from places (..., 3) with local axes."""
    east, north, up = np.moveaxis(np.einsum("...ij,...j->...i", axes, position_km - site_km), -1, 0)
    east_rate, north_rate, up_rate = np.moveaxis(np.einsum("...ij,...j->...i", axes, velocity_km_s), -1, 0)
    level2 = np.maximum(east**2 + north**2, 1e-12)
    level = np.sqrt(level2)
    azimuth = (east_rate * north - east * north_rate) / level2
    elevation = (up_rate * level - up * (east * east_rate + north * north_rate) / level) / (level2 + up**2)
    return np.degrees(azimuth), np.degrees(elevation)

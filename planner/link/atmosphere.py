"""Attenuation on the slant path by the ITU-R P series: the only door to the `itur` library.

Method: ITU-R P.618-13 section 2.5, with P.676-12 (gas), P.840 (cloud), P.837, P.838 and P.839 (rain) and P.618-13
section 2.4.1 (scintillation), from the recommendations' digital maps at the station's coordinates and height.

The elevation is the geometric one: refraction (0.15 deg at 5 deg) is neglected, to the safe side, and so is the
spreading of the beam (some tenths of a decibel at 5 deg, from memory).

What the library leaves open is closed here:

- Its P.676 is version 11 unless told otherwise (10 % apart at 26 GHz): version 12 is set before every use.
- Its line-by-line gas mode starts at sea level whatever the station's height: only the height-aware form is used.
- Gas, cloud and scintillation grow as 1/sin(elevation), without end: below 5 deg the bounded path of P.618 is taken.
- Some maps hold nothing near the poles: beyond 86.5 N and 89.5 S the value of that latitude is taken.
- A rain rate of zero, or a station above the rain, gives not-a-number there: here no rain means no rain attenuation.
- At 25 deg exactly it takes the low branch of P.618 step 10, the Recommendation the high one: the angle is nudged.
- It switches off numpy's division warnings for the whole process: they are put back.
"""

import importlib
import warnings
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from types import SimpleNamespace

import numpy as np

from planner.errors import InputError

EFFECTIVE_EARTH_KM = 8500.0  # P.618-13 section 2.2.1.1, radius that allows for refraction
RAIN_PCT = 5.0  # P.618-13 section 2.2.1.1 covers 0.001 to 5 % of the year; beyond, the sky is clear of rain
GAS_AND_CLOUD_PCT = 1.0  # P.618-13 section 2.5: below 1 % gas and cloud stay at their 1 % values
UNAVAILABILITY_PCT = (0.001, 50.0)  # P.618-13 section 2.5
FREQUENCY_GHZ = (1.0, 55.0)  # P.838 and P.676 begin at 1 GHz, P.618-13's rain model ends at 55 GHz
COSECANT_DEG = 5.0  # down to here the flat atmosphere's 1/sin(elevation)
TURBULENT_LAYER_KM = 1.0  # P.618-13 section 2.4.1
MAP_LATITUDE_DEG = (-89.5, 86.5)


@dataclass(frozen=True)
class Site:
    """Where the dish stands. `rain_rate_mm_h`, exceeded 0.01 % of the year, overrules the map."""

    latitude_deg: float
    longitude_deg: float
    height_km: float = 0.0
    rain_rate_mm_h: float | None = None


@dataclass(frozen=True)
class Attenuation:
    """Its parts [dB], arrays of one shape."""

    gas_db: np.ndarray
    cloud_db: np.ndarray
    rain_db: np.ndarray
    scintillation_db: np.ndarray

    @property
    def total_db(self):
        """P.618-13 section 2.5: A = gas + sqrt((rain + cloud)^2 + scintillation^2)."""
        return self.gas_db + np.hypot(self.rain_db + self.cloud_db, self.scintillation_db)

    @property
    def absorbed_db(self):
        """The part that also radiates noise: all but scintillation."""
        return self.gas_db + self.cloud_db + self.rain_db


def total_attenuation_db(
    site: Site, frequency_ghz, elevation_deg, unavailability_pct, *, diameter_m, efficiency=0.6, tilt_deg=45.0
) -> Attenuation:
    """Attenuation exceeded `unavailability_pct` of an average year, by parts.

    Parameters
    ----------
    site : Site
    frequency_ghz : float [GHz], 1 to 55
    elevation_deg : float or array [deg], 0 to 90
    unavailability_pct : float [% of the year], 0.001 to 50: 100 less the availability
    diameter_m, efficiency : of the receiving dish, which averages scintillation over its aperture
    tilt_deg : polarisation tilt from the horizontal [deg]; 45 for circular

    Returns
    -------
    Attenuation, arrays of the shape of `elevation_deg`

    Raises
    ------
    InputError : frequency, elevation or unavailability outside the models' range
    """
    where = (site, frequency_ghz, elevation_deg)
    return Attenuation(
        gas_attenuation_db(*where, unavailability_pct),
        cloud_attenuation_db(*where, unavailability_pct),
        rain_attenuation_db(*where, unavailability_pct, tilt_deg=tilt_deg),
        scintillation_db(*where, unavailability_pct, diameter_m=diameter_m, efficiency=efficiency),
    )


def gas_attenuation_db(site: Site, frequency_ghz, elevation_deg, unavailability_pct):
    """Oxygen and water vapour [dB]: P.676-12 Annex 2 with the water-vapour column of P.836 at the station's height.

    Water vapour is the content exceeded for max(unavailability, 1 %). Below 5 deg the path is bounded, with the
    equivalent heights of oxygen and of water vapour as the layers' thickness.
    """
    elevation_deg = _checked(frequency_ghz, elevation_deg, unavailability_pct)
    dry_db, wet_db, dry_km, wet_km = _zenith_gas(site, float(frequency_ghz), float(unavailability_pct))
    return dry_db * path_factor(elevation_deg, dry_km) + wet_db * path_factor(elevation_deg, wet_km)


def cloud_attenuation_db(site: Site, frequency_ghz, elevation_deg, unavailability_pct):
    """Liquid water in clouds [dB]: P.840 with its map of reduced liquid, exceeded for max(unavailability, 1 %).

    Below 5 deg the path is bounded by a layer as thick as the rain height over the station (P.839).
    """
    elevation_deg = _checked(frequency_ghz, elevation_deg, unavailability_pct)
    with _library() as itu:
        zenith_db = _number(
            itu.p840.cloud_attenuation(
                _map_latitude(site),
                site.longitude_deg,
                90.0,
                frequency_ghz,
                max(unavailability_pct, GAS_AND_CLOUD_PCT),
            )
        )
    return zenith_db * path_factor(elevation_deg, max(_rain_height_km(site) - site.height_km, TURBULENT_LAYER_KM))


def rain_attenuation_db(site: Site, frequency_ghz, elevation_deg, unavailability_pct, *, tilt_deg=45.0):
    """Rain [dB]: P.618-13 section 2.2.1.1; nothing beyond 5 % of the year, without rain, or above the rain height.

    Below 5 deg P.618's own bounded path is used; where its step 7 would still grow as 1/sin(elevation), the growth
    from 5 deg on is held to that of the path.
    """
    elevation_deg = _checked(frequency_ghz, elevation_deg, unavailability_pct)
    depth_km = _rain_height_km(site) - site.height_km
    rain_rate_mm_h = rain_rate_exceeded_mm_h(site)
    if unavailability_pct > RAIN_PCT or rain_rate_mm_h <= 0 or depth_km <= 0:
        return np.zeros_like(elevation_deg)

    def model_db(angle_deg):
        angle_deg = np.where(angle_deg == 25.0, np.nextafter(25.0, 26.0), np.maximum(angle_deg, 1e-6))
        with _library() as itu:
            return _number(
                itu.p618.rain_attenuation(
                    np.clip(site.latitude_deg, *MAP_LATITUDE_DEG),
                    site.longitude_deg,
                    frequency_ghz,
                    angle_deg,
                    hs=site.height_km,
                    p=unavailability_pct,
                    R001=rain_rate_mm_h,
                    tau=tilt_deg,
                )
            ).reshape(np.shape(angle_deg))

    at_five_db = model_db(np.array(COSECANT_DEG))
    bound_db = at_five_db * path_factor(elevation_deg, depth_km) / path_factor(COSECANT_DEG, depth_km)
    attenuation_db = model_db(elevation_deg)
    return np.where(elevation_deg < COSECANT_DEG, np.minimum(attenuation_db, bound_db), attenuation_db)


def scintillation_db(site: Site, frequency_ghz, elevation_deg, unavailability_pct, *, diameter_m, efficiency=0.6):
    """Tropospheric scintillation [dB]: P.618-13 section 2.4.1 with the map of the wet refractivity (P.453).

    The section is stated for 5 deg and up, 4 to 20 GHz and 0.01 to 50 %; like the Recommendation's own worked
    totals it is carried to 55 GHz and 0.001 %. Below 5 deg its path is bounded by the 1 km turbulent layer.
    """
    elevation_deg = _checked(frequency_ghz, elevation_deg, unavailability_pct)
    with _library() as itu:
        fade_db = _number(
            itu.p618.scintillation_attenuation(
                _map_latitude(site),
                site.longitude_deg,
                frequency_ghz,
                np.maximum(elevation_deg, COSECANT_DEG),
                unavailability_pct,
                diameter_m,
                efficiency,
            )
        ).reshape(elevation_deg.shape)
    at_five = path_factor(COSECANT_DEG, TURBULENT_LAYER_KM)
    growth = np.maximum(path_factor(elevation_deg, TURBULENT_LAYER_KM) / at_five, 1.0) ** 1.2
    return fade_db * np.where(elevation_deg < COSECANT_DEG, growth, 1.0)


def path_factor(elevation_deg, thickness_km):
    """Slant path through a layer at the ground, in units of its thickness.

    1/sin(elevation) from 5 deg up. Below, P.618-13 eq. (2), 2 / (sqrt(sin^2 + 2 h / Re) + sin), scaled to meet it at
    5 deg: it stays finite on the horizon.
    """
    elevation_deg = np.asarray(elevation_deg, dtype=float)

    def bounded(sine):
        return 2 / (np.sqrt(sine**2 + 2 * thickness_km / EFFECTIVE_EARTH_KM) + sine)

    sine, sine_five = np.sin(np.deg2rad(elevation_deg)), np.sin(np.deg2rad(COSECANT_DEG))
    low = bounded(sine) / (bounded(sine_five) * sine_five)
    return np.where(elevation_deg < COSECANT_DEG, low, 1 / np.maximum(sine, sine_five))


def rain_rate_exceeded_mm_h(site: Site) -> float:
    """Rain rate exceeded 0.01 % of the year [mm/h]: the station's own, else the map of P.837-7."""
    if site.rain_rate_mm_h is not None:
        return site.rain_rate_mm_h
    with _library() as itu:
        return float(_number(itu.p837.rainfall_rate(_map_latitude(site), site.longitude_deg, 0.01)))


def library_version() -> str:
    """Version of the installed itur, without loading it."""
    from importlib.metadata import version

    return version("itur")


@cache
def _rain_height_km(site: Site) -> float:
    with _library() as itu:
        return float(_number(itu.p839.rain_height(_map_latitude(site), site.longitude_deg)))


@cache
def _zenith_gas(site: Site, frequency_ghz: float, unavailability_pct: float):
    """(dry dB, wet dB, dry height km, wet height km) straight up."""
    latitude_deg, longitude_deg = _map_latitude(site), site.longitude_deg
    pct, height_km = max(unavailability_pct, GAS_AND_CLOUD_PCT), site.height_km
    with _library() as itu:
        column_kg_m2 = _number(itu.p836.total_water_vapour_content(latitude_deg, longitude_deg, pct, height_km))
        vapour_g_m3 = _number(itu.p836.surface_water_vapour_density(latitude_deg, longitude_deg, pct, height_km))
        air = (
            _number(itu.p835.standard_pressure(height_km)),
            vapour_g_m3,
            _number(itu.p1510.surface_mean_temperature(latitude_deg, longitude_deg)),
        )
        dry_km, wet_km = _number(itu.p676.slant_inclined_path_equivalent_height(frequency_ghz, *air))
        dry_db = dry_km * _number(itu.p676.gamma0_exact(frequency_ghz, *air))
        wet_db = _number(
            itu.p676.zenit_water_vapour_attenuation(
                latitude_deg, longitude_deg, pct, frequency_ghz, V_t=column_kg_m2, h=height_km
            )
        )
    return float(dry_db), float(wet_db), float(dry_km), float(wet_km)


def _map_latitude(site: Site) -> float:
    return float(np.clip(site.latitude_deg, *MAP_LATITUDE_DEG))


def _checked(frequency_ghz, elevation_deg, unavailability_pct):
    """Elevations as an array, or InputError naming what lies outside the models."""
    elevation_deg = np.asarray(elevation_deg, dtype=float)
    faults = []
    if not FREQUENCY_GHZ[0] <= frequency_ghz <= FREQUENCY_GHZ[1]:
        faults.append(
            f"frequency must be {FREQUENCY_GHZ[0]:g} to {FREQUENCY_GHZ[1]:g} GHz for ITU-R P.618-13,"
            f" got {frequency_ghz:g} GHz"
        )
    if not np.all((elevation_deg >= 0) & (elevation_deg <= 90)):
        wrong = elevation_deg[~((elevation_deg >= 0) & (elevation_deg <= 90))].flat[0]
        faults.append(f"elevation must be 0 to 90 deg, got {wrong:g} deg")
    if not UNAVAILABILITY_PCT[0] <= unavailability_pct <= UNAVAILABILITY_PCT[1]:
        faults.append(f"availability must be 50 to 99.999 % for ITU-R P.618-13, got {100 - unavailability_pct:.6g} %")
    if faults:
        raise InputError(*faults)
    return elevation_deg


def _number(quantity):
    """The bare number of one of the library's quantities."""
    return np.asarray(getattr(quantity, "value", quantity), dtype=float)


@cache
def _models() -> SimpleNamespace:
    before = np.geterr()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            recommendations = {
                f"p{number}": importlib.import_module(f"itur.models.itu{number}")
                for number in (618, 676, 835, 836, 837, 839, 840, 1510)
            }
    finally:
        np.seterr(**before)
    return SimpleNamespace(**recommendations)


@contextmanager
def _library():
    """The library's modules, with the versions set and its harmless warnings (steps of formulas not taken) silent."""
    models = _models()
    models.p676.change_version(12)
    models.p618.change_version(13)
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore", RuntimeWarning)
        yield models

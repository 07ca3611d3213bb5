"""Topocentric angles and pass times against two other libraries: astropy's frames and ephem's own SGP4 and search."""

import math

import ephem
import numpy as np
import pytest
from sky_examples import FIVE_SITES, SAMPLES, clock_of, elements_of, station

from planner.sky.clock import timescale
from planner.sky.passes import find_passes
from planner.sky.sites import look
from planner.sky.track import track_elements

# Given the same UT1, astropy differs by polar motion, which it has and skyfield's shipped time scale has not:
# up to 0.3 arc seconds, 10 m at the Earth's surface.
POLAR_MOTION_KM = 0.015
POLAR_MOTION_DEG = 0.002
# UT1 - UTC as shipped with skyfield and as predicted by the IERS differ by under a quarter second in December 2026: the
# Earth turns 0.001 deg in it, which is 116 m at the equator and 0.013 deg at 500 km range.
UT1_CHOICE_S = 0.25
UT1_CHOICE_KM = 0.12
# ephem takes UT1 as UTC and its own rounding of the elements: pass times within this in low orbit.
EPHEM_S = 0.3
EPHEM_DEG = 0.02


@pytest.fixture(autouse=True)
def earth_orientation_as_shipped():
    """astropy keeps to the tables of its data package, predictions of any age included; nothing is downloaded."""
    from astropy.utils import iers

    with iers.conf.set_temp("auto_download", False), iers.conf.set_temp("auto_max_age", None):
        yield


@pytest.mark.parametrize("kind", ["marshlight", "low_inclination", "molniya_type", "geostationary"])
@pytest.mark.parametrize("same_ut1", [True, False])
def test_astropy_sees_the_satellite_at_the_same_angles_and_range(kind, same_ut1):
    from astropy import units as u
    from astropy.coordinates import ITRS, TEME, AltAz, CartesianRepresentation, EarthLocation
    from astropy.time import Time

    clock, elements = clock_of(), elements_of(kind)
    time_s = np.linspace(1000.0, 500_000.0, 200)
    track = track_elements(clock, elements.name, elements)
    error, teme_km, _ = elements.sgp4_model().sgp4_array(*clock.julian(time_s))
    assert not error.any()
    site = FIVE_SITES[4]
    moments = Time(*clock.julian(time_s), format="jd", scale="utc")
    if same_ut1:
        moments.delta_ut1_utc = np.interp(time_s, *clock._ut1_less_utc)
    itrs = TEME(CartesianRepresentation(teme_km.T * u.km), obstime=moments).transform_to(ITRS(obstime=moments))
    place = EarthLocation.from_geodetic(site.longitude_deg * u.deg, site.latitude_deg * u.deg, site.altitude_m * u.m)
    away = itrs.cartesian - place.get_itrs(obstime=moments).cartesian
    seen = ITRS(away, obstime=moments, location=place).transform_to(
        AltAz(obstime=moments, location=place, pressure=0 * u.hPa)
    )
    view = look(*track.at(time_s), site)
    allowed_km = POLAR_MOTION_KM if same_ut1 else UT1_CHOICE_KM
    allowed_deg = np.degrees(allowed_km / view.range_km) + POLAR_MOTION_DEG
    if kind == "geostationary":
        allowed_km *= 6.7  # the same angles at 42 000 km
    elif kind == "molniya_type":
        allowed_km *= 7.2
    assert np.abs(seen.distance.km - view.range_km).max() < allowed_km
    assert (np.abs(seen.alt.deg - view.elevation_deg) < allowed_deg).all()


def test_the_two_choices_of_ut1_differ_by_less_than_stated():
    from astropy.time import Time

    clock = clock_of()
    shipped = np.interp(0.0, *clock._ut1_less_utc)
    predicted = float(Time(*clock.julian(0.0), format="jd", scale="utc").delta_ut1_utc)
    assert abs(shipped - predicted) < UT1_CHOICE_S


@pytest.mark.parametrize("kind", ["marshlight", "low_inclination"])
@pytest.mark.parametrize("site", [FIVE_SITES[0], FIVE_SITES[1], station(52.0, 5.0)], ids=lambda site: site.name)
def test_ephem_finds_the_same_passes(kind, site):
    clock, elements = clock_of(), elements_of(kind)
    site = site.model_copy(update={"min_elevation_deg": 0.0})
    passes = find_passes(clock, [track_elements(clock, elements.name, elements)], [site])
    body = ephem.readtle(*(SAMPLES / f"{kind}.tle").read_text().splitlines()[:3])
    observer = ephem.Observer()
    observer.lat, observer.lon = math.radians(site.latitude_deg), math.radians(site.longitude_deg)
    observer.elevation, observer.pressure, observer.horizon = site.altitude_m, 0, 0
    checked = 0
    for aos_s, los_s, highest, cut in zip(
        passes.aos_s, passes.los_s, passes.max_elevation_deg, passes.truncated, strict=True
    ):
        if cut or highest < 3.0:
            continue
        observer.date = ephem.Date(clock.datetime(aos_s - 300).replace(tzinfo=None))
        rise, _, _, top, down, _ = observer.next_pass(body)
        found = [
            clock.seconds(ephem.Date(moment).datetime().replace(tzinfo=clock.start.tzinfo)) for moment in (rise, down)
        ]
        assert found == pytest.approx([aos_s, los_s], abs=EPHEM_S)
        assert math.degrees(top) == pytest.approx(highest, abs=EPHEM_DEG)
        checked += 1
    assert checked > 15


def test_shipped_leap_seconds_end_in_2017():
    assert timescale().leap_dates[-1] == 2457754.5  # 2017-01-01: IERS Bulletin C 52

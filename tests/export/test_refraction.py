"""Refraction against the issue's own figure, against an independent radio model, and in its limits."""

import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.time import Time
from astropy.utils import iers

from planner.export.refraction import refraction_deg

# ERFA's radio refraction takes weather, P.834 a mean atmosphere: they differ by an eighth, as much as weather does.
AN_EIGHTH = 0.125


def erfa_refraction_deg(true_elevation_deg):
    """Independent: astropy (ERFA's refco, radio case) at sea level, 15 degC, 60 % humidity, 1.15 cm wavelength."""
    iers.conf.auto_download = False
    place = EarthLocation(lat=50 * u.deg, lon=0 * u.deg)
    when = Time("2020-01-01T00:00:00")
    bare = AltAz(obstime=when, location=place)
    air = AltAz(
        obstime=when, location=place, pressure=1013.25 * u.hPa, temperature=15 * u.deg_C, relative_humidity=0.6,
        obswl=1.15 * u.cm,
    )  # fmt: skip
    source = SkyCoord(az=90 * u.deg, alt=true_elevation_deg * u.deg, frame=bare)
    return (source.transform_to(air).alt - source.alt).deg


@pytest.mark.parametrize("elevation_deg", [5.0, 7.0, 10.0, 15.0, 30.0, 60.0, 85.0])
def test_agrees_with_erfas_radio_refraction(elevation_deg):
    assert refraction_deg(elevation_deg) == pytest.approx(erfa_refraction_deg(elevation_deg), rel=AN_EIGHTH)


# Common practice, no source: about 0.2 deg at 5 deg elevation.
def test_is_about_a_fifth_of_a_degree_at_five_degrees():
    assert refraction_deg(5.0) == pytest.approx(0.2, abs=0.03)


def test_falls_with_elevation_and_with_the_stations_height():
    elevations = np.linspace(0, 90, 91)
    assert np.all(np.diff(refraction_deg(elevations)) < 0)
    assert refraction_deg(5.0, 2.0) < refraction_deg(5.0, 0.0)
    assert refraction_deg(5.0, 5.0) == refraction_deg(5.0, 3.0)


def test_an_array_gives_what_each_scalar_gives():
    assert refraction_deg(np.array([5.0]), 0.3)[0] == refraction_deg(5.0, 0.3)
    assert refraction_deg(-1.0) == refraction_deg(0.0)

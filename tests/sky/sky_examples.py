"""Stations, orbits and an independent truth for the tests of this room."""

from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
from hypothesis import strategies as st
from skyfield.api import EarthSatellite, wgs84

from planner.mission.elements import ElementSet, read_elements
from planner.mission.station import GroundAntenna, Receiver, Station
from planner.sky.clock import Clock, timescale

SAMPLES = Path(__file__).parents[2] / "tle_samples"
START = datetime(2026, 12, 7, tzinfo=UTC)
DAY_S = 86_400.0
KINDS = ("marshlight", "low_inclination", "molniya_type", "geostationary")


def elements_of(kind: str) -> ElementSet:
    """The one set of a sample file."""
    (elements,) = read_elements(SAMPLES / f"{kind}.tle", START).values()
    return elements


def station(latitude_deg=60.0, longitude_deg=10.0, **changes) -> Station:
    antenna = GroundAntenna(diameter_m=2.8, **changes.pop("antenna", {}))
    receiver = (Receiver(bands=("K",), noise_temperature_k=150.0),)
    name = changes.pop("name", f"site {latitude_deg:g} {longitude_deg:g}")
    return Station(
        name=name, latitude_deg=float(latitude_deg), longitude_deg=float(longitude_deg), antenna=antenna,
        receiver=receiver, **changes,
    )  # fmt: skip


# Five sites: mid latitude, south, the antimeridian on the equator, the pole, and one at 4000 m.
FIVE_SITES = (
    station(60.0, 10.0, name="north"),
    station(-45.0, 170.0, name="south", min_elevation_deg=0.0),
    station(0.0, 180.0, name="antimeridian", min_elevation_deg=10.0),
    station(90.0, 0.0, name="pole"),
    station(-23.0, -67.0, name="high", altitude_m=4000.0),
)


def clock_of(days: float = 7.0, start: datetime = START) -> Clock:
    return Clock(start, days * DAY_S)


class Truth:
    """Skyfield's own full chain, one moment array at a time: topocentric ITRS, no refraction, no light time."""

    def __init__(self, clock: Clock, elements: ElementSet, site: Station):
        self.clock, self.site = clock, site
        self.satellite = EarthSatellite.from_satrec(elements.sgp4_model(), timescale())
        self.place = wgs84.latlon(site.latitude_deg, site.longitude_deg, elevation_m=site.altitude_m)

    def altaz(self, time_s):
        """Elevation [deg], azimuth [deg], range [km] at moments (n,)."""
        start = self.clock.start
        seconds = start.second + start.microsecond / 1e6 + np.asarray(time_s)
        moments = timescale().utc(start.year, start.month, start.day, start.hour, start.minute, seconds)
        elevation, azimuth, distance = (self.satellite - self.place).at(moments).altaz()
        return elevation.degrees, azimuth.degrees, distance.km

    def crossings_s(self, around_s, mask_deg: float, reach_s: float = 2.0):
        """The moments near `around_s` at which elevation crosses the mask, by bisection to a microsecond."""
        low, high = np.array(around_s) - reach_s, np.array(around_s) + reach_s
        above_low = self.altaz(low)[0] > mask_deg
        assert (above_low != (self.altaz(high)[0] > mask_deg)).all(), "no crossing within reach"
        for _ in range(22):
            middle = (low + high) / 2
            like_low = (self.altaz(middle)[0] > mask_deg) == above_low
            low, high = np.where(like_low, middle, low), np.where(like_low, high, middle)
        return (low + high) / 2


def element_set(**changes) -> ElementSet:
    """A circular low orbit with some elements changed."""
    return ElementSet(**{
        "name": "TEST", "catalog_number": "90099", "epoch": START - timedelta(hours=6), "mean_motion_rev_day": 15.0,
        "eccentricity": 0.001, "inclination_deg": 60.0, "ra_of_asc_node_deg": 0.0, "arg_of_pericenter_deg": 0.0,
        "mean_anomaly_deg": 0.0, **changes,
    })  # fmt: skip


def _angle(largest: float):
    return st.floats(0, largest).map(lambda value: round(value, 3))


@st.composite
def orbits(draw):
    """Orbits with perigee above 250 km and a period under a day and a half.

    Inclinations end half a degree before 180 deg, where SGP4's own deep-space terms divide by zero.
    """
    perigee_km = draw(st.floats(250, 3000)) + 6378.137
    e = draw(st.one_of(st.floats(0, 0.02), st.floats(0.02, 0.75)))
    axis_km = perigee_km / (1 - e)
    mean_motion = np.sqrt(398600.4418 / axis_km**3) * DAY_S / (2 * np.pi)
    return element_set(
        mean_motion_rev_day=float(mean_motion), eccentricity=e, inclination_deg=draw(_angle(179.5)),
        ra_of_asc_node_deg=draw(_angle(360)), arg_of_pericenter_deg=draw(_angle(360)),
        mean_anomaly_deg=draw(_angle(360)),
    )  # fmt: skip


@st.composite
def sites(draw):
    """Sites anywhere, the poles and the antimeridian among them, some with a horizon line."""
    latitude = draw(st.one_of(st.sampled_from([-90.0, 0.0, 90.0]), st.floats(-90, 90)))
    longitude = draw(st.one_of(st.sampled_from([-180.0, 0.0, 180.0]), st.floats(-180, 180)))
    azimuths = sorted(draw(st.sets(st.integers(0, 359), max_size=6)))
    horizon = tuple((float(azimuth), draw(st.floats(0, 30))) for azimuth in azimuths)
    return station(
        latitude, longitude, name="somewhere", altitude_m=draw(st.floats(0, 5000)), horizon=horizon,
        min_elevation_deg=draw(st.sampled_from([0.0, 5.0, 10.0])),
    )  # fmt: skip

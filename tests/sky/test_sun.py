"""The Sun and the Earth's shadow: limiting cases, published fractions, and two other libraries."""

import math

import ephem
import numpy as np
import pytest
from sky_examples import DAY_S, clock_of, element_set, elements_of

from planner.sky.sun import beta_deg, eclipse_edges_s, sun_position_km, visible_sun_fraction
from planner.sky.track import track_elements
from planner.units import AU_KM, EARTH_RADIUS_KM, SUN_RADIUS_KM

SUN_ON_X = np.array([AU_KM, 0.0, 0.0])
# astropy's default Sun is ERFA's analytic one, good to a few arc seconds; UT1 differs by 0.18 s, 3 arc seconds.
TEN_ARC_SECONDS_RAD = 10 / 206265
# The published fractions are those of a cylinder over a sphere: the cone narrows the umbra by 0.5 deg of orbit, and
# flattening by 1 % of it, of which the test's equatorial orbits see none.
CONE_FRACTION = 0.0015
HALF_A_SECOND = 0.5
POLAR_RADIUS_KM = 6356.7523142  # WGS 84, from memory


def test_the_sun_stands_where_astropy_has_it():
    from astropy.coordinates import get_sun
    from astropy.time import Time
    from astropy.utils import iers

    clock = clock_of()
    time_s = np.linspace(0, clock.span_s, 60)
    with iers.conf.set_temp("auto_download", False), iers.conf.set_temp("auto_max_age", None):
        moments = Time(*clock.julian(time_s), format="jd", scale="utc")
        theirs = get_sun(moments).itrs.cartesian.xyz.to_value("km").T
    ours = sun_position_km(clock, time_s)
    cosine = (ours * theirs).sum(axis=1) / np.linalg.norm(ours, axis=1) / np.linalg.norm(theirs, axis=1)
    assert np.arccos(np.minimum(cosine, 1)).max() < TEN_ARC_SECONDS_RAD
    assert np.linalg.norm(ours, axis=1) == pytest.approx(np.linalg.norm(theirs, axis=1), rel=1e-5)


def test_straight_lines_between_table_entries_keep_to_the_ephemeris():
    from skyfield.framelib import itrs

    from planner.sky import sun
    from planner.sky.frames import moments

    clock = clock_of()
    time_s = np.linspace(-DAY_S, clock.span_s + DAY_S, 777)
    at = sun._ephemeris()["earth"].at(moments(clock, time_s)).observe(sun._ephemeris()["sun"]).apparent()
    gap_km = np.linalg.norm(sun_position_km(clock, time_s) - at.frame_xyz(itrs).km.T, axis=1)
    assert gap_km.max() < AU_KM * 0.01 / 206265  # a hundredth of an arc second


def place(behind_km, aside_km, axis=1):
    position = np.array([-behind_km, 0.0, 0.0])
    position[axis] = aside_km
    return position


@pytest.mark.parametrize("position", [(7000.0, 0, 0), (0, 7000.0, 0), (0, 0, 7000.0), (-7000.0, 6500.0, 0)])
def test_full_sunlight_before_and_beside_the_earth(position):
    assert visible_sun_fraction(np.array(position, dtype=float), SUN_ON_X) == 1.0


def test_darkness_behind_the_earth():
    assert visible_sun_fraction(np.array([-7000.0, 0.0, 0.0]), SUN_ON_X) == 0.0
    assert visible_sun_fraction(place(1.3e6, 0.0), SUN_ON_X) == 0.0  # just inside the umbra's tip


@pytest.mark.parametrize("behind_km", [2000.0, 7000.0, 42164.0])
@pytest.mark.parametrize(("axis", "radius_km"), [(1, EARTH_RADIUS_KM), (2, POLAR_RADIUS_KM)])
def test_umbra_and_penumbra_are_cones_over_the_oblate_earth(behind_km, axis, radius_km):
    """Edges by similar triangles in the plane, where the Earth's section is a circle or, over the pole, an ellipse."""
    flatness = radius_km / EARTH_RADIUS_KM

    def edge_km(sun_side):
        # the tangent to the ellipse from the Sun's edge, by stretching the axis until it is a circle
        edge = sun_side * SUN_RADIUS_KM / flatness
        distance = math.hypot(AU_KM, edge)
        angle = math.atan2(edge, AU_KM) + math.acos(EARTH_RADIUS_KM / distance)
        touch = EARTH_RADIUS_KM * np.array([math.cos(angle), math.sin(angle)])
        slope = (touch[1] - edge) / (touch[0] - AU_KM)
        return flatness * (edge + slope * (-behind_km - AU_KM))

    umbra_km, penumbra_km = edge_km(+1), edge_km(-1)
    assert umbra_km < penumbra_km
    metre = 1e-3
    for aside_km, expected in ((umbra_km - metre, 0.0), (penumbra_km + metre, 1.0)):
        assert visible_sun_fraction(place(behind_km, aside_km, axis), SUN_ON_X) == pytest.approx(expected, abs=1e-9)
    for aside_km in (umbra_km + 50 * metre, penumbra_km - 50 * metre):
        assert 0 < visible_sun_fraction(place(behind_km, aside_km, axis), SUN_ON_X) < 1
    half = visible_sun_fraction(place(behind_km, (umbra_km + penumbra_km) / 2, axis), SUN_ON_X)
    assert half == pytest.approx(0.5, abs=0.02)  # the limb is nearly straight across the disc


def test_the_disc_is_uncovered_as_a_segment_of_a_circle():
    """Against a count of points on the Sun's disc whose line of sight misses a sphere's limb, in 3D."""
    equator = np.array([AU_KM, 0.0, 0.0])
    rng = np.random.default_rng(2)
    r, angle = SUN_RADIUS_KM * np.sqrt(rng.uniform(0, 1, 40_000)), rng.uniform(0, 2 * np.pi, 40_000)
    points = equator + np.stack([np.zeros_like(r), r * np.cos(angle), r * np.sin(angle)], axis=1)
    stretch = np.array([1, 1, 1 / (1 - 1 / 298.257223563)])
    for aside_km in np.linspace(6350.0, 6408.0, 9):
        position = place(7000.0, aside_km)
        line = (points - position) * stretch
        line /= np.linalg.norm(line, axis=1, keepdims=True)
        along = line @ (position * stretch)
        nearest2 = (position * stretch) @ (position * stretch) - along**2
        free = (nearest2 > EARTH_RADIUS_KM**2) | (along > 0)
        assert visible_sun_fraction(position, equator) == pytest.approx(
            free.mean(), abs=0.01
        )  # four sigma of the count


def test_an_array_gives_what_each_scalar_gives():
    positions = np.array([place(7000.0, aside) for aside in (6000.0, 6370.0, 6390.0, 6500.0)])
    suns = np.tile(SUN_ON_X, (4, 1))
    each = [visible_sun_fraction(position, SUN_ON_X) for position in positions]
    assert list(visible_sun_fraction(positions, suns)) == each


@pytest.mark.parametrize(
    ("height_km", "beta", "published"),
    [
        (400, 0, 0.39010),
        (400, 30, 0.37220),
        (400, 60, 0.26333),
        (550, 0, 0.37231),
        (550, 30, 0.35111),
        (550, 60, 0.21474),
    ],
)
def test_eclipse_fractions_of_circular_orbits(height_km, beta, published):
    """acos(sqrt(h^2 + 2 R h) / ((R + h) cos beta)) / pi, the cylinder's; penumbra counts as half."""
    radius_km = EARTH_RADIUS_KM + height_km
    angle = np.linspace(0, 2 * np.pi, 40_001)
    tilt = math.radians(beta)
    ring = radius_km * np.stack([np.cos(angle) * math.cos(tilt), np.sin(angle), np.cos(angle) * math.sin(tilt)], axis=1)
    spherical = ring * np.array([1, 1, 1 - 1 / 298.257223563])  # takes the flattening out again
    dark = 1 - visible_sun_fraction(spherical, np.tile(SUN_ON_X, (len(angle), 1)))
    assert dark.mean() == pytest.approx(published, abs=CONE_FRACTION)


def test_flattening_shortens_a_low_polar_orbits_umbra_by_about_one_percent():
    """Noon-midnight polar orbit at 500 km in December: the shadow's edge lies over high latitudes."""
    clock = clock_of(1.0)
    track = track_elements(clock, "t", elements_of("marshlight"))
    time_s = np.arange(0, DAY_S, 1.0)
    position, sun = track.at(time_s)[0], sun_position_km(clock, time_s)
    oblate = 1 - visible_sun_fraction(position, sun).mean()
    swollen = np.array([1, 1, 1 - 1 / 298.257223563])
    spherical = 1 - visible_sun_fraction(position * swollen, sun).mean()
    assert 0.002 < 1 - oblate / spherical < 0.02


@pytest.mark.parametrize("kind", ["marshlight", "low_inclination", "molniya_type"])
def test_edges_are_where_the_visible_share_leaves_or_reaches_nothing_or_all(kind):
    elements = elements_of(kind)
    clock = clock_of(2.0)
    track = track_elements(clock, "t", elements)
    edges_s = eclipse_edges_s(track, clock)
    inside = edges_s[(edges_s > 2) & (edges_s < clock.span_s - 2)]

    def share(time_s):
        return visible_sun_fraction(track.at(time_s)[0], sun_position_km(clock, time_s))

    before, after = share(inside - HALF_A_SECOND), share(inside + HALF_A_SECOND)
    extreme_before, extreme_after = np.isin(before, (0.0, 1.0)), np.isin(after, (0.0, 1.0))
    assert (extreme_before != extreme_after).all()
    time_s = np.arange(0, clock.span_s, 1.0)
    partial = np.isin(share(time_s), (0.0, 1.0), invert=True)
    assert abs(np.count_nonzero(np.diff(partial.astype(int))) - len(inside)) <= 1
    assert len(inside) > 60 or kind == "molniya_type"


def test_edges_agree_with_ephems_eclipse():
    """ephem says only whether a satellite is eclipsed (a sphere's cylinder, from memory): within 15 s in low orbit."""
    from sky_examples import SAMPLES

    clock = clock_of(1.0)
    elements = elements_of("marshlight")
    track = track_elements(clock, "t", elements)
    body = ephem.readtle(*(SAMPLES / "marshlight.tle").read_text().splitlines()[:3])
    observer = ephem.Observer()
    time_s = np.arange(0, DAY_S, 20.0)
    dark = []
    for t in time_s:
        observer.date = ephem.Date(clock.datetime(t).replace(tzinfo=None))
        body.compute(observer)
        dark.append(body.eclipsed)
    ours = visible_sun_fraction(track.at(time_s)[0], sun_position_km(clock, time_s)) < 0.5
    edges = np.count_nonzero(np.diff(ours))
    assert np.count_nonzero(ours != np.array(dark)) <= edges  # one step of 20 s beside each edge at most


def test_a_grazed_penumbra_between_two_grid_points_is_found():
    """Where the orbit just touches the penumbra the Sun is never wholly hidden, yet there are two edges."""
    clock = clock_of(20.0)
    elements = element_set(mean_motion_rev_day=14.2, inclination_deg=66.0, ra_of_asc_node_deg=150.0)
    track = track_elements(clock, "t", elements)
    time_s = np.arange(track.time_s[0], track.time_s[-1], 2.0)
    share = visible_sun_fraction(track.at(time_s)[0], sun_position_km(clock, time_s))
    partial = np.isin(share, (0.0, 1.0), invert=True)
    expected = np.count_nonzero(np.diff(partial.astype(int)))
    found = len(eclipse_edges_s(track, clock))
    assert found >= expected
    assert found - expected <= 2  # one pair may fall between the scan's own steps


def test_beta_angle():
    position, velocity = np.array([7000.0, 0, 0]), np.array([0, 7.5 - 7000 * 7.292115e-5, 0])
    assert beta_deg(position, velocity, np.array([AU_KM, 0, 0])) == pytest.approx(0.0, abs=1e-9)
    assert beta_deg(position, velocity, np.array([0, 0, AU_KM])) == pytest.approx(90.0)
    assert beta_deg(position, velocity, np.array([AU_KM, 0, -AU_KM])) == pytest.approx(-45.0)


def test_the_sun_synchronous_sample_keeps_its_local_time():
    """10:30 is an hour and a half before noon: 22.5 deg from the Sun's meridian, as beta at a Sun 22.7 deg south."""
    clock = clock_of()
    track = track_elements(clock, "t", elements_of("marshlight"))
    time_s = np.linspace(0, clock.span_s, 400)
    beta = beta_deg(*track.at(time_s), sun_position_km(clock, time_s))
    assert np.abs(beta - beta.mean()).max() < 1.0
    assert abs(beta.mean()) == pytest.approx(21.6, abs=1.5)

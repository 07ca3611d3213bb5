"""The idle week on a real orbit: edges, eclipses, temperatures."""

from datetime import timedelta

import numpy as np
import pytest
from power_examples import START, battery, craft, mission, power_of

from planner.mission.pointing import Law, Pointing
from planner.mission.power import Load, Panel
from planner.power.balance import SatellitePower
from planner.power.profile import battery_temperature_c, thermostat_edges_s
from planner.sky.clock import Clock
from planner.sky.sun import beta_deg, eclipse_edges_s, sun_position_km, visible_sun_fraction
from planner.sky.track import track_satellite
from planner.units import AU_KM, EARTH_RADIUS_KM


@pytest.fixture(scope="module")
def heater() -> Load:
    return Load(name="heater", power_w=2.0, on_below_c=14.0)


@pytest.fixture(scope="module")
def power(heater) -> SatellitePower:
    thruster = Load(
        name="thruster",
        power_w=9.0,
        when="windows",
        windows=((START + timedelta(seconds=7001.5), START + timedelta(seconds=7105.25)),),
    )
    return power_of(mission(craft(load=(heater, thruster))))


def test_at_most_sixty_seconds_lie_between_edges(power):
    assert power.idle("nominal").duration_s.max() <= 60.0
    assert power.idle("nominal").edges_s[[0, -1]].tolist() == [0.0, 86_400.0]


def test_every_eclipse_and_load_edge_is_an_edge(power):
    edges_s, clock = power.idle().edges_s, Clock(START, 86_400.0)
    sun_s = eclipse_edges_s(track_satellite(clock, power.satellite), clock)
    sun_s = sun_s[(sun_s > 0) & (sun_s < 86_400)]
    assert len(sun_s) >= 4 * 14
    two_milliseconds = 2e-3
    for edge_s in (*sun_s, 7001.5, 7105.25):
        assert np.abs(edges_s - edge_s).min() < two_milliseconds


def test_a_window_draws_exactly_its_energy(power):
    nominal = power.idle("nominal")
    thruster_w = 9.0 / 0.95
    drawn_j = np.sum(np.where(nominal.load_w >= thruster_w, thruster_w, 0.0) * nominal.duration_s)
    assert drawn_j == pytest.approx(thruster_w * 103.75, rel=1e-6)


def test_both_corners_share_their_edges(power):
    assert np.array_equal(power.idle("nominal").edges_s, power.idle("pessimistic").edges_s)


def test_the_share_of_a_day_in_eclipse_is_that_of_a_circular_orbit(power):
    """Published formula, cylindrical shadow: acos(sqrt(h^2 + 2 R h) / ((R + h) cos beta)) / pi."""
    clock = Clock(START, 86_400.0)
    track = track_satellite(clock, power.satellite)
    inside = (track.time_s >= 0) & (track.time_s <= 86_400)
    radius_km = np.linalg.norm(track.position_km[inside], axis=1).mean()
    sun_km = sun_position_km(clock, track.time_s[inside])
    beta = np.radians(beta_deg(track.position_km[inside], track.velocity_km_s[inside], sun_km).mean())
    height_km = radius_km - EARTH_RADIUS_KM
    cosine = np.sqrt(height_km**2 + 2 * EARTH_RADIUS_KM * height_km) / (radius_km * np.cos(beta))
    idle = power.idle()
    share = np.average(1 - idle.visible_sun, weights=idle.duration_s)
    flattening_and_whole_orbits = 0.01
    assert share == pytest.approx(np.arccos(cosine) / np.pi, abs=flattening_and_whole_orbits)


# Computed from the same formula, R = 6378.137 km: height, beta and the share of the orbit in the cylinder
@pytest.mark.parametrize(
    ("height_km", "beta", "share"),
    [
        (400.0, 0.0, 0.39010),
        (400.0, 30.0, 0.37220),
        (400.0, 60.0, 0.26333),
        (550.0, 0.0, 0.37231),
        (550.0, 30.0, 0.35111),
        (550.0, 60.0, 0.21474),
    ],
)
def test_eclipse_shares_of_the_published_circular_orbits(height_km, beta, share):
    around = (np.arange(20_000) + 0.5) * 2 * np.pi / 20_000
    position_km = (EARTH_RADIUS_KM + height_km) * np.stack([np.cos(around), np.sin(around), 0 * around], axis=1)
    sun = np.array([np.cos(np.radians(beta)), 0.0, np.sin(np.radians(beta))])
    dark = 1 - visible_sun_fraction(position_km, np.broadcast_to(AU_KM * sun, position_km.shape))
    cone_and_flattening = 0.006  # of an orbit, half a minute: the Sun's width, and 21 km less Earth over the poles
    assert dark.mean() == pytest.approx(share, abs=cone_and_flattening)


def test_array_power_is_zero_in_eclipse_and_only_there_for_a_sun_pointer():
    sunward = craft(
        panel=(Panel(name="wing", normal=(0.0, 0.0, 1.0), cell_area_m2=0.05),), pointing=Pointing(idle=Law(law="sun"))
    )
    idle = power_of(mission(sunward)).idle("nominal")
    assert np.all((idle.array_w > 0) == (idle.visible_sun > 0))
    full_w = idle.array_w[idle.visible_sun == 1.0]
    one_per_cent = 0.01
    assert full_w == pytest.approx(np.full_like(full_w, full_w.mean()), rel=one_per_cent)


def test_a_tumbling_satellite_gives_a_fraction_of_a_sun_pointing_one():
    """A single panel: a quarter of its surface shows on average, and cooler cells do a little better."""
    panel = (Panel(name="wing", normal=(0.0, 0.0, 1.0), cell_area_m2=0.05),)
    sunward, tumbling = (
        power_of(mission(craft(panel=panel, pointing=Pointing(idle=Law(law=law))), days=0.2)).idle("nominal")
        for law in ("sun", "tumbling")
    )
    share = tumbling.array_w.sum() / sunward.array_w.sum()
    assert 0.25 < share < 0.28


def test_hinged_wings_face_where_the_hinge_turns_them():
    flat = Panel(name="wing", normal=(0.0, 0.0, -1.0), cell_area_m2=0.05)
    hinged = Panel(
        name="wing", normal=(0.0, 1.0, 0.0), cell_area_m2=0.05, hinge_axis=(1.0, 0.0, 0.0), hinge_angle_deg=-90.0
    )
    flat_w, hinged_w = (
        power_of(mission(craft(panel=(one,)), days=0.1)).idle("nominal").array_w for one in (flat, hinged)
    )
    a_nanowatt = 1e-9
    assert hinged_w == pytest.approx(flat_w, abs=a_nanowatt)


def test_temperature_relaxes_with_its_time_constant():
    own = battery(sunlit_c=20.0, eclipse_c=10.0, thermal_time_constant_min=30.0)
    edges_s = np.arange(0.0, 7201.0, 60.0)
    sun = np.repeat([1.0, 0.0], 60)
    course_c = battery_temperature_c(own, 0.0, edges_s, sun)
    assert course_c[0] == pytest.approx(15.0)
    assert course_c[30] == pytest.approx(20.0 - 5.0 / np.e)
    assert battery_temperature_c(own, 6.0, edges_s, sun) == pytest.approx(course_c - 6.0)


def test_thermostat_edges_lie_where_the_temperature_crosses(heater):
    edges_s, edge_c = np.array([0.0, 60.0, 120.0]), np.array([15.0, 13.0, 17.0])
    assert thermostat_edges_s((heater,), edges_s, edge_c) == pytest.approx([30.0, 75.0])


def test_the_thermostat_follows_the_colder_corner(power):
    heater_w = 2.0 / 0.95
    for corner, factor in (("nominal", 1.0), ("pessimistic", power.corner("pessimistic").load_factor)):
        idle = power.idle(corner)
        on = idle.load_w > 0.9 * heater_w * factor
        quiet = idle.load_w < 3.0 * factor
        assert np.array_equal(on[quiet], idle.battery_c[quiet] < 14.0)
    assert power.idle("pessimistic").battery_c.max() < power.idle("nominal").battery_c.max()

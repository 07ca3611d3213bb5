"""Body axes: exact where the law says so, as near as can be where it cannot, and the sphere's means when tumbling."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.mission.pointing import Law, Pointing
from planner.sky.attitude import body_axes, cos_incidence, off_axis_deg, slew_time_s
from planner.sky.frames import inertial_velocity_km_s
from planner.units import AU_KM, unit_vector

# Double precision over the products of a few unit vectors.
ROUNDING = 1e-12
ROUNDING_DEG = 1e-6
POSITION = np.array([7000.0, 0.0, 0.0])
VELOCITY = np.array([0.0, 7.5 - 7000 * 7.292115e-5, 0.0])  # 7.5 km/s along y seen from space
SUN = AU_KM * np.array([0.6, 0.0, 0.8])
STATION = np.array([6300.0, 500.0, 700.0])
LAWS = ("nadir", "sun", "station", "velocity")

vectors = st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda v: np.linalg.norm(v) > 0.1)


def directions():
    return {
        "nadir": -unit_vector(POSITION),
        "sun": unit_vector(SUN - POSITION),
        "station": unit_vector(STATION - POSITION),
        "velocity": np.array([0.0, 1.0, 0.0]),
        "orbit normal": np.array([0.0, 0.0, 1.0]),
    }


def axes_of(law: Law):
    return body_axes(law, POSITION, VELOCITY, SUN, STATION)


@pytest.mark.parametrize("name", LAWS)
def test_the_first_axis_stands_exactly_on_its_target(name):
    axes = axes_of(Law(law=name, axis=(0.0, 0.6, 0.8), second_target="orbit normal"))
    assert off_axis_deg(axes, (0.0, 0.6, 0.8), directions()[name]) < ROUNDING_DEG


@given(st.sampled_from(LAWS), st.sampled_from(["nadir", "sun", "velocity", "orbit normal"]), vectors, vectors)
def test_axes_are_a_rotation_and_the_second_axis_is_as_near_as_it_can_be(name, second, axis, second_axis):
    if np.linalg.norm(np.cross(axis, second_axis)) < 0.05 or name == second:
        return
    axes = axes_of(Law(law=name, axis=axis, second_axis=second_axis, second_target=second))
    assert axes @ axes.T == pytest.approx(np.eye(3), abs=ROUNDING)
    assert np.linalg.det(axes) == pytest.approx(1.0)
    target = directions()[second]
    best = off_axis_deg(axes, second_axis, target)
    first = directions()[name]
    for turn_deg in (-5.0, 5.0):  # turned about the first axis it can only be farther off
        angle = np.radians(turn_deg)
        pointed = unit_vector(second_axis) @ axes
        turned = (
            pointed * np.cos(angle)
            + np.cross(first, pointed) * np.sin(angle)
            + first * (first @ pointed) * (1 - np.cos(angle))
        )
        assert np.degrees(np.arccos(np.clip(turned @ target, -1, 1))) >= best - 1e-5


def test_nadir_with_the_defaults_is_the_orbital_frame():
    axes = axes_of(Law(law="nadir"))
    assert axes[2] == pytest.approx([-1, 0, 0], abs=ROUNDING)  # body z down
    assert axes[0] == pytest.approx([0, 1, 0], abs=ROUNDING)  # body x along the velocity seen from space
    assert axes[1] == pytest.approx([0, 0, -1], abs=ROUNDING)


def test_velocity_is_the_one_seen_from_space():
    assert unit_vector(inertial_velocity_km_s(POSITION, VELOCITY)) == pytest.approx([0, 1, 0])
    leaning = np.array([0.0, 1.0, 5.0])
    axes = body_axes(Law(law="velocity", second_target="nadir"), POSITION, leaning, SUN)
    assert off_axis_deg(axes, (0, 0, 1), leaning) > 5.0


def test_targets_in_one_line_fall_back_on_the_orbits_normal():
    over_the_sun = body_axes(Law(law="nadir", second_target="sun"), POSITION, VELOCITY, np.array([AU_KM, 0, 0]))
    assert over_the_sun @ over_the_sun.T == pytest.approx(np.eye(3), abs=ROUNDING)
    assert off_axis_deg(over_the_sun, (1, 0, 0), np.array([0.0, 0, 1.0])) < ROUNDING_DEG
    along_the_normal = body_axes(
        Law(law="sun", second_target="orbit normal"), POSITION, VELOCITY, POSITION + np.array([0, 0, AU_KM])
    )
    assert off_axis_deg(along_the_normal, (1, 0, 0), np.array([0.0, 1.0, 0])) < ROUNDING_DEG


def test_many_states_give_what_each_gives():
    states = np.tile(POSITION, (5, 1)) + np.arange(15).reshape(5, 3), np.tile(VELOCITY, (5, 1)), np.tile(SUN, (5, 1))
    law = Law(law="station", second_target="sun")
    many = body_axes(law, *states, STATION)
    for k in range(5):
        assert many[k] == pytest.approx(body_axes(law, *(part[k] for part in states), STATION), abs=ROUNDING)


def test_the_station_law_needs_a_station():
    with pytest.raises(ValueError, match='station_km must be given for the law "station", got None'):
        body_axes(Law(law="station", second_target="sun"), POSITION, VELOCITY, SUN)


def test_tumbling_has_no_axes_and_the_means_of_the_sphere():
    assert body_axes(Law(law="tumbling"), POSITION, VELOCITY, SUN) is None
    rng = np.random.default_rng(3)
    normals = unit_vector(rng.normal(size=(200_000, 3)))
    sun = np.array([[0.0, 0.6, 0.8]])
    three_sigma = 3 * 0.5 / np.sqrt(len(normals))
    assert cos_incidence(None, (1, 0, 0), sun)[0] == pytest.approx(
        np.maximum(normals @ sun[0], 0).mean(), abs=three_sigma
    )
    assert off_axis_deg(None, (1, 0, 0), sun)[0] == pytest.approx(
        np.degrees(np.arccos(normals @ sun[0])).mean(), abs=np.degrees(three_sigma) * 2
    )


def test_incidence_is_the_cosine_and_never_below_nothing():
    axes = axes_of(Law(law="sun", second_target="nadir"))
    sun = SUN - POSITION
    assert cos_incidence(axes, (0, 0, 1), sun) == pytest.approx(1.0)
    assert cos_incidence(axes, (0, 0, -1), sun) == 0.0
    assert cos_incidence(axes, (0, np.sin(1.0), np.cos(1.0)), sun) == pytest.approx(np.cos(1.0))


@pytest.mark.parametrize("angle_deg", [0.0, 1e-4, 30.0, 180.0, 359.0])
def test_off_axis_angles_hold_for_small_ones_too(angle_deg):
    angle = np.radians(angle_deg)
    seen = off_axis_deg(np.eye(3), (0, 0, 5.0), np.array([0, np.sin(angle), np.cos(angle)]))
    assert seen == pytest.approx(min(angle_deg, 360 - angle_deg), rel=1e-6, abs=1e-9)


@pytest.mark.parametrize(("angle_deg", "seconds"), [(0.0, 0.0), (90.0, 55.0), (180.0, 100.0)])
def test_slewing_takes_the_angle_over_the_rate_and_settling(angle_deg, seconds):
    angle = np.radians(angle_deg)
    turned = np.array([[1, 0, 0], [0, np.cos(angle), np.sin(angle)], [0, -np.sin(angle), np.cos(angle)]])
    pointing = Pointing(slew_rate_deg_s=2.0, settle_s=10.0)
    assert slew_time_s(pointing, np.eye(3), turned) == pytest.approx(seconds)
    assert slew_time_s(pointing, np.eye(3)[None], turned[None])[0] == pytest.approx(seconds)


def test_slewing_out_of_a_tumble_takes_the_longest_turn():
    pointing = Pointing(slew_rate_deg_s=2.0, settle_s=10.0)
    assert list(slew_time_s(pointing, None, np.tile(np.eye(3), (2, 1, 1)))) == [100.0, 100.0]
    assert slew_time_s(pointing, None, None) == 0.0

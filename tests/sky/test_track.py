"""Tracks: between grid points as at them, in every frame, and to the edges of what elements allow."""

from datetime import timedelta

import numpy as np
import pytest
from hypothesis import given, settings
from sky_examples import DAY_S, KINDS, SAMPLES, START, Truth, clock_of, element_set, elements_of, orbits, station
from skyfield.framelib import ICRS_to_J2000, itrs

from planner.errors import InputError
from planner.mission.elements import read_elements
from planner.mission.orbit import Ephemeris, Segment
from planner.sky.clock import Clock
from planner.sky.frames import acceleration_km_s2, inertial_velocity_km_s, moments
from planner.sky.propagate import states
from planner.sky.track import Track, track_elements

# What the track promises between its grid points; the promise to the user is ten metres of range.
A_METRE_KM = 1e-3
# SGP4's own velocity is not quite the rate of its position: within this in round low orbits (measured).
SGP4_VELOCITY_KM_S = 6e-5
# The flattening of the Earth, which the acceleration neglects, is this share of gravity in low orbit.
FLATTENING_SHARE = 2e-3
# Hermite interpolation of degree 9 at 3 minutes carries the same flaw of SGP4's velocity, over a longer step.
THREE_METRES_KM = 3e-3


def full_chain_km(elements, time_s):
    truth = Truth(clock_of(), elements, station())
    at = truth.satellite.at(moments(truth.clock, time_s))
    position, velocity = at.frame_xyz_and_velocity(itrs)
    return position.km.T, velocity.km_per_s.T


@pytest.mark.parametrize("kind", KINDS)
def test_a_track_is_skyfields_full_chain_between_its_points_too(kind):
    clock, elements = clock_of(), elements_of(kind)
    track = track_elements(clock, elements.name, elements)
    time_s = np.sort(np.random.default_rng(1).uniform(0, clock.span_s, 4000))
    theirs_km, _ = full_chain_km(elements, time_s)
    assert np.linalg.norm(track.at(time_s)[0] - theirs_km, axis=1).max() < A_METRE_KM


def test_velocity_is_skyfields_in_round_low_orbit():
    elements, clock = elements_of("marshlight"), clock_of()
    time_s = np.linspace(0, clock.span_s, 3000)
    ours = track_elements(clock, elements.name, elements).at(time_s)[1]
    assert np.abs(ours - full_chain_km(elements, time_s)[1]).max() < SGP4_VELOCITY_KM_S


@settings(max_examples=25)
@given(orbits())
def test_any_orbit_is_within_a_metre_between_grid_points(elements):
    clock = clock_of(1.0)
    track = track_elements(clock, "any", elements)
    middle_s = (track.time_s[1:] + track.time_s[:-1]) / 2
    middle_s = middle_s[(middle_s > 0) & (middle_s < clock.span_s)]
    position_km, _, _ = states(clock, "any", elements, middle_s)
    assert np.linalg.norm(track.at(middle_s)[0] - position_km, axis=1).max() < A_METRE_KM


def test_velocity_is_the_rate_of_position():
    elements = elements_of("molniya_type")
    track = track_elements(clock_of(), "m", elements)
    time_s = np.linspace(1000, 500_000, 700)
    rate = (track.at(time_s + 0.1)[0] - track.at(time_s - 0.1)[0]) / 0.2
    assert track.at(time_s)[1] == pytest.approx(rate, abs=1e-7)  # a tenth of a millimetre a second


def test_a_scalar_gives_what_a_one_element_array_gives():
    track = track_elements(clock_of(1.0), "t", element_set())
    alone, array = track.at(1234.5), track.at(np.array([1234.5]))
    assert alone[0].shape == (3,)
    assert np.array_equal(alone[0], array[0][0])
    assert np.array_equal(alone[1], array[1][0])


def test_moments_outside_the_grid_are_refused():
    track = track_elements(clock_of(1.0), "t", element_set())
    with pytest.raises(ValueError, match=r"time_s must lie within -6048.000 to 92448.000 s, got 864000.000 to"):
        track.at(10 * DAY_S)


def test_the_grid_reaches_a_revolution_beyond_the_span_at_both_ends():
    track = track_elements(clock_of(1.0), "t", element_set())
    assert track.time_s[0] <= -track.period_s
    assert track.time_s[-1] >= DAY_S + track.period_s


def test_steps_follow_the_motion():
    step_s = np.diff(track_elements(clock_of(), "m", elements_of("molniya_type")).time_s)
    assert step_s.max() / step_s[step_s > 1].min() > 5
    assert len(track_elements(clock_of(), "g", elements_of("geostationary")).time_s) < 1000


def test_a_satellite_that_decays_inside_the_span_is_told_with_sgp4s_own_words():
    falling = element_set(mean_motion_rev_day=16.4, bstar=0.05, eccentricity=0.0005)
    with pytest.raises(InputError) as caught:
        track_elements(clock_of(), falling.name, falling)
    assert str(caught.value).startswith(
        "TEST: SGP4 refuses the element set of epoch 2026-12-06T18:00:00.000000Z at 2026-"
    )
    assert "decayed" in str(caught.value) or "eccentricity" in str(caught.value)


def test_a_satellite_that_decays_after_the_span_is_no_fault():
    falling = element_set(mean_motion_rev_day=16.4, bstar=0.05, eccentricity=0.0005, epoch=START)
    gone = np.arange(0, 3 * DAY_S, 60.0)
    error, _, _ = falling.sgp4_model().sgp4_array(*clock_of().julian(gone))
    last_s = gone[np.argmax(error != 0)] - 1800.0
    track = track_elements(Clock(START, last_s), "t", falling)
    assert last_s <= track.time_s[-1] < last_s + track.period_s


UNDERGROUND = (1000.0, 0.0, 0.0, 0.0, 1.0, 0.0)  # x, y, z [km], vx, vy, vz [km/s]


def test_drag_that_throws_sgp4_off_is_told():
    dragged = element_set(bstar=-10.0)
    late_s = np.array([94_200.0])
    error, (place_km,), _ = dragged.sgp4_model().sgp4_array(*clock_of().julian(late_s))
    assert not error.any()
    assert np.linalg.norm(place_km) > 1e6
    with pytest.raises(InputError, match=r"^T: the TLE file's orbit must stay about the Earth, got \S+ km from its"):
        states(clock_of(), "T", dragged, late_s)


def test_a_track_ends_with_the_span_where_the_orbit_ends_beyond_it():
    message = ephemeris_in("TEME")
    (segment,) = message.segment
    astray = segment.model_copy(update={"state": (UNDERGROUND,) * 30 + segment.state[30:]})  # to 23:30
    track = track_elements(clock_of(1.0), "e", message.model_copy(update={"segment": (astray,)}))
    assert track.time_s[0] == 0.0
    assert track.time_s[-1] > DAY_S


def test_a_state_astray_inside_the_span_is_told():
    message = ephemeris_in("TEME")
    (segment,) = message.segment
    middle = len(segment.state) // 2
    state = (*segment.state[:middle], UNDERGROUND, *segment.state[middle + 1 :])
    astray = message.model_copy(update={"segment": (segment.model_copy(update={"state": state}),)})
    with pytest.raises(InputError, match=r"^e: the OEM file's orbit must stay about the Earth, got \S+ km from its"):
        track_elements(clock_of(1.0), "e", astray)


def test_velocity_from_space_and_acceleration():
    track = track_elements(clock_of(1.0), "t", element_set())
    position, velocity = track.at(np.array([5000.0]))
    speed = np.linalg.norm(inertial_velocity_km_s(position, velocity))
    # Vis-viva for a circle at that radius; e = 0.001 and J2 leave 0.2 %.
    assert speed == pytest.approx(np.sqrt(398600.4418 / np.linalg.norm(position)), rel=0.003)
    rate = (track.at(np.array([5010.0]))[1] - track.at(np.array([4990.0]))[1]) / 20
    assert np.linalg.norm(acceleration_km_s2(position, velocity) - rate) < FLATTENING_SHARE * 8e-3


# --- ephemerides -----------------------------------------------------------------------------------------------------


def ephemeris_in(frame: str, interpolation="LAGRANGE", degree=9, step_s=120.0) -> Ephemeris:
    """States of MARSHLIGHT-1 from 22:00 on the day before, for 28 hours, by skyfield alone."""
    elements = elements_of("marshlight")
    clock = Clock(START - timedelta(hours=2), 28 * 3600.0)
    time_s = np.arange(0, 28 * 3600 + 1, step_s)
    truth = Truth(clock, elements, station())
    at = truth.satellite.at(moments(clock, time_s))
    if frame == "TEME":
        _, position, velocity = elements.sgp4_model().sgp4_array(*clock.julian(time_s))
    elif frame == "ITRF":
        position, velocity = (
            part.T for part in (x.km if hasattr(x, "km") else x.km_per_s for x in at.frame_xyz_and_velocity(itrs))
        )
    else:
        turned = ICRS_to_J2000 if frame == "EME2000" else np.eye(3)
        position, velocity = ((turned @ part).T for part in (at.position.km, at.velocity.km_per_s))
    state = np.concatenate([position, velocity], axis=1)
    moment = tuple(clock.datetime(t) for t in time_s)
    segment = Segment(
        frame=frame, interpolation=interpolation, degree=degree, usable_from=moment[0], usable_to=moment[-1],
        moment=moment, state=tuple(map(tuple, state.tolist())),
    )  # fmt: skip
    return Ephemeris(name="MARSHLIGHT-1", epoch=START, segment=(segment,))


@pytest.mark.parametrize("frame", ["TEME", "ITRF", "EME2000", "GCRF"])
@pytest.mark.parametrize("method", ["LAGRANGE", "HERMITE"])
def test_an_ephemeris_in_any_frame_gives_the_track_of_the_elements_it_was_made_from(frame, method):
    clock = clock_of(1.0)
    theirs = track_elements(clock, "e", ephemeris_in(frame, method))
    ours = track_elements(clock, "t", elements_of("marshlight"))
    time_s = np.linspace(0, DAY_S, 2000)
    assert np.linalg.norm(theirs.at(time_s)[0] - ours.at(time_s)[0], axis=1).max() < THREE_METRES_KM


def test_the_sample_message_gives_the_track_of_the_sample_elements():
    clock = clock_of(1.0)
    (message,) = read_elements(SAMPLES / "marshlight.oem", START).values()
    time_s = np.linspace(0, DAY_S, 2000)
    ours = track_elements(clock, "t", elements_of("marshlight")).at(time_s)
    theirs = track_elements(clock, "e", message).at(time_s)
    assert np.linalg.norm(theirs[0] - ours[0], axis=1).max() < THREE_METRES_KM
    assert np.abs(theirs[1] - ours[1]).max() < SGP4_VELOCITY_KM_S


def test_straight_lines_between_states_where_the_message_asks_for_them():
    clock = clock_of(0.5)
    message = ephemeris_in("ITRF", "LINEAR")
    position_km, _, _ = states(clock, "e", message, np.array([60.0]))  # halfway between two states
    rows = np.array(message.segment[0].state)
    assert position_km[0] == pytest.approx((rows[60, :3] + rows[61, :3]) / 2, abs=1e-9)


def test_an_ephemeris_that_does_not_cover_the_span_says_where_it_ends():
    with pytest.raises(InputError) as caught:
        track_elements(clock_of(2.0), "MARSHLIGHT-1", ephemeris_in("TEME"))
    assert str(caught.value) == (
        "MARSHLIGHT-1: the ephemeris must cover the whole span, 2026-12-07T00:00:00.000Z to 2026-12-09T00:00:00.000Z,"
        " got 2026-12-06T22:00:00Z to 2026-12-08T02:00:00Z, and no state at 2026-12-09T00:00:00.000Z"
    )


def test_an_ephemeris_of_exactly_the_span_is_enough():
    message = ephemeris_in("TEME")
    (segment,) = message.segment
    exact = segment.model_copy(update={"usable_from": START, "usable_to": START + timedelta(days=1)})
    track = track_elements(clock_of(1.0), "e", message.model_copy(update={"segment": (exact,)}))
    assert (track.time_s[0], track.time_s[-1]) == (0.0, DAY_S)
    ours = track_elements(clock_of(1.0), "t", elements_of("marshlight"))
    edge_s = np.concatenate([np.linspace(0, 600, 50), np.linspace(DAY_S - 600, DAY_S, 50)])
    assert np.linalg.norm(track.at(edge_s)[0] - ours.at(edge_s)[0], axis=1).max() < 5 * A_METRE_KM  # one-sided ends


def test_the_shape_of_an_orbit_from_its_states():
    message = ephemeris_in("ITRF")
    mean = elements_of("marshlight")
    # Osculating against mean elements: J2 moves the axis by some 10 km within a revolution (0.2 % of the motion).
    assert message.mean_motion_rev_day == pytest.approx(mean.mean_motion_rev_day, rel=0.005)
    assert message.inclination_deg == pytest.approx(mean.inclination_deg, abs=0.05)
    assert message.eccentricity < 0.005


def test_a_track_is_made_of_plain_arrays():
    track = track_elements(clock_of(1.0), "t", element_set())
    assert isinstance(track, Track)
    assert track.position_km.shape == track.velocity_km_s.shape == (len(track.time_s), 3)
    assert track.position_km.dtype == np.float64

"""Ephemeris messages whose lines are sound but whose states contradict each other or leave too much between them."""

from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.errors import InputError
from planner.mission.elements import read_elements
from planner.mission.interpolation import errors_km, interpolate, velocity_misfits
from planner.mission.orbit import Ephemeris, Segment

SAMPLES = Path(__file__).parents[2] / "tle_samples"
AT = datetime(2026, 12, 7, tzinfo=UTC)
BEGIN = datetime(2026, 12, 6, 22, tzinfo=UTC)
HEAD, _, STATES = (SAMPLES / "marshlight.oem").read_text().partition("META_STOP\n\n")
ROWS = STATES.splitlines()
GM_KM3_S2 = 398600.4418  # WGS 84


def read(tmp_path, text: str) -> Ephemeris:
    path = tmp_path / "states.oem"
    path.write_text(text)
    (only,) = read_elements(path, AT).values()
    return only


def faults_of(tmp_path, text: str) -> list[str]:
    with pytest.raises(InputError) as caught:
        read(tmp_path, text)
    return [fault.removeprefix(f"{tmp_path / 'states.oem'}: ") for fault in caught.value.faults]


def message(rows, head=HEAD) -> str:
    return head + "META_STOP\n" + "\n".join(rows) + "\n"


def scaled(share: float, rows=ROWS) -> list[str]:
    """The rows with velocities times a share."""
    words = [row.split() for row in rows]
    return [" ".join([*row[:4], *(f"{float(v) * share:.9f}" for v in row[4:])]) for row in words]


def kepler(axis_km: float, eccentricity: float, time_s):
    """States (n, 6) of Kepler's orbit in its plane, perigee at 0, by Newton's method on Kepler's equation."""
    rate = np.sqrt(GM_KM3_S2 / axis_km**3)
    mean = rate * np.asarray(time_s)
    anomaly = mean + eccentricity * np.sin(mean)
    for _ in range(50):
        step = (anomaly - eccentricity * np.sin(anomaly) - mean) / (1 - eccentricity * np.cos(anomaly))
        anomaly = anomaly - step
    turned = rate / (1 - eccentricity * np.cos(anomaly))
    flat = np.sqrt(1 - eccentricity**2)
    zero = np.zeros_like(mean)
    return axis_km * np.stack(
        [
            np.cos(anomaly) - eccentricity, flat * np.sin(anomaly), zero,
            -np.sin(anomaly) * turned, flat * np.cos(anomaly) * turned, zero,
        ],
        axis=1,
    )  # fmt: skip


def segment(state, step_s: float, method="HERMITE", degree=7) -> Segment:
    moment = tuple(BEGIN + timedelta(seconds=step_s * k) for k in range(len(state)))
    return Segment(
        frame="TEME", interpolation=method, degree=degree, usable_from=moment[0], usable_to=moment[-1], moment=moment,
        state=tuple(map(tuple, state.tolist())),
    )  # fmt: skip


def kepler_message(axis_km: float, eccentricity: float, step_s: int, method: str, degree: int) -> str:
    """Thirteen hours of Kepler's orbit, from a quarter hour before perigee."""
    time_s = np.arange(0.0, 13 * 3600.0, step_s)
    state = kepler(axis_km, eccentricity, time_s - 900.0)
    rows = [
        f"{BEGIN + timedelta(seconds=t):%Y-%m-%dT%H:%M:%S} " + " ".join(f"{x:.9f}" for x in row)
        for t, row in zip(time_s, state, strict=True)
    ]
    head = HEAD.replace("= HERMITE", f"= {method}").replace("DEGREE = 9", f"DEGREE = {degree}")
    return message(rows, head)


# --- how far apart states may stand ----------------------------------------------------------------------------------


@given(st.floats(60, 600), st.floats(6900, 42_000))
def test_the_error_of_straight_lines_is_the_sagitta(step_s, axis_km):
    """The height of an arc over its chord, r (1 - cos(angle / 2)): geometry."""
    state = kepler(axis_km, 0.0, step_s * np.arange(40))
    sagitta_km = axis_km * (1 - np.cos(np.sqrt(GM_KM3_S2 / axis_km**3) * step_s / 2))
    # twice the angle, over which states are left out, has a fourth derivative that a straight line's remainder has not
    assert errors_km(segment(state, step_s, "LINEAR")) == pytest.approx(sagitta_km, rel=0.05)


@given(
    st.sampled_from([("LAGRANGE", 3), ("LAGRANGE", 5), ("LAGRANGE", 7), ("HERMITE", 3), ("HERMITE", 5)]),
    st.floats(0.04, 0.08),
    st.floats(0.0, 0.1),
)
def test_the_error_told_is_that_of_the_middles_of_the_intervals(method, share, eccentricity):
    """Against Kepler's orbit itself, for steps of 1/25 to 1/12 of a revolution: within a factor of three."""
    axis_km = 7000.0 / (1 - eccentricity)
    step_s = share * 2 * np.pi * np.sqrt(axis_km**3 / GM_KM3_S2)
    time_s = step_s * np.arange(60)
    states = kepler(axis_km, eccentricity, time_s)
    one = segment(states, step_s, *method)
    at_s = np.array([(moment - BEGIN).total_seconds() for moment in one.moment])
    middle_s = (at_s[1:] + at_s[:-1]) / 2
    true_km = kepler(axis_km, eccentricity, middle_s)[:, :3]
    missed_km = np.linalg.norm(interpolate(one, at_s, states, middle_s) - true_km, axis=1).max()
    assert missed_km / 3 < errors_km(one).max() < 3 * missed_km


@pytest.mark.parametrize("keep_every", [1, 2, 3, 5])
def test_states_a_few_minutes_apart_are_taken(tmp_path, keep_every):
    taken = read(tmp_path, message(ROWS[::keep_every]))
    assert taken.interpolation_error_km < 0.1


def test_states_that_leave_kilometres_open_are_taken_and_say_so(tmp_path):
    assert 1.0 < read(tmp_path, message(ROWS[::8])).interpolation_error_km < 10.0


@pytest.mark.parametrize("step_s", [60, 180, 300, 600])
@pytest.mark.parametrize(("method", "degree"), [("HERMITE", 5), ("HERMITE", 7), ("HERMITE", 9)])
def test_half_day_orbits_that_dive_to_a_low_perigee_are_taken(tmp_path, step_s, method, degree):
    taken = read(tmp_path, kepler_message(26_560.0, 0.722, step_s, method, degree))
    assert taken.interpolation_error_km < 2.0


@pytest.mark.parametrize("step_s", [60, 300, 600])
def test_low_orbits_by_the_standards_default_are_taken(tmp_path, step_s):
    assert read(tmp_path, kepler_message(6918.0, 0.001, step_s, "LAGRANGE", 7)).interpolation_error_km < 10.0


def test_states_too_far_apart_for_their_interpolation(tmp_path):
    (fault,) = faults_of(tmp_path, message(ROWS[::15]))
    assert fault == (
        "segment at line 6: HERMITE of degree 9 must give positions within 10 km between the states, got about 344 km"
        " off between 2026-12-08T01:00:00.000000Z and 2026-12-08T01:45:00.000000Z, judged by leaving states out;"
        " give states closer together"
    )


def test_straight_lines_over_three_minutes(tmp_path):
    (fault,) = faults_of(tmp_path, message(ROWS, HEAD.replace("HERMITE", "LINEAR")))
    assert "LINEAR must give positions within 10 km between the states, got about 33.7 km off between" in fault
    assert fault.endswith("give states closer together or INTERPOLATION = HERMITE of degree 7")


def test_states_over_half_a_revolution_apart(tmp_path):
    found = faults_of(tmp_path, message(ROWS[::45]))
    assert found[0] == (
        "line 17: must follow the state before within half a revolution, 48 min, got 135 min;"
        " give states closer together"
    )
    assert len(found) == 12


def test_states_a_whole_revolution_apart_look_like_a_satellite_that_stands_still(tmp_path):
    period_s = 5727.0
    state = kepler(6918.0, 0.001, period_s * np.arange(12))
    assert np.ptp(state[:, 0]) < 100.0  # km: hardly moved
    rows = [
        f"{BEGIN + timedelta(seconds=period_s * k):%Y-%m-%dT%H:%M:%S} " + " ".join(f"{x:.6f}" for x in row)
        for k, row in enumerate(state)
    ]
    assert "within half a revolution, 48 min, got 95 min" in faults_of(tmp_path, message(rows))[0]


def test_what_lies_outside_the_useable_span_is_of_no_account(tmp_path):
    sparse = [*ROWS[:270:15], *ROWS[270:]]
    head = HEAD.replace("INTERPOLATION =", f"USEABLE_START_TIME = {ROWS[300].split()[0]}\nINTERPOLATION =", 1)
    assert read(tmp_path, message(sparse, head)).interpolation_error_km < 0.01
    assert len(faults_of(tmp_path, message(sparse))) == 1


def test_two_states_say_nothing_of_each_other(tmp_path):
    (fault,) = faults_of(tmp_path, message(ROWS[:2]))
    assert fault == "segment at line 6: must hold three states or more, got 2"


# --- velocities ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("method", ["HERMITE", "LAGRANGE"])
def test_velocities_that_are_not_the_rates_of_the_positions(tmp_path, method):
    (fault,) = faults_of(tmp_path, message(scaled(0.98), HEAD.replace("HERMITE", method)))
    assert fault.startswith(
        "segment at line 6: velocities must be the rates of the positions within 1 % of circular speed, got 2 % at 202"
    )
    assert fault.endswith("; are they in km/s and in REF_FRAME?")


@given(st.floats(60, 600), st.floats(0, 0.73))
def test_velocities_of_keplers_orbits_fit(step_s, eccentricity):
    axis_km = 6900.0 / (1 - eccentricity)
    assert velocity_misfits(segment(kepler(axis_km, eccentricity, step_s * np.arange(90)), step_s)).max() < 0.005


# --- segments that overlap -------------------------------------------------------------------------------------------


def two_segments(first, second, second_head=HEAD) -> str:
    """The rows as two segments, each from its first row to its last."""
    text = HEAD.partition("META_START")[0]
    for head, rows in ((HEAD, first), (second_head, second)):
        meta = "META_START" + head.partition("META_START")[2]
        meta = meta.replace("START_TIME = 2026-12-06T22:00:00.000", f"START_TIME = {rows[0].split()[0]}")
        text += meta.replace("STOP_TIME = 2026-12-08T02:00:00.000", f"STOP_TIME = {rows[-1].split()[0]}")
        text += "META_STOP\n" + "\n".join(rows) + "\n"
    return text


def later(rows, shift=1) -> list[str]:
    """The rows with the states of the ones `shift` further on."""
    moved = zip(rows, ROWS[ROWS.index(rows[0]) + shift :], strict=False)
    return [f"{row.split()[0]} {other.split(maxsplit=1)[1]}" for row, other in moved]


def test_segments_that_agree_where_they_overlap(tmp_path):
    assert len(read(tmp_path, two_segments(ROWS[:300], ROWS[200:])).segment) == 2


def test_segments_that_contradict_each_other(tmp_path):
    """Three minutes of flight at 7.59 km/s are 1366 km."""
    (fault,) = faults_of(tmp_path, two_segments(ROWS[:300], later(ROWS[200:500])))
    assert fault == (
        "MARSHLIGHT-1: segments that overlap must agree within 1 km, got 1366 km from 2026-12-07T08:00:00.000000Z to"
        " 2026-12-07T12:57:00.000000Z; end the first there with USEABLE_STOP_TIME, or leave one of them out"
    )


def test_contradiction_at_a_touching_end_is_a_manoeuvre(tmp_path):
    assert len(read(tmp_path, two_segments(ROWS[:301], later(ROWS[300:500]))).segment) == 2


def test_a_segment_inside_another_is_compared_with_it(tmp_path):
    third = two_segments(ROWS[:3], later(ROWS[300:400])).split("META_START")[2]
    text = two_segments(ROWS, ROWS[100:120]) + "META_START" + third
    (fault,) = faults_of(tmp_path, text)
    assert "segments that overlap must agree within 1 km" in fault
    assert "from 2026-12-07T13:00:00" in fault


def test_segments_in_two_frames_must_not_overlap(tmp_path):
    (fault,) = faults_of(tmp_path, two_segments(ROWS[:300], ROWS[200:], HEAD.replace("EME2000", "GCRF")))
    assert fault.startswith(
        "MARSHLIGHT-1: segments that overlap must be in one frame, got two from 2026-12-07T08:00:00"
    )


# --- what is written twice, and numbers that are none ----------------------------------------------------------------


def test_a_keyword_twice(tmp_path):
    twice = HEAD.replace("REF_FRAME = EME2000", "REF_FRAME = EME2000\nREF_FRAME = TEME")
    twice = twice.replace("CREATION_DATE", "CREATION_DATE = 2026-12-06T20:00:00\nCREATION_DATE")
    assert faults_of(tmp_path, message(ROWS, twice)) == [
        "line 3: CREATION_DATE must stand once, got '2026-12-06T19:00:00'",
        "line 11: REF_FRAME must stand once in the metadata of a segment, got 'REF_FRAME = TEME'",
    ]


@pytest.mark.parametrize("text", ["-4_230.214858", "−4230.214858", "-４230.214858", "nan", "0x10"])
def test_a_number_that_only_looks_like_one(tmp_path, text):
    row = ROWS[0].replace("-4230.214858", text)
    (fault,) = faults_of(tmp_path, message([row, *ROWS[1:]]))
    assert fault.startswith("line 16: must be a date and six or nine numbers: x y z [km], vx vy vz [km/s], ..., got")


def test_a_date_in_digits_of_another_script(tmp_path):
    row = ROWS[0].replace("2026", "２０２６")
    (fault,) = faults_of(tmp_path, message([row, *ROWS[1:]]))
    assert fault.startswith("line 16: must be a date and six or nine numbers")

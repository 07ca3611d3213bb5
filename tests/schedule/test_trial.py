"""Weeks changed by hand: what is taken out is out, what is put in is in, everything else follows."""

from pathlib import Path

import pytest

import planner
from planner.errors import InputError
from planner.schedule.flown import Flown
from planner.schedule.result import prepared
from planner.schedule.trial import Sketch, TrialWeek, changed_by_hand, longest_session, put_in, week_of

MISSION_FILE = Path(__file__).parents[2] / "missions" / "marshlight.toml"
HIGH, LOW = "K high rate", "S low rate"
A_MILLISECOND_S = 1e-3  # the resolution of times in files


@pytest.fixture(scope="module")
def mission():
    return planner.load_mission(MISSION_FILE).model_copy(update={"days": 1.0})


@pytest.fixture(scope="module")
def week(mission):
    return prepared(mission)


@pytest.fixture(scope="module")
def usable(week):
    """Pass ids on which the high rate can be sent."""
    found = []
    for pass_id in week.sky.passes.pass_id:
        try:
            found.append(longest_session(week, pass_id, HIGH))
        except InputError:
            continue
    return found


def test_a_moved_floor_shares_the_geometry_and_nothing_else_changes(mission, week):
    lower = week_of(mission.with_changes(policy={"soc_floor_pct": 40.0}), week)
    assert lower.sky is week.sky
    assert lower.powers is week.powers
    assert lower.mission.policy.soc_floor_pct == 40.0


def test_another_margin_is_another_link(mission, week):
    stricter = week_of(mission.with_changes(policy={"link_margin_db": 6.0}), week)
    assert stricter.links is not week.links


def test_the_longest_session_stays_in_its_window_and_on_time(week, usable):
    for session in usable:
        row = week.row_of[session.pass_id]
        assert session.tx_on_s >= week.sky.passes.aos_s[row] - A_MILLISECOND_S
        assert session.tx_off_s <= week.sky.passes.los_s[row] + A_MILLISECOND_S
        assert session.duration_s <= 660 + A_MILLISECOND_S


def test_a_pass_without_a_link_is_refused_with_the_reason(week):
    rows = [r for r, station in enumerate(week.sky.passes.station) if station == "Cape Tern"]
    pass_id = week.sky.passes.pass_id[rows[0]]
    with pytest.raises(InputError, match=f"K high rate on {pass_id}: station does not hear K band"):
        longest_session(week, pass_id, HIGH)


def test_an_unknown_pass_is_refused(week):
    with pytest.raises(InputError, match="pass must be in the span, got 'nowhere'"):
        longest_session(week, "nowhere", HIGH)


def test_dropping_and_keeping_are_each_others_reverse(week, usable):
    sessions = tuple(sorted(usable[:3]))
    without = changed_by_hand(week, sessions, drop=[sessions[1].pass_id])
    assert without.sessions == (sessions[0], sessions[2])
    again = changed_by_hand(week, without.sessions, keep=[(sessions[1].pass_id, HIGH)])
    assert again.sessions == sessions


def test_a_kept_session_that_is_there_is_left_as_it_is(week, usable):
    shorter = usable[0].__class__(**vars(usable[0]) | {"tx_off_s": usable[0].tx_on_s + 100})
    kept = changed_by_hand(week, [shorter], keep=[(shorter.pass_id, HIGH)])
    assert kept.sessions == (shorter,)


def test_modes_that_go_together_share_a_pass(week, usable):
    for session in usable:
        try:
            both = put_in(Flown(week, (session,)), session.pass_id, LOW)
        except InputError:
            continue
        assert {s.mode for s in both.sessions} == {HIGH, LOW}
        return
    pytest.fail("no pass of the demo carries both modes")


def test_sessions_of_a_station_that_is_off_go(mission, week, usable):
    off = usable[0].station
    rest = mission.model_copy(update={"stations": tuple(s for s in mission.stations if s.name != off)})
    flown = changed_by_hand(week_of(rest, week), usable)
    assert {session.station for session in flown.sessions} == {s.station for s in usable} - {off}


def test_verdicts_follow_the_hand(week, usable):
    sessions = tuple(sorted(usable[:2]))
    gone = sessions[0].pass_id
    trial = TrialWeek(changed_by_hand(week, sessions, drop=[gone]), None, frozenset([gone]))
    verdict = trial.passes.set_index("pass_id")["verdict"]
    assert verdict[gone] == "dropped"
    assert verdict[sessions[1].pass_id] == "planned"


def test_a_week_changed_by_hand_claims_no_bound(week, usable):
    summary = TrialWeek(changed_by_hand(week, usable[:1])).summary
    assert summary["upper_bound_mbit"] is None
    assert summary["status"] == "changed by hand, not optimised"


def test_the_sketch_says_what_the_whole_says(week, usable):
    trial = TrialWeek(changed_by_hand(week, sorted(usable)[:3]))
    sketch = Sketch(trial)
    for column in sketch.contacts:
        assert list(sketch.contacts[column]) == list(trial.contacts[column])
    for key in ("volume_mbit", "soc_min_pct", "soc_end_pct"):
        assert sketch.summary[key] == pytest.approx(trial.summary[key], abs=6e-4)  # the summary has three decimals

"""What is aboard when a week is planned anew stays as it is; what is new goes up with a contact still to come."""

from datetime import timedelta

import pytest
from referee import moment

import planner
from planner.errors import InputError
from planner.schedule.uplinks import aboard_at, carrier_of

K = "K high rate"


@pytest.fixture(scope="module")
def replan(two_day_mission, two_day_plan):
    """(when, the re-plan): frozen at noon of the first day, a contact that is not aboard dropped."""
    freeze = two_day_mission.start + timedelta(hours=12)
    aboard = aboard_at(two_day_mission, two_day_plan.flown.sessions, 12 * 3600.0).sessions
    free = [s for s in two_day_plan.flown.sessions if s not in aboard and s.mode == K]
    plan = planner.plan_week(
        two_day_mission, previous=two_day_plan.contacts, freeze_until=freeze, drop=[free[0].pass_id]
    )
    return freeze, plan


def test_aboard_is_what_has_begun_what_was_aboard_at_the_start_and_what_went_up_before(two_day_mission, two_day_plan):
    contacts = two_day_plan.contacts.set_index("contact_id")
    freeze = two_day_mission.start + timedelta(hours=1)
    sessions = dict(zip(two_day_plan.contacts["contact_id"], two_day_plan.flown.sessions, strict=True))
    aboard = aboard_at(two_day_mission, tuple(sessions.values()), 3600.0).sessions
    for name, session in sessions.items():
        carrier = contacts.loc[name, "commands_from"]
        begun = moment(contacts.loc[name, "power_on_utc"]) < freeze
        went_up = carrier != "" and moment(contacts.loc[carrier, "power_on_utc"]) < freeze
        assert (session in aboard) == (begun or carrier == "" or went_up)
    assert {True, False} == {session in aboard for session in sessions.values()}


def test_nothing_is_aboard_without_a_freeze_and_only_what_has_begun_where_commands_can_always_change(
    two_day_mission, two_day_plan
):
    sessions = two_day_plan.flown.sessions
    assert aboard_at(two_day_mission, sessions, float("-inf")).sessions == frozenset()
    at_once = two_day_mission.with_changes(policy={"upload_lead_h": None})
    begun = aboard_at(at_once, sessions, 12 * 3600.0).sessions
    assert max(session.tx_on_s for session in begun) < 12.1 * 3600.0


def test_what_is_aboard_stays_and_the_rest_goes_up_later(two_day_mission, two_day_plan, replan):
    freeze, plan = replan
    aboard = aboard_at(two_day_mission, two_day_plan.flown.sessions, 12 * 3600.0).sessions
    assert aboard <= set(plan.flown.sessions)
    for session in set(plan.flown.sessions) - aboard:
        carrier = carrier_of(two_day_mission, plan.flown.sessions, session, 12 * 3600.0)
        assert carrier is not None
        assert two_day_mission.start + timedelta(seconds=carrier.tx_on_s) >= freeze
        assert session.tx_on_s >= carrier.tx_off_s + 6 * 3600.0  # policy.upload_lead_h


def test_an_audit_beside_the_issue_before_finds_what_would_not_be_commanded(two_day_mission, two_day_plan, replan):
    freeze, plan = replan
    told = {"freeze_until": freeze, "previous": two_day_plan.contacts}
    assert planner.audit(two_day_mission, plan.contacts, **told).safe
    later = two_day_plan.contacts["power_on_utc"] > f"{freeze:%Y-%m-%dT%H:%M:%S}"
    at = two_day_plan.contacts[later & (two_day_plan.contacts["commands_from"] == "")].index[0]
    missing = planner.audit(two_day_mission, two_day_plan.contacts.drop(index=at), **told)
    row = two_day_plan.contacts.loc[at]
    assert missing.texts() == [
        f"{row.pass_id}:{row['mode']} is aboard and will be on air from {row.tx_on_utc} to {row.tx_off_utc}, which is"
        " not what these contacts say"
    ]
    fewer = two_day_plan.contacts.drop(index=at)
    late = planner.audit(two_day_mission, two_day_plan.contacts, freeze_until=freeze, previous=fewer)
    assert [text.partition(f"{row.contact_id}: ")[2] for text in late.texts()] == [
        f"no contact with uplink between 48 h and 6 h before it and after {freeze:%Y-%m-%dT%H:%M:%S}.000Z can carry its"
        " commands"
    ]
    with pytest.raises(InputError, match="need the moment by which they were aboard"):
        planner.audit(two_day_mission, plan.contacts, previous=two_day_plan.contacts)


def test_what_went_up_is_told_as_it_went_up(two_day_mission, two_day_plan):
    freeze = two_day_mission.start + timedelta(hours=12)
    before = two_day_plan.contacts.assign(modcods="as_commanded@2026-12-07T00:00:00.000Z")
    plan = planner.plan_week(two_day_mission, previous=before, freeze_until=freeze)
    aboard = aboard_at(two_day_mission, two_day_plan.flown.sessions, 12 * 3600.0).sessions
    told = dict(zip(plan.flown.sessions, plan.contacts["modcods"], strict=True))
    assert {session for session, modcods in told.items() if modcods.startswith("as_commanded")} == aboard


def test_contacts_that_carry_commands_up_lie_in_the_middle_of_their_pass(two_day_mission, two_day_plan):
    """A session that ends a second before LOS loses a day's commands when the lock comes late."""
    mission = two_day_mission.with_changes(policy={"soc_floor_pct": 50.0, "soc_end_pct": 50.0})
    plan = planner.plan_week(mission)
    week = plan.flown.week
    uplinks = [s for s in plan.flown.sessions if s.mode != K]
    assert uplinks
    for session in uplinks:
        middle_s = (session.tx_on_s + session.tx_off_s) / 2
        tca_s = week.sky.passes.tca_s[week.row_of[session.pass_id]]
        assert abs(middle_s - tca_s) <= max(60.0, session.duration_s / 2)


def test_what_is_aboard_cannot_be_dropped(two_day_mission, two_day_plan):
    freeze = two_day_mission.start + timedelta(hours=12)
    later = two_day_plan.contacts[two_day_plan.contacts["power_on_utc"] > f"{freeze:%Y-%m-%dT%H:%M:%S}"]
    asked = later[later["commands_from"] == ""].iloc[0].pass_id
    with pytest.raises(InputError) as caught:
        planner.plan_week(two_day_mission, previous=two_day_plan.contacts, freeze_until=freeze, drop=[asked])
    assert str(caught.value) == (
        f"drop: {asked} stays: its commands are aboard by freeze_until (--freeze-until), and the satellite flies it"
        " unless an uplink contact cancels it; freeze from before that contact to plan without it"
    )

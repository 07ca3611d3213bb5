"""Contacts of a re-plan put back to the times they had."""

from dataclasses import replace

from hypothesis import given
from hypothesis import strategies as st
from referee import moment

import planner
from planner.mission.contacts import Session
from planner.schedule.flown import Flown
from planner.schedule.restore import put_back


def made_up(count: int, later_s: float = 0.0) -> tuple[Session, ...]:
    return tuple(
        Session(1000.0 * k + later_s, 1000.0 * k + later_s + 300, "ONE", "Here", "S", f"one.here.{k}")
        for k in range(count)
    )


@given(st.integers(0, 40), st.sets(st.integers(0, 39)))
def test_all_that_may_go_back_do_and_no_other(count, must_move):
    """Nothing of a week is asked here but its sessions."""
    before, after = made_up(count), made_up(count, later_s=7.0)
    stuck = {session.pass_id for k, session in enumerate(before) if k in must_move}

    def is_good(flown: Flown) -> bool:
        return not any(session in before for session in flown.sessions if session.pass_id in stuck)

    back = put_back(Flown(None, after), before, is_good)
    assert back.sessions == tuple(a if a.pass_id in stuck else b for a, b in zip(after, before, strict=True))


def test_a_new_contact_and_one_that_did_not_move_are_left_alone():
    before = made_up(3)
    after = (*before[:2], replace(before[2], pass_id="one.here.new"))
    assert put_back(Flown(None, after), before, lambda flown: False).sessions == after


def test_a_replan_with_fresh_telemetry_leaves_most_contacts_at_their_times(two_day_mission, two_day_plan):
    """Less charge than thought: some transmissions must be shorter, but a plan made afresh shifts others too."""
    weaker = two_day_mission.with_changes(start_state={"soc_pct": 88.0})
    columns = ["contact_id", "tx_on_utc", "tx_off_utc"]

    def unmoved(plan) -> int:
        times = [set(map(tuple, one.contacts[columns].to_numpy())) for one in (two_day_plan, plan)]
        return len(times[0] & times[1])

    again = planner.plan_week(weaker, previous=two_day_plan.contacts)
    assert unmoved(again) > unmoved(planner.plan_week(weaker))
    assert unmoved(again) >= 0.8 * len(two_day_plan.contacts)
    assert planner.audit(weaker, again.contacts).safe
    assert again.summary["objective"] <= again.summary["objective_bound"]


def test_a_time_before_today_s_guard_is_not_gone_back_to(two_day_mission, two_day_plan):
    """With a wider guard at AOS and LOS the old times lie outside the windows, though inside the pass."""
    careful = two_day_mission.with_changes(policy={"clock_guard_s": 20.0})
    again = planner.plan_week(careful, previous=two_day_plan.contacts)
    times = again.contacts[["aos_utc", "tx_on_utc", "tx_off_utc", "los_utc"]].map(moment)
    assert min((times["tx_on_utc"] - times["aos_utc"]).dt.total_seconds()) >= 20.0
    assert min((times["los_utc"] - times["tx_off_utc"]).dt.total_seconds()) >= 20.0


def test_what_is_fixed_is_not_put_back():
    before, after = made_up(2), made_up(2, later_s=7.0)
    assert put_back(Flown(None, after), before, lambda flown: True, fixed=after[:1]).sessions == (after[0], before[1])

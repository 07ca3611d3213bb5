"""The desk: what is shown follows from the plan and what the hand changed; a refused change leaves no trace."""

import pytest
from bench_examples import HIGH

from planner.errors import InputError
from planner.export.compare import compare_plans
from planner.notebook.desk import LOOK, WEEK, Desk


@pytest.fixture
def desk(mission, plan):
    desk = Desk(mission)
    desk.take(plan)
    return desk


def test_a_plan_is_shown_as_it_is(desk, plan):
    assert desk.week is plan
    assert desk.is_planned
    assert desk.compared_with is None


def test_a_dropped_pass_flies_nothing_and_is_told_apart(desk, plan, flown_pass):
    desk.drop_pass(flown_pass.pass_id)
    assert flown_pass.pass_id not in {session.pass_id for session in desk.week.flown.sessions}
    found = compare_plans(desk.compared_with, desk.sketch)
    assert [flight.pass_id for flight in found.lost] == [flown_pass.pass_id]
    assert not found.gained
    assert desk.sketch.summary["volume_mbit"] < plan.summary["volume_mbit"]


def test_leaving_a_pass_open_brings_its_session_back(desk, plan, flown_pass):
    desk.drop_pass(flown_pass.pass_id)
    desk.leave_open(flown_pass.pass_id)
    assert desk.week is plan


def test_a_kept_pass_is_flown(desk, free_pass):
    desk.keep_pass(free_pass, HIGH)
    assert (free_pass, HIGH) in {(session.pass_id, session.mode) for session in desk.week.flown.sessions}


def test_keep_and_drop_never_name_the_same_pass(desk, free_pass):
    desk.keep_pass(free_pass, HIGH)
    desk.drop_pass(free_pass)
    assert not desk.keep
    desk.keep_pass(free_pass, HIGH)
    assert not desk.drop


def test_a_refused_wish_changes_nothing(desk, mission, plan):
    silent = next(p for p, s in zip(plan.passes["pass_id"], plan.passes["station"], strict=True) if s == "Cape Tern")
    heard = []
    desk.watch(heard.append)
    with pytest.raises(InputError, match="station does not hear K band"):
        desk.keep_pass(silent, HIGH)
    assert (desk.week, desk.keep, heard) == (plan, frozenset(), [])


def test_a_refused_value_changes_nothing(desk, mission, plan):
    with pytest.raises(InputError):
        desk.alter(desk.changes.with_value("policy", "soc_floor_pct", -5.0))
    assert desk.mission == mission
    assert desk.week is plan


def test_a_higher_floor_breaks_the_plan_and_says_where(desk):
    desk.alter(desk.changes.with_value("policy", "soc_floor_pct", 79.0))
    assert any("SoC floor" in fault and "limit 79.00 %" in fault for fault in desk.faults)


def test_a_lower_start_charge_is_felt(desk, plan):
    desk.alter(desk.changes.with_value("start_state", "soc_pct", 80.0))
    assert desk.sketch.summary["soc_min_pct"] < plan.summary["soc_min_pct"]


def test_watchers_hear_what_changed(desk, flown_pass):
    heard = []
    desk.watch(heard.append)
    desk.look_at(flown_pass.pass_id)
    desk.drop_pass(flown_pass.pass_id)
    assert heard == [LOOK, WEEK]


def test_a_pass_opens_in_the_mode_that_flies(desk, plan):
    for session in plan.flown.sessions:
        desk.look_at(session.pass_id)
        assert desk.session() is not None


def test_a_replan_keeps_and_drops_and_is_compared_with_the_plan_before(desk, plan, flown_pass):
    desk.drop_pass(flown_pass.pass_id)
    fresh = desk.replan(lambda stage: None, lambda: False)
    desk.take(fresh)
    assert desk.week is fresh
    assert flown_pass.pass_id not in set(fresh.contacts["pass_id"])
    assert flown_pass.pass_id in set(desk.compared_with.contacts["pass_id"])

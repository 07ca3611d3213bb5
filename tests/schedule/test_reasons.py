"""Why each pass is flown or not: the rule in the way, with its figure."""

import re

from small_missions import smaller, with_station

import planner
from planner.mission.station import Hours
from planner.schedule.candidates import find_candidates
from planner.schedule.result import prepared
from planner.schedule.wishes import Wishes

K = "K high rate"


def reasons(plan) -> dict[str, tuple[str, str]]:
    return {row.pass_id: (row.verdict, row.reason) for row in plan.passes.itertuples()}


def test_every_pass_has_a_verdict_and_a_reason(two_day_plan):
    passes = two_day_plan.passes
    assert set(passes["verdict"]) <= {"planned", "left out", "unusable", "dropped"}
    assert passes["reason"].str.len().min() > 0
    planned = passes[passes["verdict"] == "planned"].set_index("pass_id")["reason"]
    for pass_id, modes in two_day_plan.contacts.groupby("pass_id")["mode"]:
        assert planned[pass_id] == " and ".join(modes)


def refusals(mission) -> set[str]:
    """Why modes cannot fly on passes at all."""
    _, refused = find_candidates(prepared(mission), Wishes())
    assert {refusal.verdict for refusal in refused} <= {"unusable"}
    return {refusal.reason for refusal in refused}


def test_below_margin(marshlight):
    found = refusals(smaller(marshlight, 1, "Vardholm", modes=(K,), policy={"link_margin_db": 40.0}))
    assert found
    pattern = r"link margin reaches \d+\.\d\d dB at \d+ deg, 40 dB asked for"
    assert all(re.fullmatch(pattern, reason) for reason in found)


def test_closed_and_not_heard(marshlight):
    closed = Hours(maintenance=((marshlight.start, marshlight.end),))
    mission = with_station(smaller(marshlight, 0.45, "Vardholm", modes=(K,)), "Vardholm", hours=closed)
    assert refusals(mission) == {"Vardholm is closed"}
    assert refusals(smaller(marshlight, 0.45, "Cape Tern", modes=(K,))) == {"station does not hear K band"}


def test_too_short(marshlight):
    found = refusals(smaller(marshlight, 1, "Vardholm", modes=(K,), policy={"min_session_s": 250.0}))
    short = [re.fullmatch(r"too short: (\d+) s usable, the policy asks 250 s", reason) for reason in found]
    assert short
    assert all(match and int(match[1]) < 250 for match in short)


def test_a_budget_that_is_spent(marshlight):
    free = planner.plan_week(smaller(marshlight, 0.5, "Vardholm", modes=(K,)))
    spent = free.summary["station_cost"]
    assert spent > 0
    plan = planner.plan_week(smaller(marshlight, 0.5, "Vardholm", modes=(K,), policy={"cost_budget": spent / 2}))
    assert plan.summary["station_cost"] <= spent / 2
    why = [reason for verdict, reason in reasons(plan).values() if verdict == "left out"]
    pattern = rf"{K}: station budget: even 90 s cost \d+\.\d\d, \d+\.\d\d of {spent / 2:g} are left"
    assert any(re.fullmatch(pattern, reason) for reason in why)


def test_a_day_that_has_its_sessions(marshlight):
    plan = planner.plan_week(smaller(marshlight, 0.5, "Vardholm", modes=(K,), policy={"max_sessions_per_day": 1}))
    assert ("left out", f"{K}: policy: 1 sessions that day already, 1 allowed") in reasons(plan).values()


def test_energy_names_the_floor_and_the_moment(two_day_plan, two_day_mission):
    """Beside the plan even the shortest session breaks what the reason says it breaks."""
    energy = [r for v, r in reasons(two_day_plan).values() if v == "left out" and ": energy: " in r]
    floor, end = two_day_mission.policy.soc_floor_pct, two_day_mission.policy.soc_end_pct
    for reason in energy:
        assert f"floor {floor:g} %" in reason or f"{end:g} % asked" in reason
    assert len(energy) + sum(": not worth it: " in r for _, r in reasons(two_day_plan).values()) > 0

"""One session's go or no-go, against simulations of our own."""

from datetime import timedelta

import pandas as pd
import pytest
from referee import moment
from small_missions import smaller

import planner
from planner.errors import InputError
from planner.mission.contacts import REQUIRED, Session
from planner.schedule.checks import cost_of
from planner.schedule.flown import Flown
from planner.schedule.frames import contact_id
from planner.schedule.result import prepared

K, S = "K high rate", "S low rate"
HALF_A_HUNDREDTH_PCT = 0.005


@pytest.fixture(scope="module")
def plan(two_day_plan):
    return two_day_plan


def simulated(mission, sessions, answer, *, begin_s=0.0, duration_s=None):
    """Battery at the pessimistic corner with the session of the answer among others, perhaps at another time."""
    on_s = (moment(answer.tx_on_utc) - mission.start).total_seconds() + begin_s
    length_s = answer.duration_s if duration_s is None else duration_s
    asked = Session(on_s, on_s + length_s, answer.satellite, answer.station, answer.mode, answer.pass_id)
    others = [s for s in sessions if (s.pass_id, s.mode) != (asked.pass_id, asked.mode)]
    return Flown(prepared(mission), tuple(sorted([*others, asked]))).worst[answer.satellite]


def breaches(mission, series) -> list:
    return series.breaches(mission.policy)


def test_a_session_beside_none_is_affordable_and_figures_are_the_simulation_s(two_day_mission, plan):
    pass_id = plan.contacts[plan.contacts["mode"] == K].iloc[2].pass_id
    answer = planner.afford(two_day_mission, pass_id, K, plan.contacts.iloc[:0])
    assert answer.affordable
    assert answer.reason == "every limit holds"
    assert answer.longest_s == answer.duration_s
    assert answer.give_way == ()
    series = simulated(two_day_mission, (), answer)
    lowest_pct = series.soc_pct[series.time_s >= _power_on_s(two_day_mission, answer)].min()
    assert answer.soc_lowest_pct == pytest.approx(lowest_pct, abs=HALF_A_HUNDREDTH_PCT)
    assert answer.joule_per_mbit == pytest.approx(answer.energy_wh * 3600 / answer.volume_mbit)
    assert answer.soc_after_pct < answer.soc_before_pct
    assert moment(answer.recovered_utc) > moment(answer.tx_off_utc)


def _power_on_s(mission, answer) -> float:
    warmup_s = mission.satellite(answer.satellite).spacecraft.mode(answer.mode).warmup_s
    return (moment(answer.tx_on_utc) - mission.start).total_seconds() - warmup_s


@pytest.fixture(scope="module")
def tight(marshlight):
    """A day in which every Wh is used, and a contact of it that would like to be longer."""
    mission = smaller(marshlight, 1, "Vardholm", modes=(K,), start_state={"stored_mbit": 390_000.0})
    plan = planner.plan_week(mission)
    return mission, plan


def test_yes_and_no_are_what_the_simulation_says(tight):
    mission, plan = tight
    answers = []
    for pass_id in plan.passes[plan.passes["verdict"].isin(["planned", "left out"])]["pass_id"]:
        answer = planner.afford(mission, pass_id, K, plan.contacts)
        answers.append(answer)
        assert answer.affordable == (not breaches(mission, simulated(mission, plan.flown.sessions, answer)))
    assert any(not answer.affordable for answer in answers)


@pytest.fixture(scope="module")
def refused(tight):
    """The mission, its plan, and the answer for a pass whose longest transmission is not affordable."""
    mission, plan = tight
    answers = (planner.afford(mission, pass_id, K, plan.contacts) for pass_id in plan.contacts["pass_id"])
    return mission, plan, next(answer for answer in answers if not answer.affordable and answer.longest_s > 2)


def test_the_longest_transmission_is_affordable_and_a_second_more_is_not(refused):
    mission, plan, answer = refused
    begin_s = (moment(answer.longest_tx_on_utc) - moment(answer.tx_on_utc)).total_seconds()
    holds = simulated(mission, plan.flown.sessions, answer, begin_s=begin_s, duration_s=answer.longest_s)
    assert breaches(mission, holds) == ()
    window = next(c for c in plan.plan.problem.candidates if c.pass_id == answer.pass_id)
    longer_s = answer.longest_s + 1
    first_s = window.opens_s - (moment(answer.tx_on_utc) - mission.start).total_seconds()
    room_s = window.window_s - longer_s
    for share in (0.0, 0.25, 0.5, 0.75, 1.0):
        series = simulated(mission, plan.flown.sessions, answer, begin_s=first_s + share * room_s, duration_s=longer_s)
        assert breaches(mission, series)


def test_what_breaks_is_told_with_its_figure(refused):
    _, _, answer = refused
    assert answer.binding_limit in ("SoC floor", "end-of-span SoC", "depth of discharge")
    assert answer.reason.startswith(f"MARSHLIGHT-1: {answer.binding_limit}: ")
    assert answer.missing > 0
    assert answer.missing_unit == "%"


def test_without_those_that_give_way_it_is_affordable(refused):
    mission, plan, answer = refused
    assert answer.give_way
    staying = [s for s in plan.flown.sessions if contact_id(s) not in answer.give_way]
    assert breaches(mission, simulated(mission, staying, answer)) == ()
    contacts = plan.contacts[~plan.contacts["contact_id"].isin(answer.give_way)]
    assert planner.afford(mission, answer.pass_id, K, contacts).affordable


def test_no_smaller_set_gives_way(refused):
    mission, plan, answer = refused
    for back in answer.give_way:
        staying = [s for s in plan.flown.sessions if contact_id(s) not in answer.give_way or contact_id(s) == back]
        assert breaches(mission, simulated(mission, staying, answer))


def test_contacts_that_a_rule_of_the_week_needs_do_not_give_way(refused):
    """A contact a day is kept by the others; with no longer gaps allowed than there are, few can go."""
    mission, plan, answer = refused
    daily = mission.with_changes(policy={"daily_contact_modes": (K,)})
    assert planner.afford(daily, answer.pass_id, K, plan.contacts).give_way == answer.give_way
    gap_h = max(_gaps_h(mission, plan, answer.pass_id))
    strict = mission.with_changes(policy={"longest_gap_h": gap_h + 0.01})
    kept = planner.afford(strict, answer.pass_id, K, plan.contacts).give_way
    assert all(gap <= gap_h + 0.01 for gap in _gaps_h(mission, plan, answer.pass_id, gone=kept))


def _gaps_h(mission, plan, pass_id, gone=()):
    """Hours without contact between the plan's sessions less those gone, the span's ends included."""
    own = [s for s in plan.flown.sessions if contact_id(s) not in gone]
    ends, begins = [0.0, *(s.tx_off_s for s in own)], [*(s.tx_on_s for s in own), mission.span_s]
    return [(begin - end) / 3600 for end, begin in zip(ends, begins, strict=True)]


def test_a_planned_contact_is_named_as_the_one_replaced_and_what_the_week_gains(tight):
    mission, plan = tight
    row = plan.contacts.iloc[0]
    answer = planner.afford(mission, row.pass_id, K, plan.contacts)
    assert answer.replaces == (row.contact_id,)
    assert answer.replaced_s == pytest.approx(row.duration_s)
    rest = plan.contacts.iloc[1:]
    again = planner.afford(mission, row.pass_id, K, rest)
    assert (again.replaces, again.replaced_s) == ((), None)
    without = planner.audit(mission, rest).flown.total_mbit
    assert again.gained_mbit - answer.gained_mbit == pytest.approx(plan.flown.total_mbit - without)
    assert again.gained_mbit <= again.volume_mbit + 1e-6


def test_without_contacts_the_planned_week_is_meant(tight):
    mission, plan = tight
    pass_id = plan.contacts.iloc[0].pass_id
    assert planner.afford(mission, pass_id, K) == planner.afford(mission, pass_id, K, plan.contacts)


def test_contacts_of_another_week_do_not_count(tight):
    mission, plan = tight
    pass_id = plan.contacts.iloc[0].pass_id
    elsewhere = plan.contacts.copy()
    for column in ("tx_on_utc", "tx_off_utc"):
        shifted = [moment(text) + timedelta(days=30) for text in elsewhere[column]]
        elsewhere[column] = [f"{time:%Y-%m-%dT%H:%M:%S.%f}Z" for time in shifted]
    assert planner.afford(mission, pass_id, K, elsewhere) == planner.afford(mission, pass_id, K, plan.contacts.iloc[:0])


@pytest.mark.parametrize(("soc_pct", "copies"), [(30.0, 0), (70.0, 1), (92.0, 1)])
def test_nothing_is_affordable_beside_a_limit_that_is_broken_already(tight, soc_pct, copies):
    mission, plan = tight
    low = mission.with_changes(start_state={"soc_pct": soc_pct}, policy={"soc_floor_pct": 80.0})
    given = pd.concat([plan.contacts.iloc[1:]] * copies or [plan.contacts.iloc[:0]])
    assert not planner.audit(low, given).safe
    answer = planner.afford(low, plan.contacts.iloc[0].pass_id, K, given)
    assert not answer.affordable
    assert answer.reason.startswith("the contacts given break a limit already (see `audit`): MARSHLIGHT-1: SoC floor: ")
    assert (answer.longest_s, answer.give_way) == (0.0, ())


def test_what_is_affordable_is_safe_in_an_audit_of_all(tight):
    mission, plan = tight
    for pass_id in plan.passes[plan.passes["verdict"] != "unusable"]["pass_id"]:
        answer = planner.afford(mission, pass_id, K, plan.contacts.iloc[::2])
        others = plan.contacts.iloc[::2]
        both = pd.concat([others[others["pass_id"] != pass_id], pd.DataFrame([answer.as_dict()])])
        assert answer.affordable == planner.audit(mission, both[list(REQUIRED)]).safe


def test_a_session_that_the_station_budget_does_not_pay_for_is_a_no(two_day_mission, plan):
    few = plan.contacts.iloc[:2]
    spent = cost_of(planner.audit(two_day_mission, few).flown)
    asked = plan.contacts[plan.contacts["mode"] == K].iloc[2].pass_id
    poor = two_day_mission.with_changes(policy={"cost_budget": spent + 0.1})
    answer = planner.afford(poor, asked, K, few)
    assert not answer.affordable
    assert (answer.binding_limit, answer.longest_s) == ("station budget", 0.0)
    assert answer.conflicts == (answer.reason,)
    assert answer.only_by_rules


def test_other_rules_that_would_break_are_told_as_conflicts(two_day_mission, plan):
    first, second = _neighbours(plan)
    answer = planner.afford(two_day_mission.with_changes(policy={"turnaround_s": 8000.0}), second, K,
                            plan.contacts[plan.contacts["pass_id"] == first])  # fmt: skip
    assert any("8000.0 s needed" in conflict for conflict in answer.conflicts)


def _neighbours(plan) -> tuple[str, str]:
    high = plan.contacts[plan.contacts["mode"] == K]
    return high.iloc[1].pass_id, high.iloc[2].pass_id


def test_a_pass_on_which_the_mode_cannot_be_heard(marshlight):
    mission = smaller(marshlight, 1, "Cape Tern")
    pass_id = planner.find_passes(mission).iloc[0].pass_id
    columns = ["pass_id", "satellite", "station", "mode", "tx_on_utc", "tx_off_utc"]
    answer = planner.afford(mission, pass_id, K, pd.DataFrame(columns=columns))
    assert not answer.affordable
    assert answer.reason == "station does not hear K band"
    assert answer.as_dict()["duration_s"] is None


def test_unknown_passes_and_modes(two_day_mission, plan):
    pass_id = plan.passes.iloc[0].pass_id
    with pytest.raises(InputError) as caught:
        planner.afford(two_day_mission, pass_id[:-1], K, plan.contacts)
    assert str(caught.value).startswith(
        f"pass must be in the span, as `passes` lists them, got '{pass_id[:-1]}'; did you mean"
    )
    with pytest.raises(InputError) as caught:
        planner.afford(two_day_mission, pass_id, "K high", plan.contacts)
    assert str(caught.value) == (
        "mode must be one of ['K high rate', 'S low rate'], got 'K high'; did you mean \"K high rate\"?"
    )

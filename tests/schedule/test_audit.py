"""An audit finds each broken rule, says where, when and by how much, and which figures are stale."""

import re
from datetime import timedelta

import pandas as pd
import pytest
from referee import moment
from small_missions import a_twin, smaller, with_craft, with_station

import planner
from planner.errors import InputError
from planner.mission.station import Hours

K, S = "K high rate", "S low rate"


@pytest.fixture(scope="module")
def plan(two_day_plan):
    """The week's contacts as a table that may be spoiled."""
    return two_day_plan


def text_of(time) -> str:
    return f"{time:%Y-%m-%dT%H:%M:%S.%f}"[:-3] + "Z"


def moved(contacts: pd.DataFrame, at: int, **by_s: float) -> pd.DataFrame:
    """The contacts with `tx_on` or `tx_off` of the one at `at` moved by seconds."""
    changed = contacts.copy()
    for key, seconds in by_s.items():
        column = changed.columns.get_loc(f"{key}_utc")
        changed.iloc[at, column] = text_of(moment(contacts.iloc[at, column]) + timedelta(seconds=seconds))
    return changed


def a_contact(plan, **wanted) -> int:
    """Place of the first contact with these values."""
    rows = plan.contacts
    for key, value in wanted.items():
        rows = rows[rows[key] == value]
    return plan.contacts.index.get_loc(rows.index[0])


def texts(mission, contacts) -> list[str]:
    return planner.audit(mission, contacts).texts()


def test_what_was_planned_passes_as_table_and_as_file(two_day_mission, plan, written_week):
    for contacts in (plan.contacts, written_week / "contacts.csv"):
        verdict = planner.audit(two_day_mission, contacts)
        assert verdict.safe
        assert verdict.as_dict() == {"safe": True, "contacts": len(plan.contacts), "faults": [], "stale": []}


def test_a_moment_written_another_way_is_the_same_moment(two_day_mission, plan):
    other = plan.contacts.copy()
    for column in (name for name in other.columns if name.endswith("_utc")):
        other[column] = pd.to_datetime(other[column]).astype(str)  # 2026-12-07 05:41:28.500000+00:00
    assert planner.audit(two_day_mission, other).stale == ()


def test_no_contacts_break_only_what_asks_for_some(two_day_mission, plan):
    assert texts(two_day_mission, plan.contacts.iloc[:0]) == [
        f"MARSHLIGHT-1: no contact in S low rate on 2026-12-0{day}, the policy asks one a day" for day in (7, 8)
    ]


def test_tx_on_before_aos_is_told_with_the_place_and_the_figure(two_day_mission, plan, tmp_path):
    at = a_contact(plan, mode=S)
    row = plan.contacts.iloc[at]
    early_s = 12.0 + (moment(row.tx_on_utc) - moment(row.aos_utc)).total_seconds()
    path = tmp_path / "contacts.csv"
    moved(plan.contacts, at, tx_on=-early_s).to_csv(path, index=False)
    verdict = planner.audit(two_day_mission, path)
    before = text_of(moment(row.tx_on_utc) - timedelta(seconds=early_s))
    assert verdict.texts()[0] == (
        f"line {at + 2}: {row.contact_id}: tx_on_utc {before} is 12.0 s before AOS {row.aos_utc}"
    )
    fault = verdict.as_dict()["faults"][0]
    assert (fault["rule"], fault["line"], fault["unit"]) == ("inside the pass", at + 2, "s")
    assert fault["value"] == pytest.approx(-12.0, abs=1e-3)


def test_a_contact_that_has_flown_is_not_judged_by_newer_elements(two_day_mission, plan):
    """Its times, once right, lie a second before the pass as it is known now; what it took still counts."""
    early = plan.contacts.copy()
    aos = moment(early.iloc[0]["aos_utc"])
    early.loc[0, "tx_on_utc"] = f"{aos - timedelta(seconds=1):%Y-%m-%dT%H:%M:%S.%f}Z"
    judged = planner.audit(two_day_mission, early)
    flown = planner.audit(two_day_mission, early, freeze_until=aos + timedelta(minutes=1))
    assert "inside the pass" in {fault.rule for fault in judged.faults}
    assert flown.safe
    assert len(flown.flown.sessions) == len(judged.flown.sessions)
    with pytest.raises(InputError, match="freeze_until must carry a time zone"):
        planner.audit(two_day_mission, early, freeze_until=aos.replace(tzinfo=None))


def test_a_floor_is_judged_whatever_has_flown(two_day_mission, plan):
    high = two_day_mission.with_changes(policy={"soc_floor_pct": 80.0, "soc_end_pct": 80.0})
    judged, flown = (planner.audit(high, plan.contacts, freeze_until=until) for until in (None, high.end))
    floors = [[fault.text for fault in found.faults if fault.rule == "SoC floor"] for found in (judged, flown)]
    assert floors[0]
    assert floors[0] == floors[1]


def test_tx_off_after_los(two_day_mission, plan):
    at = a_contact(plan, mode=S)
    row = plan.contacts.iloc[at]
    late_s = (moment(row.los_utc) - moment(row.tx_off_utc)).total_seconds() + 30
    assert any(
        f"is 30.0 s after LOS {row.los_utc}" in text
        for text in texts(two_day_mission, moved(plan.contacts, at, tx_off=late_s))
    )


def test_a_session_too_short(two_day_mission, plan):
    at = a_contact(plan, mode=S)
    short = moved(plan.contacts, at, tx_off=60 - plan.contacts.iloc[at].duration_s)
    assert any(text.endswith("60.0 s on air, the policy asks 90 s") for text in texts(two_day_mission, short))


def test_a_link_below_its_margin(two_day_mission, plan):
    at = a_contact(plan, mode=K)
    asked = two_day_mission.with_changes(policy={"link_margin_db": 25.0})
    (text,) = [t for t in texts(asked, plan.contacts) if plan.contacts.iloc[at].contact_id in t and "margin" in t]
    assert "the link is not usable all through the transmission: lowest margin" in text
    assert text.endswith("the policy asks 25 dB")


def test_a_link_says_which_of_mount_and_flux_is_in_the_way(two_day_mission, plan):
    row = plan.contacts.iloc[a_contact(plan, mode=K)]
    slow = {"max_azimuth_rate_deg_s": 0.01, "max_elevation_rate_deg_s": 0.01}
    antenna = two_day_mission.station(row.station).antenna.model_copy(update=slow)
    slow = with_station(two_day_mission, row.station, antenna=antenna)
    (text,) = [text for text in texts(slow, plan.contacts) if row.contact_id in text and "usable" in text]
    assert text.endswith(f"transmission: the mount of {row.station} is too slow")
    loud = with_craft(
        two_day_mission.with_changes(policy={"enforce_flux_limit": True}),
        lambda craft: {"transmitter": tuple(mode.model_copy(update={"rf_power_w": 1e5}) for mode in craft.transmitter)},
    )
    (text,) = [text for text in texts(loud, plan.contacts) if row.contact_id in text and "usable" in text]
    assert re.search(r"transmission: power flux-density is above its enforced limit by up to \d+\.\d\d dB$", text)


def test_a_closed_station(two_day_mission, plan):
    row = plan.contacts.iloc[a_contact(plan, mode=K)]
    begin = moment(row.tx_on_utc) + timedelta(seconds=20)
    closed = Hours(maintenance=((begin, begin + timedelta(seconds=5)),))
    found = texts(with_station(two_day_mission, row.station, hours=closed), plan.contacts)
    assert len(found) == 1
    assert found[0].endswith(f"{row.contact_id}: {row.station} is closed during the transmission")


def test_turnaround_between_two_contacts(two_day_mission, plan):
    asked = two_day_mission.with_changes(policy={"turnaround_s": 30_000.0})
    found = [text for text in texts(asked, plan.contacts) if "needed" in text]
    first, second = plan.contacts.iloc[0], plan.contacts.iloc[1]
    pause_s = (moment(second.power_on_utc) - moment(first.tx_off_utc)).total_seconds()
    assert found[0] == (
        f"line 3: {second.contact_id}: satellite MARSHLIGHT-1: {pause_s:.1f} s from tx_off of {first.pass_id}"
        f" ({first['mode']}) to power_on of {second.pass_id} ({second['mode']}), 30000.0 s needed"
    )


def test_nearly_the_same_contact_twice_is_in_its_own_way_and_the_very_same_is_refused(two_day_mission, plan):
    twice = pd.concat([plan.contacts, moved(plan.contacts, 0, tx_on=1.0).iloc[[0]]])
    assert any(fault.rule == "turnaround" for fault in planner.audit(two_day_mission, twice).faults)
    with pytest.raises(InputError, match="line 22 repeats line 2"):
        planner.audit(two_day_mission, pd.concat([plan.contacts, plan.contacts.iloc[[0]]]))


def test_a_floor_and_an_end_that_the_contacts_do_not_hold(two_day_mission, plan):
    lowest = plan.summary["soc_min_pct"]
    asked = two_day_mission.with_changes(policy={"soc_floor_pct": lowest + 1.0, "soc_end_pct": 99.0})
    verdict = planner.audit(asked, plan.contacts)
    floor = next(fault for fault in verdict.faults if fault.rule == "SoC floor")
    deepest = min(fault.value for fault in verdict.faults if fault.rule == "SoC floor")
    assert deepest == pytest.approx(lowest, abs=5e-4)  # the summary has three decimals
    assert floor.bound == lowest + 1.0
    assert any(fault.rule == "end-of-span SoC" for fault in verdict.faults)


def test_a_transmission_longer_than_its_mode_allows(two_day_mission, plan):
    def limited(craft):
        return {"transmitter": tuple(t.model_copy(update={"longest_on_s": 100.0}) for t in craft.transmitter)}

    faults = planner.audit(with_craft(two_day_mission, limited), plan.contacts).faults
    long = plan.contacts[plan.contacts["duration_s"] > 100]
    assert sum("100.00" in fault.text or "100.0 s" in fault.text for fault in faults) == len(long)


def test_policies_over_the_week(two_day_mission, plan):
    asked = two_day_mission.with_changes(
        policy={"max_sessions_per_day": 2, "longest_gap_h": 1.0, "cost_budget": 1.0, "daily_contact_modes": (S,)}
    )
    rules = [fault.rule for fault in planner.audit(asked, plan.contacts).faults]
    assert rules.count("sessions a day") == 2
    assert "longest gap" in rules
    assert "station budget" in rules
    cost = sum(
        station.cost.per_pass + station.cost.per_minute * row.duration_s / 60
        for row in plan.contacts.itertuples()
        for station in [two_day_mission.station(row.station)]
    )
    assert f"station cost {cost:.2f} is above the budget 1" in texts(asked, plan.contacts)


def test_commands_that_no_contact_carries(two_day_mission, plan):
    without = plan.contacts[plan.contacts["mode"] != S]
    found = [f for f in planner.audit(two_day_mission, without).faults if f.rule == "commands aboard"]
    second_day = without[without["tx_off_utc"] > "2026-12-08T00:00:00"]
    assert len(found) == len(second_day)
    assert found[0].text == "no contact with uplink between 48 h and 6 h before it can carry its commands"


def test_a_pass_of_another_station_and_a_pass_of_none(two_day_mission, plan):
    other = plan.contacts.copy()
    other.loc[other.index[0], "station"] = "Vardholm"
    assert any("is not one of MARSHLIGHT-1 over Vardholm" in text for text in texts(two_day_mission, other))
    unknown = plan.contacts.copy()
    unknown.loc[unknown.index[0], "pass_id"] = "nothing"
    assert any("no pass has the id 'nothing' in this span" in text for text in texts(two_day_mission, unknown))


@pytest.mark.parametrize("day", ["0001-01-01", "2020-01-01", "2026-12-06", "2026-12-09", "9999-12-31"])
def test_contacts_outside_the_span_are_told_and_nothing_worse(two_day_mission, plan, day):
    strange = plan.contacts.copy()
    strange.loc[strange.index[3], "tx_on_utc"] = f"{day}T01:00:00Z"
    strange.loc[strange.index[3], "tx_off_utc"] = f"{day}T01:05:00Z"
    verdict = planner.audit(two_day_mission, strange)
    fault = next(fault for fault in verdict.as_dict()["faults"] if fault["rule"] == "span")
    assert fault["text"] == "on air outside the mission's span, 2026-12-07T00:00:00.000Z to 2026-12-09T00:00:00.000Z"
    assert fault["time_utc"] == f"{day}T01:00:00.000Z"


@pytest.mark.parametrize("day", ["2026-12-06T23:50:00", "2026-12-08T23:58:00"])
def test_contacts_on_the_edge_of_the_span_are_judged_as_any_other(two_day_mission, plan, day):
    strange = plan.contacts.iloc[:1].copy()
    strange["tx_on_utc"] = f"{day}Z"
    strange["tx_off_utc"] = text_of(moment(f"{day}.000Z") + timedelta(minutes=5))
    assert "inside the pass" in {fault.rule for fault in planner.audit(two_day_mission, strange).faults}


def test_a_transmission_through_the_whole_span(two_day_mission, plan):
    endless = plan.contacts.iloc[:1].copy()
    endless["tx_on_utc"], endless["tx_off_utc"] = "2026-12-07T00:00:00Z", "2026-12-09T00:00:00Z"
    rules = {fault.rule for fault in planner.audit(two_day_mission, endless).faults}
    assert {"inside the pass", "SoC floor"} <= rules


def test_stale_figures_break_nothing_and_are_told(two_day_mission, plan):
    spoiled = plan.contacts.copy()
    spoiled.loc[spoiled.index[0], "volume_mbit"] = 1e6
    spoiled.loc[spoiled.index[1], "polarisation"] = "vertical"
    verdict = planner.audit(two_day_mission, spoiled)
    assert verdict.safe
    assert [(figure.line, figure.column, figure.stated) for figure in verdict.stale] == [
        (2, "volume_mbit", "1000000.0"), (3, "polarisation", "vertical"),
    ]  # fmt: skip
    row = spoiled.iloc[1]
    assert verdict.stale[1].text == (
        f"line 3: {row.contact_id}: polarisation states vertical, is now {plan.contacts.iloc[1].polarisation}"
    )


def test_a_shift_makes_the_figures_that_follow_from_it_stale(two_day_mission, plan):
    at = a_contact(plan, mode=K)
    verdict = planner.audit(two_day_mission, moved(plan.contacts, at, tx_on=20, tx_off=-5))
    stale = {figure.column for figure in verdict.stale if figure.line == at + 2}
    assert {"duration_s", "volume_mbit", "energy_wh", "power_on_utc", "expected_volume_mbit"} <= stale
    assert "max_elevation_deg" not in stale


def test_only_ids_modes_and_transmit_times_are_needed(two_day_mission, plan):
    columns = ["pass_id", "satellite", "station", "mode", "tx_on_utc", "tx_off_utc"]
    verdict = planner.audit(two_day_mission, plan.contacts[columns])
    assert verdict.safe
    assert verdict.stale == ()


def test_contacts_of_another_mission_are_refused(marshlight, plan):
    mission = smaller(marshlight, 1, "Cape Tern")
    with pytest.raises(InputError) as caught:
        planner.audit(mission, plan.contacts)
    assert "station: must be one of ['Cape Tern'], got 'Vardholm'" in caught.value.faults[0]


def test_an_antenna_is_busy_until_the_longer_of_two_modes_that_overlap(marshlight):
    mission = a_twin(smaller(marshlight, 0.25, "Vardholm"))
    times = [("MARSHLIGHT-1", K, 1000, 1300), ("MARSHLIGHT-1", S, 1001, 1061), ("MARSHLIGHT-2", K, 1290, 1500)]
    contacts = pd.DataFrame(
        [
            {
                "pass_id": satellite, "satellite": satellite, "station": "Vardholm", "mode": mode,
                "tx_on_utc": text_of(mission.start + timedelta(seconds=on_s)),
                "tx_off_utc": text_of(mission.start + timedelta(seconds=off_s)),
            }
            for satellite, mode, on_s, off_s in times
        ]
    )  # fmt: skip
    assert any("station Vardholm: -70.0 s from tx_off of MARSHLIGHT-1 (K" in text for text in texts(mission, contacts))

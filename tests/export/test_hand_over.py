"""The week that the sheet shows tells every pass as the plan it came from."""

from dataclasses import replace

import pandas as pd
import pytest

import planner
from planner.export.cards import outdated_contacts
from planner.export.contacts import contacts_csv, file_issue, passes_csv
from planner.hand_over import week_shown, write_cards
from planner.schedule.flown import Flown


@pytest.fixture(scope="module")
def plan(mission):
    """A day over two stations, one of them closed by night."""
    stations = tuple(station for station in mission.stations if station.name in ("Vardholm", "Corrie Head"))
    return planner.plan_week(mission.model_copy(update={"days": 1.0, "stations": stations}))


@pytest.fixture
def contacts(tmp_path):
    """Where the contacts' file would be; what counts is what stands beside it."""
    return tmp_path / "contacts.csv"


def verdicts(passes: pd.DataFrame) -> dict[str, str]:
    return dict(zip(passes["pass_id"], passes["verdict"], strict=True))


def test_passes_are_told_as_the_plan_tells_them(plan, contacts):
    told = verdicts(plan.passes)
    assert {"planned", "left out", "unusable"} == set(told.values())
    assert verdicts(week_shown(plan.flown, contacts).passes) == told


def test_passes_dropped_in_the_table_beside_are_told(plan, contacts):
    table = plan.passes
    gone = table.index[table["verdict"] == "left out"][0]
    table = table.assign(verdict=table["verdict"].where(table.index != gone, "dropped"))
    (contacts.parent / "passes.csv").write_bytes(passes_csv(table))
    assert verdicts(week_shown(plan.flown, contacts).passes) == verdicts(table)


def test_passes_dropped_by_the_mission_are_told(plan, contacts):
    gone = plan.flown.sessions[0].pass_id
    others = tuple(session for session in plan.flown.sessions if session.pass_id != gone)
    mission = plan.flown.week.mission.with_changes(policy={"drop": (gone,)})
    unwanted = replace(plan.flown.week, mission=mission)
    passes = week_shown(Flown(unwanted, others), contacts).passes
    assert verdicts(passes)[gone] == "dropped"


def test_nothing_is_sent_before_the_freeze(plan, contacts):
    until = plan.flown.week.sky.clock.datetime(43_200.0)
    passes = week_shown(plan.flown, contacts, until).passes
    early = pd.to_datetime(passes["los_utc"]) < until
    assert set(passes["verdict"][early]) == {"planned", "unusable"}


def test_commands_that_are_aboard_stay_as_they_went_up(plan, contacts):
    first = plan.flown.sessions[0]
    told = week_shown(plan.flown, contacts, None, {first: "QPSK_1/4@2026-12-07T05:00:00.000Z"}).contacts
    assert list(told["modcods"]) == ["QPSK_1/4@2026-12-07T05:00:00.000Z", *plan.contacts["modcods"][1:]]


@pytest.mark.parametrize("text", [b"pass_id,max_elevation_deg\na,12\n", b"\xff\xfe", b""])
def test_another_table_of_that_name_drops_nothing(plan, contacts, text):
    (contacts.parent / "passes.csv").write_bytes(text)
    assert "dropped" not in set(week_shown(plan.flown, contacts).passes["verdict"])


@pytest.fixture
def handed(plan, contacts, monkeypatch):
    """Calls `write_cards`, and returns the contacts that cards are made of and all that the sheet is made of."""
    cards, sheets = [], []
    monkeypatch.setattr("planner.export.cards.card_files", lambda *given: cards.append(given) or [])
    monkeypatch.setattr("planner.export.sheet.sheet_files", lambda *given: sheets.append(given) or {"sheet": b""})

    def hand_over(table, freeze_until=None):
        contacts.write_bytes(contacts_csv(table))
        folder = contacts.parent / "cards"
        assert write_cards(plan.flown.week.mission, contacts, folder, freeze_until, lambda stage: None) == 0
        return cards[-1][2], sheets[-1]

    return hand_over


def test_the_sheet_is_made_of_that_week(plan, contacts, handed):
    _, (mission, week, issue, outdated) = handed(plan.contacts)
    assert verdicts(week.passes) == verdicts(plan.passes)
    assert issue == file_issue(contacts.read_bytes())
    assert outdated == outdated_contacts(mission, plan.flown.week.sky, plan.contacts)


def test_cards_tell_the_commands_that_are_aboard(plan, handed):
    """What went up stays up; commands after the freeze are made anew."""
    noon = plan.flown.week.sky.clock.datetime(43_200.0)
    up = [f"QPSK_1/4@{on}" for on in plan.contacts["tx_on_utc"]]
    begun = pd.to_datetime(plan.contacts["power_on_utc"]) < noon
    assert begun.any()
    shown, _ = handed(plan.contacts.assign(modcods=up), noon)
    assert list(shown["modcods"][begun]) == list(pd.Series(up)[begun])
    shown, _ = handed(plan.contacts.assign(modcods=up))
    assert list(shown["modcods"]) == list(plan.contacts["modcods"])

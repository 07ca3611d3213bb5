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


@pytest.mark.parametrize("text", [b"pass_id,max_elevation_deg\na,12\n", b"\xff\xfe", b""])
def test_another_table_of_that_name_drops_nothing(plan, contacts, text):
    (contacts.parent / "passes.csv").write_bytes(text)
    assert "dropped" not in set(week_shown(plan.flown, contacts).passes["verdict"])


def test_the_sheet_is_made_of_that_week(plan, contacts, monkeypatch):
    handed = []
    monkeypatch.setattr("planner.export.cards.card_files", lambda *given: [])
    monkeypatch.setattr("planner.export.sheet.sheet_files", lambda *given: handed.append(given) or {"sheet": b""})
    contacts.write_bytes(contacts_csv(plan.contacts))
    assert write_cards(plan.flown.week.mission, contacts, contacts.parent / "cards", None, lambda stage: None) == 0
    [(mission, week, issue, outdated)] = handed
    assert verdicts(week.passes) == verdicts(plan.passes)
    assert issue == file_issue(contacts.read_bytes())
    assert outdated == outdated_contacts(mission, plan.flown.week.sky, plan.contacts)

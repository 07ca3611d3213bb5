"""The set that a week leaves: complete, whole, the same bytes again, and aware of what was issued before."""

import json

import pandas as pd
from icalendar import Calendar
from made_up_contacts import contacts

from planner.export.folder import claim_folder, verify_set
from planner.export.week import issued_calendar, write_week
from planner.mission.contacts import read_contacts


def write(folder, mission, plan, seconds=1.0):
    with claim_folder(folder) as claimed:
        write_week(claimed, mission, plan, {"seconds": seconds})


def files_of(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_the_folder_holds_what_the_contract_names(mission, plan, tmp_path):
    write(tmp_path, mission, plan)
    stations = {f"station_{name}.ics" for name in (
        "vardholm", "corrie-head", "ostravale", "tamarind-key", "dry-pan", "cape-tern",
    )}  # fmt: skip
    assert set(files_of(tmp_path)) == stations | {
        "contacts.csv", "passes.csv", "battery.csv", "recorder.csv", "week.ics", "week.png", "summary.json",
        "run_log.json",
    }  # fmt: skip
    assert verify_set(tmp_path) == ()
    index = json.loads((tmp_path / "summary.json").read_bytes())
    assert set(index["files"]) == set(files_of(tmp_path)) - {"summary.json", "run_log.json"}
    assert index["soc_min_pct"] == plan.summary["soc_min_pct"]


def test_the_same_plan_gives_the_same_bytes_anew_and_again(mission, plan, tmp_path):
    write(tmp_path / "a", mission, plan)
    first = files_of(tmp_path / "a")
    write(tmp_path / "a", mission, plan, seconds=2.0)
    write(tmp_path / "b", mission, plan, seconds=3.0)
    for folder in ("a", "b"):
        assert {name for name, data in files_of(tmp_path / folder).items() if data != first[name]} == {"run_log.json"}


def test_contacts_read_back_as_they_were_planned(mission, plan, tmp_path):
    write(tmp_path, mission, plan)
    read = read_contacts(tmp_path / "contacts.csv", mission)
    assert [contact.stated["contact_id"] for contact in read] == plan.contacts["contact_id"].tolist()
    on_s = (pd.to_datetime(plan.contacts["tx_on_utc"]) - pd.Timestamp(mission.start)).dt.total_seconds()
    assert [contact.session.tx_on_s for contact in read] == on_s.tolist()


def test_contacts_of_the_week_before_are_cancelled(mission, plan, tmp_path):
    write(tmp_path, mission, plan)
    plan.contacts = contacts(*range(2, 41))
    write(tmp_path, mission, plan)
    for name in ("week.ics", "station_vardholm.ics"):
        events = Calendar.from_ical((tmp_path / name).read_bytes()).walk("VEVENT")
        assert [str(event["STATUS"]) for event in events].count("CANCELLED") == 1


def test_a_damaged_set_is_no_earlier_issue(mission, plan, tmp_path):
    write(tmp_path, mission, plan)
    assert issued_calendar(tmp_path) == (tmp_path / "week.ics").read_bytes()
    (tmp_path / "passes.csv").write_bytes(b"edited")
    assert issued_calendar(tmp_path) is None

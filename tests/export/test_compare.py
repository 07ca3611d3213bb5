"""The difference of two issues of a week, from folders and from memory."""

from types import SimpleNamespace

import pytest
from made_up_contacts import contacts

from planner.errors import InputError
from planner.export.compare import HEADINGS, compare_plans, compare_sets
from planner.export.contacts import contacts_csv
from planner.export.folder import write_set


def plan(frame, lowest=70.0, **summary):
    return SimpleNamespace(contacts=frame, summary={"soc_min_pct": lowest, **summary})


@pytest.fixture
def changed():
    """The first contact lost, the third moved by 30 s and shorter, the fourth gained."""
    old, new = contacts(1, 2, 3), contacts(2, 3, 4)
    new.loc[1, ["tx_on_utc", "volume_mbit"]] = ["2026-12-07T03:00:30.000Z", 13_000.0]
    return plan(old), plan(new, 68.5)


def test_contacts_gained_lost_and_moved_are_told_with_their_figures(changed):
    difference = compare_plans(*changed)
    assert difference.headline() == (
        "1 gained, 1 lost, 1 moved, 1 unchanged; 42000 to 41000 Mbit (-1000); lowest charge 70.0 to 68.5 %"
    )
    rows = difference.rows()
    assert all(len(row) == len(HEADINGS) for row in rows)
    assert [(row[0], row[5]) for row in rows] == [("lost", "-14000"), ("moved", "-1000"), ("gained", "+14000")]
    assert rows[1][4] == "07 Dec 03:00:00–03:05:00Z → 07 Dec 03:00:30–03:05:00Z (on +30 s, off +0 s)"


def test_folders_give_what_memory_gives(changed, tmp_path):
    for name, made in zip(("old", "new"), changed, strict=True):
        write_set(tmp_path / name, {"contacts.csv": contacts_csv(made.contacts)}, made.summary)
    assert compare_sets(tmp_path / "old", tmp_path / "new") == compare_plans(*changed)


def test_the_same_week_twice_is_told_as_such():
    same = compare_plans(plan(contacts(1, 2)), plan(contacts(1, 2)))
    assert same.is_same
    assert same.rows() == []
    assert same.headline() == "no contact changed: all 2 stand; lowest charge 70.0 to 70.0 %"


def test_an_empty_week_against_a_full_one():
    difference = compare_plans(plan(contacts()), plan(contacts(1)))
    assert (len(difference.gained), difference.volume_mbit) == (1, (0.0, 14_000.0))


def test_inputs_that_changed_are_named():
    old = plan(contacts(1), inputs={"a.toml": "1", "b.tle": "2"})
    new = plan(contacts(1), inputs={"a.toml": "1", "b.tle": "3", "c.toml": "4"})
    assert compare_plans(old, new).inputs == ("b.tle", "c.toml")


def test_a_folder_without_a_whole_set_is_told(tmp_path):
    write_set(tmp_path / "old", {"contacts.csv": contacts_csv(contacts(1))}, {})
    (tmp_path / "old" / "contacts.csv").write_bytes(b"edited")
    with pytest.raises(InputError) as told:
        compare_sets(tmp_path / "old", tmp_path / "old")
    assert [fault.split(": ", 1)[1] for fault in told.value.faults] == [
        "differs from the hash in the index",
        "differs from the hash in the index",
    ]


def test_a_missing_folder_is_told_with_the_mend(tmp_path):
    with pytest.raises(InputError) as told:
        compare_sets(tmp_path / "week_old", tmp_path)
    words = "no such folder; `week` replaces the issue in its folder, so copy that before planning anew"
    assert str(told.value) == f"{tmp_path / 'week_old'}: {words}"


def test_contacts_that_are_none_are_told(tmp_path):
    broken = contacts(1).assign(volume_mbit="much")
    for name in ("old", "new"):
        write_set(tmp_path / name, {"contacts.csv": contacts_csv(broken)}, {})
    with pytest.raises(InputError, match="contacts: times and volumes must be as this tool writes them"):
        compare_sets(tmp_path / "old", tmp_path / "new")

"""The difference of two issues of a week, from folders and from memory."""

import json
import re
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


def written(folder, made):
    write_set(folder, {"contacts.csv": contacts_csv(made.contacts)}, made.summary)
    return folder


def test_folders_give_what_memory_gives(changed, tmp_path):
    for name, made in zip(("old", "new"), changed, strict=True):
        written(tmp_path / name, made)
    assert compare_sets(tmp_path / "old", tmp_path / "new") == compare_plans(*changed)


@pytest.mark.parametrize(
    ("column", "value", "told"),
    [
        ("modcods", "QPSK_1/2@2026-12-07T02:00:00.000Z 8PSK_3/4@2026-12-07T02:01:40.000Z",
         "QPSK_3/4@02:00:00Z 8PSK_3/4@02:01:40Z → QPSK_1/2@02:00:00Z 8PSK_3/4@02:01:40Z"),
        ("modcods", "8PSK_3/4@2026-12-07T02:00:00.000Z",
         "QPSK_3/4@02:00:00Z 8PSK_3/4@02:01:40Z → 8PSK_3/4@02:00:00Z"),
        ("frequency_mhz", 26300.5, "26250 MHz 40 Mbaud RHCP → 26300.5 MHz 40 Mbaud RHCP"),
        ("symbol_rate_mbaud", 20.0, "26250 MHz 40 Mbaud RHCP → 26250 MHz 20 Mbaud RHCP"),
        ("polarisation", "LHCP", "26250 MHz 40 Mbaud RHCP → 26250 MHz 40 Mbaud LHCP"),
    ],
)  # fmt: skip
def test_what_is_sent_otherwise_at_the_same_time_is_a_change(tmp_path, column, value, told):
    old, new = contacts(1, 2, 3), contacts(1, 2, 3)
    new.loc[1, [column, "volume_mbit"]] = [value, 13_500.0]
    difference = compare_sets(written(tmp_path / "old", plan(old)), written(tmp_path / "new", plan(new)))
    assert difference == compare_plans(plan(old), plan(new))
    assert not difference.is_same
    assert difference.headline() == (
        "0 gained, 0 lost, 0 moved, 1 sent otherwise, 2 unchanged; 42000 to 41500 Mbit (-500);"
        " lowest charge 70.0 to 70.0 %"
    )
    [row] = difference.rows()
    assert (row[0], row[4], row[5]) == ("sent otherwise", f"07 Dec 02:00:00–02:05:00Z: {told}", "-500")


def test_a_table_that_does_not_say_what_is_sent_is_compared_by_the_rest():
    sketch = plan(contacts(1, 2).drop(columns=["modcods", "frequency_mhz"]))
    assert compare_plans(sketch, plan(contacts(1, 2))).is_same
    assert compare_plans(plan(contacts(1, 2)), sketch).unchanged == 2


def test_what_ended_before_the_new_start_has_flown_and_is_not_lost(tmp_path):
    """A contact that ends as the new week starts has flown, one that ends a minute later is lost."""
    old = plan(contacts(1, 2, 3, 4), start="2026-12-07T00:00:00+00:00")
    new = plan(contacts(4, 5), start="2026-12-07T02:05:00+00:00")
    difference = compare_plans(old, new)
    assert [flight.pass_id[-4:] for flight in difference.flown] == ["0001", "0002"]
    assert [flight.pass_id[-4:] for flight in difference.lost] == ["0003"]
    assert difference.headline() == (
        "1 gained, 1 lost, 0 moved, 1 unchanged; 2 ended before the new start; 28000 to 28000 Mbit (+0);"
        " lowest charge 70.0 to 70.0 %"
    )
    assert [row[0] for row in difference.rows()] == ["lost", "gained"]
    assert compare_sets(written(tmp_path / "old", old), written(tmp_path / "new", new)) == difference
    later = compare_plans(old, plan(contacts(4), start="2026-12-07T05:30:00+02:00"))
    assert later.is_same
    assert later.headline().startswith("no contact changed: all 1 stand; 3 ended before the new start; lowest")


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


@pytest.mark.parametrize(
    ("column", "value"),
    [("volume_mbit", "much"), ("volume_mbit", "nan"), ("frequency_mhz", "inf"), ("tx_on_utc", ""),
     ("tx_off_utc", "noon")],
)  # fmt: skip
def test_contacts_that_are_none_are_told(tmp_path, column, value):
    content = contacts_csv(contacts(1)).decode().splitlines()
    cells = dict(zip(content[0].split(","), content[1].split(","), strict=True)) | {column: value}
    write_set(tmp_path, {"contacts.csv": f"{content[0]}\n{','.join(cells.values())}\n".encode()}, {})
    words = f"{tmp_path / 'contacts.csv'}: times and figures must be as this tool writes them: "
    with pytest.raises(InputError, match=re.escape(words)):
        compare_sets(tmp_path, tmp_path)


NO_NUMBER, NO_TABLE = "soc_min_pct: must be a number of percent", "inputs: must be a table of file names and their"


@pytest.mark.parametrize(
    ("key", "value", "told"),
    [
        ("soc_min_pct", '"x"', f"{NO_NUMBER}, got 'x'"),
        ("soc_min_pct", "[1]", f"{NO_NUMBER}, got [1]"),
        ("soc_min_pct", "true", f"{NO_NUMBER}, got True"),
        ("soc_min_pct", "NaN", f"{NO_NUMBER}, got nan"),
        ("soc_min_pct", "1e999", f"{NO_NUMBER}, got inf"),
        ("soc_min_pct", "9" * 400, f"{NO_NUMBER}, got 999"),
        ("soc_min_pct", "[" * 900 + "]" * 900, ""),
        ("inputs", "[1]", f"{NO_TABLE} SHA-256, got [1]"),
        ("inputs", "5", f"{NO_TABLE} SHA-256, got 5"),
        ("inputs", '"ab"', f"{NO_TABLE} SHA-256, got 'ab'"),
        ("inputs", "null", f"{NO_TABLE} SHA-256, got None"),
        ("inputs", '{"a": [1]}', f"{NO_TABLE} SHA-256, got {{'a': [1]}}"),
        ("start", "7", "start: must be a time with a zone, such as 2026-12-07T00:00:00+00:00, got 7"),
        ("start", '"2026-12-07T00:00:00"', "start: must be a time with a zone"),
        ("start", '"\\u001b[2J"', "start: must be a time with a zone, such as 2026-12-07T00:00:00+00:00, got '\\x1b["),
    ],
    ids=lambda text: text[:20],
)  # fmt: skip
def test_a_summary_changed_by_hand_is_told_and_no_traceback(tmp_path, key, value, told):
    index = written(tmp_path, plan(contacts(1))) / "summary.json"
    sound = json.loads(index.read_text()) | {key: "HERE"}
    index.write_text(json.dumps(sound).replace('"HERE"', value))
    with pytest.raises(InputError) as refused:
        compare_sets(tmp_path, tmp_path)
    assert str(refused.value).startswith(f"{index}: {told}")


def test_names_that_would_steer_a_terminal_are_shown_escaped(tmp_path):
    old = plan(contacts(1), inputs={"a\x1b[2J.toml": "1", "\ud800": "2"})
    new = plan(contacts(1, 2).assign(station="Vard\x07holm", mode="K\u202e", modcods="\x1b]0;x\x07"), inputs={})
    difference = compare_plans(old, new)
    assert difference.inputs == ("\\ud800", "a\\x1b[2J.toml")
    shown = "".join("".join(row) for row in difference.rows())
    assert shown.isprintable()
    assert "Vard\\x07holm" in shown

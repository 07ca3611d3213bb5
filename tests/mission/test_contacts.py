"""Contact files: what is read of a row, and what each fault says."""

import pandas as pd
import pytest

from planner.errors import InputError
from planner.mission import contacts
from planner.mission.contacts import Session, read_contacts

HEADER = "pass_id,satellite,station,mode,tx_on_utc,tx_off_utc,volume_mbit\n"
GOOD = ["p-1", "MARSHLIGHT-1", "Vardholm", "K high rate", "2026-12-07T01:00:00.000Z", "2026-12-07T01:05:00.000Z", "12"]
NAMES = HEADER.strip().split(",")


def written(tmp_path, *rows):
    path = tmp_path / "contacts.csv"
    path.write_text(HEADER + "".join(",".join(row) + "\n" for row in rows))
    return path


def with_cell(column: str, text: str) -> list[str]:
    return [text if name == column else cell for name, cell in zip(NAMES, GOOD, strict=True)]


def test_a_row_is_a_session_and_what_it_states(tmp_path, marshlight):
    (contact,) = read_contacts(written(tmp_path, GOOD), marshlight)
    assert contact.session == Session(3600.0, 3900.0, "MARSHLIGHT-1", "Vardholm", "K high rate", "p-1")
    assert (contact.line, contact.stated["volume_mbit"], contact.session.duration_s) == (2, "12", 300.0)


def test_rows_in_any_order_and_any_time_zone(tmp_path, marshlight):
    later = with_cell("tx_off_utc", "2026-12-07T03:05:00+02:00")
    later[NAMES.index("tx_on_utc")] = "2026-12-07T01:04:00Z"
    read = read_contacts(written(tmp_path, later, GOOD), marshlight)
    assert [contact.line for contact in read] == [3, 2]
    assert read[1].session.tx_off_s == 3900.0


@pytest.mark.parametrize(
    ("column", "text", "message"),
    [
        ("satellite", "MARSHLIGT-1",
         "satellite: must be one of ['MARSHLIGHT-1'], got 'MARSHLIGT-1'; did you mean \"MARSHLIGHT-1\"?"),
        ("mode", "K high", "mode: must be one of ['K high rate', 'S low rate'], got 'K high';"
         " did you mean \"K high rate\"?"),
        ("pass_id", "", "pass_id: must be a pass id, got ''"),
        ("pass_id", "a\x07b", r"pass_id: must be a pass id, got 'a\x07b'"),
        ("tx_on_utc", "7 Dec 2026 01:00", "tx_on_utc: must be a time such as 2026-12-07T09:30:00.000Z,"
         " got '7 Dec 2026 01:00'"),
        ("tx_on_utc", "2026-12-07T01:00:00", "tx_on_utc: must carry a time zone (append Z for UTC),"
         " got '2026-12-07T01:00:00'"),
        ("tx_on_utc", "0001-01-01T00:00:00+23:00", "tx_on_utc: must be a time within the years 1 to 9999,"
         " got '0001-01-01T00:00:00+23:00'"),
        ("tx_on_utc", "2026-12-31T23:59:60Z", "tx_on_utc: must be a time such as 2026-12-07T09:30:00.000Z,"
         " got '2026-12-31T23:59:60Z'"),
        ("tx_off_utc", "2026-12-07T01:00:00.000Z",
         "tx_off_utc: must be after tx_on_utc = 2026-12-07T01:00:00.000Z, got 2026-12-07T01:00:00.000Z"),
    ],
)  # fmt: skip
def test_a_faulty_cell_is_told_with_line_column_rule_and_value(tmp_path, marshlight, column, text, message):
    path = written(tmp_path, GOOD, with_cell(column, text))
    with pytest.raises(InputError) as caught:
        read_contacts(path, marshlight)
    assert caught.value.faults == (f"{path}: line 3: {message}",)


def test_every_faulty_cell_is_told(tmp_path, marshlight):
    path = written(tmp_path, ["", "X", "Y", "K high rate", "-", "-", "1"])
    with pytest.raises(InputError) as caught:
        read_contacts(path, marshlight)
    assert [fault.split(": ")[2] for fault in caught.value.faults] == [
        "satellite", "station", "pass_id", "tx_on_utc", "tx_off_utc",
    ]  # fmt: skip


def test_at_most_fifty_faults_are_told(tmp_path, marshlight):
    with pytest.raises(InputError) as caught:
        read_contacts(written(tmp_path, *[with_cell("satellite", "X")] * 90), marshlight)
    assert len(caught.value.faults) == 51
    assert caught.value.faults[-1] == "and 40 more faults"


def test_a_row_that_repeats_another_is_told_with_both_lines(tmp_path, marshlight):
    other_volume = with_cell("volume_mbit", "13")
    path = written(tmp_path, GOOD, with_cell("mode", "S low rate"), other_volume, GOOD)
    with pytest.raises(InputError) as caught:
        read_contacts(path, marshlight)
    again = (
        "each contact must stand once, got 'p-1', 'K high rate', '2026-12-07T01:00:00.000Z' to"
        " '2026-12-07T01:05:00.000Z' again; delete one"
    )
    assert caught.value.faults == (
        f"{path}: line 4 repeats line 2: {again}",
        f"{path}: line 5 repeats line 2: {again}",
    )


def test_the_same_times_in_another_time_zone_repeat_as_well(tmp_path, marshlight):
    same = with_cell("tx_on_utc", "2026-12-07T03:00:00+02:00")
    with pytest.raises(InputError, match="line 3 repeats line 2"):
        read_contacts(written(tmp_path, GOOD, same), marshlight)


def test_more_contacts_than_any_mission_has(tmp_path, marshlight, monkeypatch):
    assert contacts.MOST_CONTACTS == 20_000
    monkeypatch.setattr(contacts, "MOST_CONTACTS", 2)
    path = written(tmp_path, GOOD, GOOD, GOOD)
    with pytest.raises(InputError) as caught:
        read_contacts(path, marshlight)
    assert caught.value.faults == (f"{path}: must hold at most 2 contacts, got 3",)


def test_no_contacts_are_contacts(tmp_path, marshlight):
    assert read_contacts(written(tmp_path), marshlight) == []


def test_a_table_gives_what_its_file_gives(tmp_path, marshlight):
    frame = pd.DataFrame([GOOD], columns=NAMES)
    assert read_contacts(frame, marshlight) == read_contacts(written(tmp_path, GOOD), marshlight)


def test_a_table_without_a_column(marshlight):
    frame = pd.DataFrame([GOOD], columns=NAMES).drop(columns=["mode", "station"])
    with pytest.raises(InputError) as caught:
        read_contacts(frame, marshlight)
    assert caught.value.faults == ("contacts: column 'station' is required", "contacts: column 'mode' is required")

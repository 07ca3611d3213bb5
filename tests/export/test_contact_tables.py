"""CSV that opens in a spreadsheet, reads back as it was, and gives the same bytes each time."""

import csv
import hashlib
import io
from datetime import UTC, datetime, timedelta

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.export.contacts import (
    BATTERY,
    CONTACTS,
    PASSES,
    RECORDER,
    as_written,
    azimuth_text,
    battery_csv,
    clock_text,
    contacts_csv,
    distinct,
    file_issue,
    file_name,
    neutral,
    passes_csv,
    plain_number,
    recorder_csv,
    schedule_issue,
    table_csv,
    utc_text,
)


def rows(data: bytes) -> list[list[str]]:
    return list(csv.reader(io.StringIO(data.decode(), newline="")))


def frame(columns, **values):
    """One row with plausible content in every column."""
    made = {name: "2026-12-07T09:30:00.123Z" if name.endswith("_utc") else 1.0 for name in columns}
    return pd.DataFrame([made | values])


def test_contacts_have_the_public_columns_and_new_ones_behind_them():
    made = frame([*CONTACTS, "commands_from"], contact_id="a.k", station="Vardholm", commands_from="b.s")
    header, row = rows(contacts_csv(made[[*reversed(made.columns)]]))
    assert header == [*CONTACTS, "commands_from"]
    assert dict(zip(header, row, strict=True)) | {"contact_id": "a.k", "commands_from": "b.s"} == dict(
        zip(header, row, strict=True)
    )


@pytest.mark.parametrize(("write", "columns"), [(passes_csv, PASSES), (battery_csv, BATTERY), (recorder_csv, RECORDER)])
def test_tables_keep_the_order_of_the_contract(write, columns):
    assert rows(write(frame(columns)))[0] == list(columns)


def test_passes_of_a_week_end_with_verdict_and_reason():
    made = frame(PASSES, verdict="left out", reason="costs 1.2 Wh, 0.4 Wh are to spare", truncated="")
    assert rows(passes_csv(made))[0] == [*PASSES, "verdict", "reason", "truncated"]


def test_a_missing_column_is_no_silent_gap():
    with pytest.raises(KeyError, match="lost_mbit"):
        recorder_csv(frame(RECORDER).drop(columns="lost_mbit"))


def test_every_number_has_the_decimals_of_its_unit():
    made = pd.DataFrame(
        {"duration_s": [600], "min_margin_db": [3.14159], "energy_wh": [2.0], "soc_pct": [np.nan], "cell_a": [-0.00001],
         "frequency_mhz": [26250.0], "passes": [203], "sunlit": [True]}
    )  # fmt: skip
    assert rows(table_csv(made))[1] == ["600.000", "3.14", "2.0000", "", "0.0000", "26250.000000", "203", "yes"]


def test_lines_end_with_a_line_feed_and_there_is_no_byte_order_mark():
    data = recorder_csv(frame(RECORDER, satellite="Ørsund"))
    assert data.startswith(b"satellite,time_utc,")
    assert b"\r" not in data
    assert data.endswith(b"\n")
    assert "Ørsund".encode() in data


def test_times_are_utc_to_the_millisecond_rounded():
    oslo = datetime(2026, 12, 7, 10, 30, 0, 999_600, tzinfo=UTC).astimezone()
    assert utc_text([oslo]).tolist() == ["2026-12-07T10:30:01.000Z"]
    assert utc_text(pd.Series(["2026-12-07T12:00:00.250+02:00", None])).tolist() == ["2026-12-07T10:00:00.250Z", ""]
    assert utc_text(pd.Series([], dtype=object)).tolist() == []


def test_an_empty_week_is_a_header():
    assert rows(contacts_csv(pd.DataFrame(columns=CONTACTS))) == [list(CONTACTS)]


# Characters that spreadsheets take for the start of a formula: OWASP, "CSV Injection" (from memory).
@pytest.mark.parametrize("text", ["=1+1", "+1", "-2", "@SUM(A1)", "\t=1", "\r=1", "'=1"])
def test_formulas_are_neutralised(text):
    assert neutral(text) == "'" + text


def test_every_text_is_one_line_and_neutral():
    made = pd.DataFrame({"station": ["=1\r\n2", "a,b", 'the "high" dish', "🛰"]})
    assert [row for [row] in rows(table_csv(made))[1:]] == ["'=1 2", "a,b", 'the "high" dish', "🛰"]


@given(st.text(st.characters(codec="utf-8", exclude_characters="\r\x00"), max_size=20))
def test_no_text_cell_begins_like_a_formula_and_all_text_can_be_had_back(text):
    written = neutral(text)
    assert not written.startswith(("=", "+", "-", "@", "\t"))
    assert written in (text, "'" + text)


def test_the_same_table_from_texts_and_from_datetimes_gives_the_same_bytes():
    moments = [datetime(2026, 12, 7, tzinfo=UTC) + timedelta(seconds=30.5 * k) for k in range(5)]
    made = pd.DataFrame({"time_utc": moments, "soc_pct": np.linspace(60, 92, 5)})
    assert table_csv(made) == table_csv(made.assign(time_utc=utc_text(made["time_utc"])))


def test_file_names_out_of_any_text():
    assert file_name("Corrie Head", "K high rate") == "corrie-head_k-high-rate"
    assert file_name("../../etc/passwd\n") == "etc-passwd"
    assert file_name("🛰") == "x"


# ext4 and APFS (255 bytes, 255 UTF-8 code units a name, from memory).
LONGEST_FILE_NAME_BYTES = 255


@given(st.text(st.characters(categories=("L", "N")), min_size=1, max_size=160), st.integers(0, 99))
def test_long_names_give_names_that_a_file_system_holds_and_that_differ(name, number):
    first, second = (file_name("pointing", f"{name}.20261207-{k:02d}", name) for k in (number, number + 1))
    assert len(f"{first}.csv".encode()) <= LONGEST_FILE_NAME_BYTES
    assert first != second


def test_a_second_session_of_one_mode_on_one_pass_gets_its_own_file():
    assert distinct(["a", "b", "a", "a"]) == ["a", "b", "a_2", "a_3"]


def test_an_azimuth_that_rounds_to_the_full_circle_is_north():
    made = pd.DataFrame({"aos_azimuth_deg": [359.9996, 359.9994, 0.0]})
    assert [row for [row] in rows(table_csv(made))[1:]] == ["0.000", "359.999", "0.000"]
    assert [azimuth_text(359.96, 1), azimuth_text(359.94, 1), azimuth_text(359.6, 0)] == ["0.0", "359.9", "0"]


@given(st.floats(0, 100), st.floats(0, 360))
def test_what_is_shown_of_a_number_is_what_a_reader_of_the_file_would_show(margin_db, azimuth_deg):
    made = pd.DataFrame({"min_margin_db": [margin_db], "aos_azimuth_deg": [azimuth_deg], "station": ["A"]})
    read = pd.read_csv(io.BytesIO(table_csv(made)))
    assert as_written(made).equals(read)


def test_a_schedules_issue_is_what_sha256sum_prints_first():
    made = frame(CONTACTS)
    assert schedule_issue(made) == file_issue(contacts_csv(made)) == hashlib.sha256(contacts_csv(made)).hexdigest()[:8]


def test_carriers_keep_all_their_digits():
    assert [plain_number(value) for value in (26250.0, 2245.0125, 0.25, 100.0, 8212.345678)] == [
        "26250", "2245.0125", "0.25", "100", "8212.345678",
    ]  # fmt: skip


def test_clocks_go_to_the_nearest_second_of_utc():
    assert clock_text("2026-12-07T12:00:00.500+02:00") == "10:00:00"  # half to even
    assert clock_text("2026-12-07T23:59:59.501Z") == "00:00:00"

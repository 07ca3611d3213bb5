"""Element sets in the dress other programs give them: read, or refused with what is wrong with the dress."""

import json
import re
from datetime import UTC, datetime
from pathlib import Path

import pytest

from planner.errors import InputError
from planner.mission.elements import read_elements

SAMPLES = Path(__file__).parents[2] / "tle_samples"
AT = datetime(2026, 12, 7, tzinfo=UTC)
TLE = (SAMPLES / "marshlight.tle").read_text()
KEYWORDS = (SAMPLES / "two_satellites.omm").read_text()
XML = (SAMPLES / "marshlight.omm.xml").read_text()
JSON = (SAMPLES / "marshlight.omm.json").read_text()
CSV = (SAMPLES / "marshlight.omm.csv").read_text()


def read(tmp_path, text: str) -> dict:
    path = tmp_path / "set.txt"
    path.write_text(text)
    return read_elements(path, AT)


def faults_of(tmp_path, text: str) -> list[str]:
    with pytest.raises(InputError) as caught:
        read(tmp_path, text)
    return [fault.removeprefix(f"{tmp_path / 'set.txt'}: ") for fault in caught.value.faults]


def replaced(text: str, old: str, new: str) -> str:
    assert old in text
    return text.replace(old, new, 1)


# --- units -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("keyword", "unit"),
    [  # CCSDS 502.0-B-3, table 4-3 (from memory)
        ("MEAN_MOTION", "rev/day"), ("MEAN_MOTION", "REV/DAY"), ("ECCENTRICITY", "n/a"), ("INCLINATION", "deg"),
        ("RA_OF_ASC_NODE", "deg"), ("ARG_OF_PERICENTER", "deg"), ("MEAN_ANOMALY", "deg"), ("BSTAR", "1/ER"),
        ("MEAN_MOTION_DOT", "rev/day**2"), ("MEAN_MOTION_DDOT", "rev/day**3"),
    ],
)  # fmt: skip
def test_the_standards_own_units_may_stand_behind_a_number(tmp_path, keyword, unit):
    with_unit = re.sub(rf"(?m)^({keyword} = [-+.\d]+).*$", rf"\1 [{unit}]", KEYWORDS)
    assert with_unit.count(f"[{unit}]") >= 3
    assert read(tmp_path, with_unit) == read(tmp_path, KEYWORDS)


@pytest.mark.parametrize(
    ("text", "old", "new", "told"),
    [
        (KEYWORDS, "INCLINATION = 97.5544 [deg]", "INCLINATION = 1.702646 [rad]",
         "message at line 1: INCLINATION must be in deg, got '1.702646 [rad]'"),
        (KEYWORDS, "[rev/day]", "[rad/s]",
         "message at line 1: MEAN_MOTION must be in rev/day, got '15.08756051 [rad/s]'"),
        (KEYWORDS, "ECCENTRICITY = 0.0011000", "ECCENTRICITY = 0.11 [%]",
         "message at line 1: ECCENTRICITY must be without a unit, got '0.11 [%]'"),
        (XML, "<INCLINATION>97.5544", '<INCLINATION units="rad">1.702646',
         "message 1: INCLINATION must be in deg, got '1.702646 [rad]'"),
    ],
)  # fmt: skip
def test_another_unit_is_refused(tmp_path, text, old, new, told):
    assert faults_of(tmp_path, replaced(text, old, new)) == [told]


def test_units_of_the_standard_in_xml(tmp_path):
    with_units = replaced(XML, "<INCLINATION>", '<INCLINATION units="deg">')
    assert read(tmp_path, with_units) == read(tmp_path, XML)


def test_brackets_in_a_name_are_the_names_own(tmp_path):
    named = KEYWORDS.replace("OBJECT_NAME = SANDPIPER-2", "OBJECT_NAME = SANDPIPER [2]")
    assert list(read(tmp_path, named)) == ["MARSHLIGHT-1", "SANDPIPER [2]"]


# --- what is written twice -------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "old", "new", "told"),
    [
        (CSV, "INCLINATION", "Inclination,INCLINATION", "row 1: columns must differ, got ['INCLINATION'] again"),
        (JSON, '"INCLINATION"', '"INCLINATION": "12.0", "INCLINATION"',
         "message 1: 'INCLINATION' must stand once in a message, got '12.0' and '97.5544'"),
        (XML, "<INCLINATION>", "<INCLINATION>12.0</INCLINATION><INCLINATION>",
         "message 1: 'INCLINATION' must stand once in a message, got '12.0' and '97.5544'"),
        (KEYWORDS, "INCLINATION", "INCLINATION = 12.0\nINCLINATION",
         "line 14: INCLINATION must stand once in a message, got it again"),
    ],
)  # fmt: skip
def test_a_keyword_that_stands_twice_is_refused(tmp_path, text, old, new, told):
    assert faults_of(tmp_path, replaced(text, old, new)) == [told]


def test_what_users_define_for_themselves_is_no_keyword(tmp_path):
    own = (
        "<userDefinedParameters><INCLINATION>12.0</INCLINATION><USER_DEFINED parameter='a'>1</USER_DEFINED>"
        "<USER_DEFINED parameter='b'>2</USER_DEFINED></userDefinedParameters>"
    )
    assert read(tmp_path, replaced(XML, "</data>", f"{own}</data>")) == read(tmp_path, XML)
    alone = re.sub("<INCLINATION>.*</INCLINATION>", "", replaced(XML, "</data>", f"{own}</data>").replace(own, "@"))
    assert faults_of(tmp_path, alone.replace("@", own)) == ["message 1: INCLINATION must be given, got none"]


def test_comments_in_xml_may_stand_again_and_again(tmp_path):
    assert read(tmp_path, replaced(XML, "<EPOCH>", "<COMMENT>a</COMMENT><COMMENT>b</COMMENT><EPOCH>")) == read(
        tmp_path, XML
    )


def test_xml_nested_deeper_than_any_stack(tmp_path):
    deep = 20_000
    text = replaced(XML, "<EPOCH>", "<x>" * deep + "y" + "</x>" * deep + "<EPOCH>")
    assert read(tmp_path, text) == read(tmp_path, XML)


# --- one epoch, one orbit --------------------------------------------------------------------------------------------


def test_two_orbits_of_one_epoch_are_refused(tmp_path):
    other = json.loads(JSON)[0] | {"INCLINATION": "98.1000"}
    assert faults_of(tmp_path, json.dumps([*json.loads(JSON), other])) == [
        "MARSHLIGHT-1: element sets of one epoch must be alike, got two of 2026-12-06T18:00:00.000000Z whose"
        " inclination_deg are 97.5544 and 98.1; leave one of them in the file"
    ]


def test_the_same_set_twice_is_one_orbit(tmp_path):
    assert read(tmp_path, TLE + TLE)["MARSHLIGHT-1"].sets_in_file == 2
    other_revolution = json.loads(JSON)[0] | {"REV_AT_EPOCH": "4022"}  # which SGP4 has no use for
    assert len(read(tmp_path, json.dumps([*json.loads(JSON), other_revolution]))) == 1


def test_two_orbits_of_an_epoch_that_is_not_taken_are_no_matter(tmp_path):
    old = json.loads(JSON)[0] | {"EPOCH": "2026-12-01T00:00:00"}
    rows = [*json.loads(JSON), old, old | {"INCLINATION": "98.1000"}]
    assert read(tmp_path, json.dumps(rows))["MARSHLIGHT-1"].inclination_deg == 97.5544


# --- ranges and numbers ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("keyword", "value", "rule"),
    [
        ("ECCENTRICITY", "1.0", "must be at least 0 and below 1"),
        ("ECCENTRICITY", "-0.0011", "must be at least 0 and below 1"),
        ("INCLINATION", "180.1", "must be from 0 to 180 deg"),
        ("RA_OF_ASC_NODE", "-1", "must be from 0 to 360 deg"),
        ("MEAN_MOTION", "1e9", "must be below a million"),
        ("INCLINATION", "9_0", "must be a number"),
        ("INCLINATION", "９０", "must be a number"),
        ("MEAN_ANOMALY", "nan", "must be a number"),
        ("BSTAR", "1e-4x", "must be a number"),
        ("REV_AT_EPOCH", "4_021", "must be a whole number"),
        ("EPOCH", "２０２６-12-06T18:00:00", "must be a date as 2026-12-06T18:00:00.000 or 2026-340T18:00:00.000"),
    ],
)
def test_a_value_out_of_its_range_or_no_number(tmp_path, keyword, value, rule):
    row = json.loads(JSON)[0] | {keyword: value}
    assert faults_of(tmp_path, json.dumps([row])) == [f"message 1: {keyword} {rule}, got {value!r}"]


@pytest.mark.parametrize("value", ["97.5544", "+97.5544", "0.975544e2", "9755.44E-2", "097.5544", 97.5544])
def test_numbers_as_programs_write_them(tmp_path, value):
    row = json.loads(JSON)[0] | {"INCLINATION": value}
    assert read(tmp_path, json.dumps([row]))["MARSHLIGHT-1"].inclination_deg == 97.5544


# --- tables as spreadsheets leave them -------------------------------------------------------------------------------

HEADER, ROW = CSV.splitlines()
EMPTY = "," * HEADER.count(",")


@pytest.mark.parametrize(
    "text",
    [
        f"\n\n{CSV}",
        f"{EMPTY}\n{CSV}",
        f"{HEADER}\n\n{EMPTY}\n{ROW}\n{EMPTY}\n , ,\n",
        f"{HEADER.lower()}\n{ROW}\n",
        f"sep=,\n{CSV}",
        f"\n{EMPTY}\nSep=,\n{EMPTY}\n{CSV}",
        f"{HEADER},,\n{ROW},,\n",
    ],
    ids=[
        "blank first",
        "commas first",
        "rows of commas",
        "small letters",
        "sep",
        "all of it",
        "columns without a name",
    ],
)
def test_a_table_as_a_spreadsheet_leaves_it(tmp_path, text):
    assert read(tmp_path, text) == read(tmp_path, CSV)


def test_another_separator_is_told_behind_a_line_that_names_it(tmp_path):
    (fault,) = faults_of(tmp_path, "sep=;\n" + CSV.replace(",", ";"))
    assert fault.startswith("row 2: columns must be separated by commas, got semicolons")


def test_rows_are_counted_as_the_file_has_them(tmp_path):
    (fault,) = faults_of(tmp_path, f"\n{EMPTY}\n{HEADER}\n\n{ROW},x\n".lstrip("\n"))
    assert fault == "row 4: must have 21 columns as the header, got 22; are there decimal commas?"


# --- two lines among others ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("place", [0, 1, 2, 3])
def test_comment_lines_of_a_tle_file_are_passed_over(tmp_path, place):
    lines = TLE.splitlines()
    lines.insert(place, "# fetched on 6 December")
    assert read(tmp_path, "\n".join(lines)) == read(tmp_path, TLE)


@pytest.mark.parametrize("name", ["<MARSHLIGHT>", "<", "{MARSHLIGHT", "[MARSHLIGHT 1]", "CCSDS_OEM_VERS"])
def test_a_name_that_begins_as_another_kind_of_file_does(tmp_path, name):
    assert list(read(tmp_path, TLE.replace("MARSHLIGHT-1", name))) == [name]


def test_a_fault_in_a_tle_below_such_a_name_is_a_fault_of_a_tle(tmp_path):
    (fault,) = faults_of(tmp_path, TLE.replace("MARSHLIGHT-1", "<MARSHLIGHT>").replace("15.08756051", "15.08756052"))
    assert fault.startswith("line 3: checksum must be")

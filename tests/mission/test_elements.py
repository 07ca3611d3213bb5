"""Element sets and ephemerides: what is read, which set is taken, and what every fault says."""

import json
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest
import sgp4
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import InputError
from planner.mission import tle
from planner.mission.elements import ElementSet, Ephemeris, read_elements, which_set

SAMPLES = Path(__file__).parents[2] / "tle_samples"
AT = datetime(2026, 12, 7, tzinfo=UTC)
LINES = (SAMPLES / "marshlight.tle").read_text().splitlines()
# The published states are printed to 1e-8 km and 1e-9 km/s; the epoch is kept here to the microsecond, in which a
# satellite moves up to 5 mm, and a fast perigee's velocity turns by as many millionths of a metre a second.
A_CENTIMETRE_KM, A_HUNDREDTH_OF_A_MILLIMETRE_KM_S = 1e-5, 1e-8


def written(tmp_path, text: str, name="set.txt") -> Path:
    path = tmp_path / name
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return path


def read_one(path) -> ElementSet:
    (only,) = read_elements(path, AT).values()
    return only


def faults_of(tmp_path, text) -> tuple[str, ...]:
    with pytest.raises(InputError) as caught:
        read_elements(written(tmp_path, text), AT)
    return caught.value.faults


def with_checksum(line: str) -> str:
    return line[:68] + str(sum(int(c) if c.isdigit() else c == "-" for c in line[:68]) % 10)


# --- TLE -------------------------------------------------------------------------------------------------------------


def test_every_field_of_a_tle_is_read():
    read = read_one(SAMPLES / "marshlight.tle")
    assert read == ElementSet(
        name="MARSHLIGHT-1", catalog_number="90001", international_designator="26901A",
        epoch=datetime(2026, 12, 6, 18, tzinfo=UTC), mean_motion_rev_day=15.08756051, eccentricity=0.0011,
        inclination_deg=97.5544, ra_of_asc_node_deg=53.0346, arg_of_pericenter_deg=87.4, mean_anomaly_deg=272.8,
        bstar=2.2e-4, rev_at_epoch=4021,
    )  # fmt: skip


@pytest.mark.parametrize(
    "text",
    [
        "\r\n".join(LINES) + "\r\n",
        "\ufeff" + "\n".join(LINES),
        "\n".join(line + "   " for line in LINES),
        "0 " + "\n".join(LINES),
        "\n\n" + "\n\n".join(LINES) + "\n\n",
    ],
    ids=["CRLF", "byte-order mark", "trailing blanks", "0 before the name", "blank lines"],
)
def test_the_same_set_in_other_dress(tmp_path, text):
    assert read_one(written(tmp_path, text)) == read_one(SAMPLES / "marshlight.tle")


def test_two_lines_without_a_name_are_named_by_number(tmp_path):
    assert read_one(written(tmp_path, "\n".join(LINES[1:]))).name == "90001"


def test_several_satellites_in_one_file(tmp_path):
    text = "".join((SAMPLES / f"{name}.tle").read_text() for name in ("marshlight", "low_inclination", "geostationary"))
    assert list(read_elements(written(tmp_path, text), AT)) == ["MARSHLIGHT-1", "SANDPIPER-2", "CAIRN-4"]


@pytest.mark.parametrize(
    ("text", "number"),
    [("A0001", "100001"), ("H9999", "179999"), ("J0000", "180000"), ("Z9999", "339999"), ("    5", "5")],
)
def test_alpha5_numbers(text, number):
    """Ranges from the definition of alpha-5 (from memory): A is 10, I and O are left out, Z9999 is 339999."""
    assert tle.catalog_number(text) == number


@pytest.mark.parametrize("text", ["I0001", "O0001", "AA001", "-0001", "     "])
def test_numbers_that_alpha5_has_not(text):
    with pytest.raises(ValueError, match="must be digits, or a letter but I and O and four digits"):
        tle.catalog_number(text)


@pytest.mark.parametrize(("days_before", "epoch_day"), [(0.0, 6), (1.5, 5), (9.0, 5)])
def test_the_newest_set_at_or_before_the_start_is_taken_else_the_oldest(days_before, epoch_day):
    chosen = read_elements(SAMPLES / "two_satellites.omm", AT - timedelta(days=days_before))["MARSHLIGHT-1"]
    assert (chosen.epoch.day, chosen.sets_in_file) == (epoch_day, 2)


def test_a_newer_set_that_is_passed_over_is_remembered():
    early, late = (
        read_elements(SAMPLES / "two_satellites.omm", AT - timedelta(days=d))["MARSHLIGHT-1"] for d in (1.5, 0)
    )
    assert (early.newer_epoch, late.newer_epoch) == (datetime(2026, 12, 6, 18, tzinfo=UTC), None)


def test_which_set_is_told_in_words():
    chosen = read_elements(SAMPLES / "two_satellites.omm", AT)["MARSHLIGHT-1"]
    assert which_set(chosen, AT) == "element set of epoch 2026-12-06T18:00:00Z, 6.0 h old at the start; 2 in the file"
    early = AT - timedelta(days=4)
    assert "epoch 2026-12-06T18:00:00Z, 3.8 days younger than the start" in which_set(chosen, early)


def test_a_wrong_checksum_shows_the_expected_form_above_the_received_line(tmp_path):
    bad = LINES[1][:68] + "3"
    (fault,) = faults_of(tmp_path, "\n".join([LINES[0], bad, LINES[2]]))
    assert fault.splitlines() == [
        f"{tmp_path / 'set.txt'}: line 2: checksum must be 2, got '3'",
        "    expected form: 1 NNNNNC NNNNNAAA NNNNN.NNNNNNNN +.NNNNNNNN +NNNNN-N +NNNNN-N N NNNNN",
        f"    received:      {bad}",
    ]


def test_all_faults_of_a_file_are_told_at_once(tmp_path):
    short = LINES[2][:60]
    latitude = with_checksum(LINES[2][:8] + "197.5544" + LINES[2][16:])
    text = "\n".join([LINES[0], LINES[1], short, "OTHER", LINES[1], latitude, "ORPHAN"])
    found = faults_of(tmp_path, text)
    assert [fault.splitlines()[0].split(": ", 1)[1] for fault in found] == [
        "line 3: must have 69 ASCII columns, got 60",
        "line 6: columns 9-16 (inclination) must be from 0 to 180 deg, got '197.5544'",
        "line 7: must begin a line 1 that a line 2 follows, got 'ORPHAN'",
    ]


@pytest.mark.parametrize(
    ("line", "columns", "text", "rule"),
    [
        (1, (19, 32), "26400.75000000", "columns 19-32 (epoch) must be a day of that year, from 1 to 365 or 366"),
        (1, (54, 61), " 2x000-3", "columns 54-61 (B* drag term) must be five digits behind an assumed point"),
        (2, (27, 33), "00.1100", "columns 27-33 (eccentricity) must be seven digits behind an assumed point"),
        (2, (3, 7), "90002", "catalogue number must be that of line 1, 90001, got 90002"),
        (2, (53, 63), "ab.08756051", "columns 53-63 (mean motion) must be a decimal number, got 'ab.08756051'"),
    ],
)
def test_each_field_says_what_it_must_be(tmp_path, line, columns, text, rule):
    lines = list(LINES)
    lines[line] = with_checksum(lines[line][: columns[0] - 1] + text + lines[line][columns[1] :])
    (fault,) = faults_of(tmp_path, "\n".join(lines))
    assert f"line {line + 1}: {rule}" in fault


@settings(deadline=None)
@given(st.text(max_size=300))
def test_no_text_is_answered_with_anything_but_an_input_error(text):
    sets, faults = tle.parse_tle(text, "x")
    assert not sets
    assert all(fault.startswith("x: line ") for fault in faults)


@pytest.mark.filterwarnings("ignore")
def test_states_of_the_published_verification_satellites():
    """Vallado, Crawford, Hujsak, Kelso, AIAA 2006-6753: sets and states as shipped with the sgp4 package."""
    folder = Path(sgp4.__file__).parent
    sets = {}
    lines = [line for line in (folder / "SGP4-VER.TLE").read_text().splitlines() if line[:2] in ("1 ", "2 ")]
    for one, two in zip(lines[::2], lines[1::2], strict=True):
        found, _ = tle.parse_tle(f"{one[:69]}\n{two[:69]}", "verification")
        sets |= {each.catalog_number: each for each in found}
    checked = 0
    model = None
    for line in (folder / "tcppver.out").read_text().splitlines():
        words = line.split()
        if len(words) == 2:
            chosen = sets.get(str(int(words[0])))
            try:
                model = chosen.sgp4_model() if chosen else None
            except InputError:
                model = None
        elif model is not None:
            minutes, *state = map(float, words[:7])
            error, position_km, velocity_km_s = model.sgp4_tsince(minutes)
            if not error:
                assert position_km == pytest.approx(state[:3], abs=A_CENTIMETRE_KM)
                assert velocity_km_s == pytest.approx(state[3:], abs=A_HUNDREDTH_OF_A_MILLIMETRE_KM_S)
                checked += 1
    assert checked > 500


# --- OMM -------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("suffix", ["xml", "json", "csv"])
def test_omm_in_every_form_gives_the_set_of_the_tle(suffix):
    read, lines = read_one(SAMPLES / f"marshlight.omm.{suffix}"), read_one(SAMPLES / "marshlight.tle")
    assert read.source == "OMM"
    changes = {"source": "TLE", "international_designator": lines.international_designator}
    assert read.model_copy(update={**changes, "sets_in_file": 1}) == lines


def test_keyword_lines_drop_units_and_comments(tmp_path):
    text = (SAMPLES / "two_satellites.omm").read_text().replace("\nEPOCH =", "\nCOMMENT a remark = none\nEPOCH   =")
    assert read_elements(written(tmp_path, text), AT) == read_elements(SAMPLES / "two_satellites.omm", AT)


def test_a_csv_with_every_cell_quoted(tmp_path):
    rows = [line.split(",") for line in (SAMPLES / "marshlight.omm.csv").read_text().splitlines()]
    quoted = "\n".join(",".join(f'"{cell}"' for cell in row) for row in rows)
    assert read_elements(written(tmp_path, quoted), AT) == read_elements(SAMPLES / "marshlight.omm.csv", AT)


def test_a_date_by_day_of_year(tmp_path):
    text = (SAMPLES / "two_satellites.omm").read_text().replace("2026-12-06T18:00:00.000000", "2026-340T18:00:00Z")
    assert read_elements(written(tmp_path, text), AT)["SANDPIPER-2"].epoch == datetime(2026, 12, 6, 18, tzinfo=UTC)


def test_a_missing_keyword_and_a_wrong_frame_are_both_told(tmp_path):
    message, other = (SAMPLES / "two_satellites.omm").read_text().split("\n\n")[:2]
    text = message.replace("MEAN_ANOMALY = 272.8000\n", "") + "\n\n" + other.replace("TEME", "GCRF")
    found = faults_of(tmp_path, text)
    assert found[0].endswith("message at line 1: MEAN_ANOMALY must be given, got none")
    assert found[1].endswith("REF_FRAME must be TEME or TEME OF DATE or TEME OF EPOCH, got 'GCRF'")


def test_a_misspelt_keyword_is_named_where_the_right_one_is_missing(tmp_path):
    text = (SAMPLES / "two_satellites.omm").read_text().replace("INCLINATION", "INCLINATON")
    faults = faults_of(tmp_path, text)
    assert faults[0].endswith("message at line 1: INCLINATION must be given, got 'INCLINATON'")


def test_bare_rows_may_leave_out_frame_and_time_system(tmp_path):
    (row,) = json.loads((SAMPLES / "marshlight.omm.json").read_text())
    kept = {key: value for key, value in row.items() if key not in ("CENTER_NAME", "REF_FRAME", "TIME_SYSTEM")}
    assert read_one(written(tmp_path, json.dumps(kept))).mean_motion_rev_day == 15.08756051


def test_an_xml_document_type_is_refused_before_anything_is_expanded(tmp_path):
    text = '<?xml version="1.0"?><!DOCTYPE ndm [<!ENTITY a "b">]><ndm><omm>&a;</omm></ndm>'
    (fault,) = faults_of(tmp_path, text)
    assert fault.endswith("must not declare a document type or entities, got a <!DOCTYPE or <!ENTITY")


def test_a_file_over_fifty_megabytes_is_refused(tmp_path):
    path = tmp_path / "large.tle"
    with path.open("wb") as file:
        file.truncate(50_000_001)
    with pytest.raises(InputError, match="must be at most 50 MB"):
        read_elements(path, AT)


def test_a_set_that_sgp4_refuses_tells_satellite_epoch_and_its_own_words(tmp_path):
    rows = json.loads((SAMPLES / "marshlight.omm.json").read_text())
    rows[0]["MEAN_MOTION"] = "17.5"
    (fault,) = faults_of(tmp_path, json.dumps(rows))
    assert fault.endswith(
        "MARSHLIGHT-1: SGP4 refuses the element set of epoch 2026-12-06T18:00:00.000000Z:"
        " mrt is less than 1.0 which indicates the satellite has decayed"
    )


@pytest.mark.parametrize("value", ["0.0", "-1.0", "1.5e-05"])
def test_an_orbit_slower_than_the_moons_is_no_case_for_sgp4(tmp_path, value):
    rows = json.loads((SAMPLES / "marshlight.omm.json").read_text())
    rows[0]["MEAN_MOTION"] = value
    (fault,) = faults_of(tmp_path, json.dumps(rows))
    assert fault.endswith(
        "MARSHLIGHT-1: mean motion of the element set of epoch 2026-12-06T18:00:00.000000Z must be at least"
        f" 0.05 rev/day, got {float(value):g}"
    )


@pytest.mark.parametrize(
    ("text", "rule"),
    [
        ("", "must hold at least one element set or ephemeris, got none"),
        ("[1, 2]", "message 1: must be an object of keywords and plain values, got 1"),
        ("{", "must be JSON, got "),
        ("<ndm>", "must be well-formed XML in UTF-8, got "),
        ("OBJECT_NAME,MEAN_MOTION\na,b,c", "row 2: must have 2 columns as the header, got 3"),
        ("CCSDS_OMM_VERS = 3.0\nnonsense", "line 2: must be KEYWORD = value, got 'nonsense'"),
        ("COMMENT CCSDS_OMM_VERS\nA = 1", "line 2: must begin a line 1 that a line 2 follows, got 'A = 1'"),
    ],
)
def test_other_text_is_refused_with_a_reason(tmp_path, text, rule):
    assert any(rule in fault for fault in faults_of(tmp_path, text))


def test_one_name_for_two_satellites_is_refused(tmp_path):
    other = (SAMPLES / "low_inclination.tle").read_text().replace("SANDPIPER-2", "MARSHLIGHT-1")
    (fault,) = faults_of(tmp_path, "\n".join(LINES) + "\n" + other)
    assert fault.endswith("one name must stand for one satellite, got catalogue numbers 90001, 90002")


def test_a_naive_start_is_refused_with_the_fix():
    with pytest.raises(InputError, match=r"at must carry a time zone.*write 2026-12-07T00:00:00\+00:00"):
        read_elements(SAMPLES / "marshlight.tle", datetime(2026, 12, 7))


# --- OEM -------------------------------------------------------------------------------------------------------------


def test_an_ephemeris_message():
    read = read_one(SAMPLES / "marshlight.oem")
    assert isinstance(read, Ephemeris)
    (segment,) = read.segment
    assert (segment.frame, segment.interpolation, segment.degree, len(segment.moment)) == ("EME2000", "HERMITE", 9, 561)
    assert segment.moment[1] == datetime(2026, 12, 6, 22, 3, tzinfo=UTC)
    assert read.mean_motion_rev_day == pytest.approx(15.09, abs=0.1)  # osculating against mean: J2 over a revolution
    assert read.inclination_deg == pytest.approx(97.55, abs=0.2)  # EME2000 against the equator of date: 0.15 deg


@pytest.mark.parametrize(
    ("old", "new", "rule"),
    [
        (
            "REF_FRAME = EME2000",
            "REF_FRAME = MARS",
            "line 9: REF_FRAME must be TEME, ITRF, EME2000 or GCRF, got 'MARS'",
        ),
        ("TIME_SYSTEM = UTC", "TIME_SYSTEM = TDB", "line 10: TIME_SYSTEM must be UTC, got 'TDB'"),
        ("DEGREE = 9", "DEGREE = 99", "line 14: INTERPOLATION_DEGREE must be from 1 to 25, got '99'"),
        ("OBJECT_ID = 2026-901A\n", "", "metadata at line 6: OBJECT_ID must be given, got none"),
        (
            "22:03:00.000 ",
            "22:00:00.000 ",
            "line 18: must be later than the state before, got '2026-12-06T22:00:00.000'",
        ),
        ("22:06:00.000 ", "22:06:00.000 x ", "line 19: must be a date and six or nine numbers"),
    ],
)
def test_each_fault_of_an_ephemeris_names_its_line(tmp_path, old, new, rule):
    text = (SAMPLES / "marshlight.oem").read_text().replace(old, new, 1)
    (fault,) = faults_of(tmp_path, text)
    assert rule in fault


def test_covariances_are_passed_over(tmp_path):
    text = (
        SAMPLES / "marshlight.oem"
    ).read_text() + "COVARIANCE_START\nEPOCH = 2026-12-07T00:00:00\n1.0\nCOVARIANCE_STOP\n"
    assert read_one(written(tmp_path, text)) == read_one(SAMPLES / "marshlight.oem")


def test_states_are_numbers_of_the_file():
    state = read_one(SAMPLES / "marshlight.oem").segment[0].state
    assert np.shape(state) == (561, 6)
    assert state[0] == (-4230.214858, -5446.924814, -602.558200, -0.410996550, 1.128081348, -7.493160374)


def test_segments_out_of_order_are_put_in_order(tmp_path):
    head, _, states = (SAMPLES / "marshlight.oem").read_text().partition("META_STOP\n\n")
    rows = states.splitlines()
    text = head.partition("META_START")[0]
    for part in (rows[280:], rows[:281]):
        start, stop = part[0].split()[0], part[-1].split()[0]
        meta = "META_START" + head.partition("META_START")[2]
        meta = meta.replace("START_TIME = 2026-12-06T22:00:00.000", f"START_TIME = {start}")
        meta = meta.replace("STOP_TIME = 2026-12-08T02:00:00.000", f"STOP_TIME = {stop}")
        text += meta + "META_STOP\n" + "\n".join(part) + "\n"
    read = read_one(written(tmp_path, text))
    assert [segment.usable_from.day for segment in read.segment] == [6, 7]
    assert read.segment[0].usable_to == read.segment[1].usable_from


@pytest.mark.parametrize(
    "state",
    [
        "0 0 0 0 0 0",
        "7000 0 0 0 0 0",  # falls
        "7000 0 0 0 12 0",  # escapes: above 10.7 km/s at that radius
        "1000 0 0 0 7.5 0",
        "7000 0 0 0 6.9 0",  # perigee in the ground
        "9e5 0 0 0 0.6 0",
    ],
)
def test_a_state_of_no_orbit_about_the_earth_is_told(tmp_path, state):
    lines = (SAMPLES / "marshlight.oem").read_text().splitlines()
    number = next(k for k, line in enumerate(lines) if line.startswith("2026-12-06T22:03"))
    lines[number] = f"2026-12-06T22:03:00.000 {state}"
    (fault,) = faults_of(tmp_path, "\n".join(lines))
    assert fault.endswith(
        f"line {number + 1}: must be a state of an orbit about the Earth that stays above the ground,"
        f" got {lines[number]!r}"
    )


@pytest.mark.parametrize(("separator", "name"), [(";", "semicolons"), ("\t", "tabs")])
def test_a_table_of_messages_with_another_separator_is_told(tmp_path, separator, name):
    text = (SAMPLES / "marshlight.omm.csv").read_text().replace(",", separator)
    (fault,) = faults_of(tmp_path, text)
    assert fault.endswith(
        f"row 1: columns must be separated by commas, got {name}; save as comma-separated CSV with decimal points"
    )


@pytest.mark.parametrize(
    ("sample", "old", "new", "told"),
    [
        ("marshlight.omm.csv", "15.08756051", "15,08756051",
         "row 2: must have 21 columns as the header, got 22; are there decimal commas?"),
        ("marshlight.omm.xml", "15.08756051", "15,08756051",
         "message 1: MEAN_MOTION must be a number, got '15,08756051'; write decimals with a point"),
        ("marshlight.oem", "-4230.214858", "-4230,214858", "-7.493160374'; write decimals with a point"),
    ],
)  # fmt: skip
def test_decimal_commas_are_recognised(tmp_path, sample, old, new, told):
    text = (SAMPLES / sample).read_text()
    assert old in text
    (fault,) = faults_of(tmp_path, text.replace(old, new, 1))
    assert fault.endswith(told)


@pytest.mark.parametrize(
    ("text", "rule"),
    [
        (
            "9999-12-31T23:59:59.9999999",
            "must be a date that exists (date value out of range)",
        ),  # rounds into year 10000
        ("9999-366T00:00:00", "must be a date that exists (date value out of range)"),
        ("0001-000T00:00:00", "must be a date that exists (date value out of range)"),
        ("2026-366T00:00:00", "must be a date that exists (day of year must be from 001 to 365 or 366)"),
        ("2016-12-31T23:59:60.5", "must not be a leap second; write the second before it or after"),
    ],
)
def test_dates_at_the_ends_of_time_are_told(tmp_path, text, rule):
    rows = json.loads((SAMPLES / "marshlight.omm.json").read_text())
    rows[0]["EPOCH"] = text
    (fault,) = faults_of(tmp_path, json.dumps(rows))
    assert fault.endswith(f"message 1: EPOCH {rule}, got {text!r}")

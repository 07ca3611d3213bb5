"""Bad input: for every kind the exact words, which name file, key, rule and the value received."""

import os

import pytest
from mission_examples import ELEMENTS, MISSION, VARDHOLM, changed, faults

from planner.errors import InputError
from planner.mission import elements, files, text
from planner.mission.files import load_mission

MODES = "['K high rate', 'S low rate']"

# (what is put in place of what, and the one message)
FAULTY_KEYS = {
    "negative capacity": (
        ("cell_capacity_ah = 1.5", "cell_capacity_ah = -1.5"),
        "battery.cell_capacity_ah: must be above 0, got -1.5",
    ),
    "heater in watts as text": (
        ("power_w = 1.5", 'power_w = "1.5 W"'),
        "load[3] \"battery heater\".power_w: must be a number, got '1.5 W'",
    ),
    "empty curve": (
        ("[battery]", "[battery]\nopen_circuit = []"),
        "battery.open_circuit: a table needs two rows or more, got 0; leave the key out for the built-in table",
    ),
    "charge not rising": (
        ("[battery]", "[battery]\nopen_circuit = [[0.0, 2.9], [60.0, 3.3], [50.0, 3.2], [100.0, 3.4]]"),
        "battery.open_circuit: the first column must rise, got [0.0, 60.0, 50.0, 100.0]",
    ),
    "voltage not rising": (
        ("[battery]", "[battery]\nopen_circuit = [[0.0, 2.9], [50.0, 3.3], [100.0, 3.3]]"),
        "battery.open_circuit: cell_v must rise with charge, got [2.9, 3.3, 3.3]",
    ),
    "half a row": (
        ("[battery]", "[battery]\nopen_circuit = [[0.0, 2.9], [50.0], [100.0, 3.3]]"),
        "battery.open_circuit[2][2]: is required",
    ),
    "not a number in a table": (
        ("[battery]", "[battery]\nopen_circuit = [[0.0, 2.9], [50.0, nan], [100.0, 3.3]]"),
        "battery.open_circuit[2][2]: must be a finite number, got nan",
    ),
    "floor above ceiling": (
        ("cell_min_v = 2.9", "cell_min_v = 3.9"),
        "battery: cell_min_v must be below cell_max_v, got 3.9 and 3.5",
    ),
    "floor above the end": (
        ("soc_floor_pct = 65.0", "soc_floor_pct = 85.0"),
        "policy: soc_end_pct must not be below soc_floor_pct, got 80 and 85",
    ),
    "floor above full": (
        ("soc_floor_pct = 65.0", "soc_floor_pct = 165.0"),
        "policy.soc_floor_pct: must be at most 100, got 165.0",
    ),
    "no time zone": (
        ("start = 2026-12-07T00:00:00Z", "start = 2026-12-07T00:00:00"),
        "start: must carry a time zone (append Z for UTC), got 2026-12-07T00:00:00",
    ),
    "a start in quotes": (
        ("start = 2026-12-07T00:00:00Z", 'start = "2026-12-07T00:00:00Z"'),
        "start: must be a date and time without quotes, such as 2026-12-07T00:00:00Z, got '2026-12-07T00:00:00Z'",
    ),
    "before the first satellite": (
        ("start = 2026-12-07T00:00:00Z", "start = 1956-12-31T23:59:59Z"),
        "start: must be in the years 1957 to 2049, got 1956-12-31T23:59:59+00:00",
    ),
    "after the ephemeris": (
        ("start = 2026-12-07T00:00:00Z", "start = 2050-01-01T00:00:00Z"),
        "start: must be in the years 1957 to 2049, got 2050-01-01T00:00:00+00:00",
    ),
    "span of zero": (("days = 7.0", "days = 0.0"), "days: must be above 0, got 0.0"),
    "span of 61 days": (("days = 7.0", "days = 61.0"), "days: must be at most 60, got 61.0"),
    "NaN": (("cell_capacity_ah = 1.5", "cell_capacity_ah = nan"),
            "battery.cell_capacity_ah: must be a finite number, got nan"),
    "infinity": (("cell_capacity_ah = 1.5", "cell_capacity_ah = -inf"),
                 "battery.cell_capacity_ah: must be a finite number, got -inf"),
    "1e308": (("cell_capacity_ah = 1.5", "cell_capacity_ah = 1e308"),
              "battery.cell_capacity_ah: must be at most 1e+12, got 1e+308"),
    "1e-308": (("cell_capacity_ah = 1.5", "cell_capacity_ah = 1e-308"),
               "battery.cell_capacity_ah: must be at least 1e-09, got 1e-308"),
    "decibels beyond reason": (("line_loss_db = 1.0", "line_loss_db = 1e6"),
                               'transmitter[1] "K high rate".line_loss_db: must be at most 300, got 1000000.0'),
    "null axis": (("boresight = [0.0, 0.0, 1.0]", "boresight = [0.0, 0.0, 0.0]"),
                  'transmitter[1] "K high rate".boresight: must not be the null vector, got (0.0, 0.0, 0.0)'),
    "unknown antenna": (
        ('kind = "patch"', 'kind = "pach"'),
        "transmitter[2] \"S low rate\".antenna: kind must be one of 'isotropic', 'gain only', 'parabola', 'patch',"
        " 'array', 'flat reflecting array', 'measured pattern', got 'pach'; did you mean \"patch\"?",
    ),
    "an antenna like no known one": (
        ('kind = "patch"', 'kind = "whip"'),
        "transmitter[2] \"S low rate\".antenna: kind must be one of 'isotropic', 'gain only', 'parabola', 'patch',"
        " 'array', 'flat reflecting array', 'measured pattern', got 'whip'",
    ),
    "a word that a choice has otherwise": (
        ('when = "eclipse"', 'when = "eclipsed"'),
        "load[3] \"battery heater\".when: must be one of 'always', 'sunlit', 'eclipse' or 'windows', got 'eclipsed';"
        ' did you mean "eclipse"?',
    ),
    "no mode at all in the codes": (
        ('modcods = ["convolutional 1/2 + RS(255,223)"]', "modcods = []"),
        'transmitter[2] "S low rate".modcods: must have 1 or more entries, got ()',
    ),
    "unknown mode of a daily contact": (
        ('daily_contact_modes = ["S low rate"]', 'daily_contact_modes = ["S lo rate"]'),
        f"policy.daily_contact_modes: must name modes of {MODES}, got 'S lo rate'; did you mean \"S low rate\"?",
    ),
    "unknown mode of a kept pass": (
        ("[policy]", '[policy]\nkeep = ["marshlight-1.vardholm.20261207-01:S band"]'),
        f"policy.keep: must be PASS:MODE with a mode of {MODES},"
        " got 'marshlight-1.vardholm.20261207-01:S band'",
    ),
    "modes alike": (
        ('mode = "S low rate"', 'mode = "K-high-rate"'),
        "transmitter: mode names must differ in their letters and digits, got ['K high rate', 'K-high-rate']",
    ),
    "more stored than fits": (
        ("stored_mbit = 120000.0", "stored_mbit = 1200000.0"),
        "start_state.stored_mbit: must fit the recorder's 400000 Mbit (capacity less reserve), got 1.2e+06",
    ),
    "windows without need": (
        ('when = "windows"\n', 'when = "sunlit"\n'),
        'load[4] "orbit trim thruster": windows must be given exactly when `when` is "windows",'
        " got 'sunlit' and 1 windows",
    ),
}  # fmt: skip


@pytest.mark.parametrize(("change", "message"), FAULTY_KEYS.values(), ids=FAULTY_KEYS)
def test_a_faulty_key_is_told_with_file_key_rule_and_value(mission_folder, change, message):
    changed(mission_folder, *change)
    assert faults(mission_folder) == [f"{MISSION}: {message}"]


def test_stations_that_are_no_list(mission_folder):
    changed(mission_folder, "stations = [", "stations = 5\nignored = [")
    assert faults(mission_folder) == [
        f"{MISSION}: stations: must be a list in brackets, got 5",
        f"{MISSION}: ignored: unknown key",
    ]


@pytest.mark.parametrize(
    ("old", "new", "messages"),
    [
        ("soc_floor_pct", "soc_flor_pct", ["policy.soc_floor_pct: is required",
         'policy.soc_flor_pct: unknown key; did you mean "soc_floor_pct"?']),
        ("days =", "day =", ["days: is required", 'day: unknown key; did you mean "days"?']),
        ("cell_area_m2", "cell_area_m", ['panel[1] "left wing".cell_area_m2: is required',
         'panel[1] "left wing".cell_area_m: unknown key; did you mean "cell_area_m2"?']),
        ("[recorder]", "[recordr]", ['recordr: unknown key; did you mean "recorder"?',
         "recorder.capacity_mbit: is required"]),
    ],
)  # fmt: skip
def test_an_unknown_key_is_told_with_the_nearest_known_one(mission_folder, old, new, messages):
    changed(mission_folder, old, new)
    assert faults(mission_folder) == [f"{MISSION}: {message}" for message in messages]


def test_a_wrong_checksum_is_told_above_the_line_received(mission_folder):
    changed(mission_folder, "97.5544", "97.5545", ELEMENTS)
    (fault,) = faults(mission_folder)
    assert fault.splitlines() == [
        f"missions/../{ELEMENTS}: line 3: checksum must be 3, got '2'",
        "    expected form: 2 NNNNN NNN.NNNN NNN.NNNN NNNNNNN NNN.NNNN NNN.NNNN NN.NNNNNNNNNNNNNN",
        "    received:      2 90001  97.5545  53.0346 0011000  87.4000 272.8000 15.08756051 40212",
    ]


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("vardholm.toml", "vardholn.toml",
         'missions/../stations/vardholn.toml: no such file; did you mean "vardholm.toml"?'),
        ("marshlight.tle", "marshlite.tle",
         'missions/../tle_samples/marshlite.tle: no such file; did you mean "marshlight.tle"?'),
        ("../tle_samples/marshlight.tle", "../tle_samples",
         "missions/../tle_samples: must be a regular file, got a folder"),
        ("../tle_samples/marshlight.tle", "/dev/zero", "/dev/zero: must be a regular file, got a device or pipe"),
        ("../tle_samples/marshlight.tle", "tle\\u0000",
         f"{MISSION}: elements: must be a file name in printable characters, got 'tle\\x00'"),
    ],
)  # fmt: skip
def test_a_file_that_cannot_be_read(mission_folder, old, new, message):
    changed(mission_folder, old, new)
    assert faults(mission_folder) == [message]


def test_a_missing_mission_file_names_its_neighbour(mission_folder):
    with pytest.raises(InputError) as caught:
        load_mission(mission_folder / "missions" / "marshlite.toml")
    assert str(caught.value) == (
        f'{mission_folder}/missions/marshlite.toml: no such file; did you mean "marshlight.toml"?'
    )


def test_elements_older_than_the_policy_allows(mission_folder):
    changed(mission_folder, "start = 2026-12-07T00:00:00Z", "start = 2027-01-07T00:00:00Z")
    assert faults(mission_folder) == [
        f"missions/../{ELEMENTS}: MARSHLIGHT-1: epoch 2026-12-06T18:00:00Z must be within policy.elements_max_age_days"
        " = 14 of the start, got 31.2 days old; fetch newer elements"
    ]


def test_elements_from_long_after_the_start(mission_folder):
    changed(mission_folder, "start = 2026-12-07T00:00:00Z", "start = 2026-11-06T18:00:00Z")
    assert faults(mission_folder)[0].endswith("got 30.0 days after it; fetch older elements")


def test_a_station_without_an_antenna(mission_folder):
    path = mission_folder / VARDHOLM
    begin, _, rest = path.read_text().partition("[antenna]")
    path.write_text(begin + "[[receiver]]" + rest.partition("[[receiver]]")[2])
    assert faults(mission_folder) == [f"missions/../{VARDHOLM}: antenna: is required"]


@pytest.mark.parametrize(
    ("name", "shown"),
    [('"Vard\\nholm"', r"'Vard\nholm'"), ('" "', "' '"), ('"a\\u001b[31mb"', r"'a\x1b[31mb'"),
     (f'"{"x" * 81}"', "'" + 58 * "x" + "…")],
)  # fmt: skip
def test_names_that_no_line_can_hold(mission_folder, name, shown):
    changed(mission_folder, '"Vardholm"', name, VARDHOLM)
    assert faults(mission_folder) == [
        f"missions/../{VARDHOLM}: name: must be one printable line of 1 to 80 characters, got {shown}"
    ]


@pytest.mark.parametrize("name", ['Bay, north; \\"old\\" dish', "🛰 dish", "=HYPERLINK", "'quoted'"])
def test_names_with_commas_quotes_and_pictures_are_names(mission_folder, name):
    changed(mission_folder, '"Vardholm"', f'"{name}"', VARDHOLM)
    assert load_mission(mission_folder / MISSION).stations[0].name == name.replace('\\"', '"')


@pytest.mark.parametrize("name", ["Corrie Head", "corrie-head", "CORRIE_HEAD"])
def test_names_that_would_be_the_same_in_ids(mission_folder, name):
    changed(mission_folder, '"Vardholm"', f'"{name}"', VARDHOLM)
    assert faults(mission_folder) == [
        f"{MISSION}: stations: names must differ in their letters and digits, got {name!r} and 'Corrie Head'"
    ]


def test_one_station_named_twice_by_a_single_letter(mission_folder):
    changed(mission_folder, '"Vardholm"', '"A"', VARDHOLM)
    changed(mission_folder, "corrie_head.toml", "vardholm.toml")
    assert faults(mission_folder) == [
        f"{MISSION}: stations: names must differ in their letters and digits, got 'A' and 'A'"
    ]


def test_a_day_that_does_not_exist_is_told_once(mission_folder):
    changed(mission_folder, "uplink = true", 'uplink = true\nhours = { days = ["monday"] }', VARDHOLM)
    assert faults(mission_folder) == [
        f"missions/../{VARDHOLM}: hours.days[1]: must be one of 'mon', 'tue', 'wed', 'thu', 'fri', 'sat' or 'sun',"
        " got 'monday'; did you mean \"mon\"?"
    ]


def test_faults_of_several_files_are_told_at_once(mission_folder):
    changed(mission_folder, "days = 7.0", "days = -1.0")
    changed(mission_folder, "cell_capacity_ah = 1.5", "cell_capacity_ah = true")
    changed(mission_folder, "latitude_deg = 69.83", "latitude_deg = 169.83", VARDHOLM)
    changed(mission_folder, "97.5544", "97.5545", ELEMENTS)
    (mission_folder / "stations" / "dry_pan.toml").unlink()
    first_lines = [fault.splitlines()[0] for fault in faults(mission_folder)]
    assert first_lines == [
        f"{MISSION}: days: must be above 0, got -1.0",
        f"{MISSION}: battery.cell_capacity_ah: must be a number, got True",
        f"missions/../{ELEMENTS}: line 3: checksum must be 3, got '2'",
        f"missions/../{VARDHOLM}: latitude_deg: must be at most 90, got 169.83",
        "missions/../stations/dry_pan.toml: no such file",
    ]


def test_a_spacecraft_file_that_is_missing_is_told_once(mission_folder):
    changed(
        mission_folder, "[start_state]", '[[satellite]]\nname = "MARSHLIGHT-1"\nspacecraft = "x.toml"\n[start_state]'
    )
    assert faults(mission_folder) == ["missions/x.toml: no such file"]


def test_a_satellite_that_has_no_elements(mission_folder):
    changed(mission_folder, "[start_state]", '[[satellite]]\nname = "MARSHLIGT-1"\n[start_state]')
    assert faults(mission_folder) == [
        f"{MISSION}: satellite.name: must be a satellite of ../{ELEMENTS}, got 'MARSHLIGT-1';"
        ' did you mean "MARSHLIGHT-1"?'
    ]


def test_one_satellite_described_twice(mission_folder):
    table = '[[satellite]]\nname = "MARSHLIGHT-1"\n'
    changed(mission_folder, "[start_state]", f"{table}{table}[start_state]")
    assert faults(mission_folder) == [
        f"{MISSION}: satellite: names must differ in their letters and digits, got 'MARSHLIGHT-1' and 'MARSHLIGHT-1'"
    ]


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"name = 1\nname = 2\n", "must be TOML: Cannot overwrite a value (at line 2, column 9), got 'name = 2'"),
        (b"name = \xff", "must be UTF-8 text, byte 7 is 0xff"),
        (b"name = 1\x00\n", "must be UTF-8 text, byte 8 is 0x00"),
        ("name = 1".encode("utf-16"), "must be UTF-8 text, byte 0 is 0xff; it looks like UTF-16, save it as UTF-8"),
        (b"n\0a\0" * 20, "must be UTF-8 text, byte 1 is 0x00; it looks like UTF-16, save it as UTF-8"),
        (b"x = " + b"[" * 5000, "must be TOML: nested too deeply"),
    ],
)
def test_what_is_not_toml(mission_folder, content, message):
    (mission_folder / MISSION).write_bytes(content)
    assert faults(mission_folder) == [f"{MISSION}: {message}"]


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("soc_pct = 92.0", "soc_pct = 92,0", "got 'soc_pct = 92,0'; write decimals with a point"),
        ("start = 2026-12-07T00:00:00Z", "start = 2016-12-31T23:59:60Z",
         "got 'start = 2016-12-31T23:59:60Z'; a leap second cannot be written, take the second before it or after"),
        ('mode = "K high rate"', "mode = “K high rate”", "got 'mode = “K high rate”'; write straight quotes"),
        ("soc_pct = 92.0", 'soc_pct = "92,0"',
         "start_state.soc_pct: must be a number, got '92,0'; write decimals with a point"),
        ("turnaround_s = 120.0", "shifts.open = [[06:00, 22:00]]",
         "got 'shifts.open = [[06:00, 22:00]]'; times of day need seconds, such as 06:00:00"),
        ("turnaround_s = 120.0", "shifts.open = [\n  [6:00, 22:00],\n]",
         "got '[6:00, 22:00],'; times of day need seconds, such as 06:00:00"),
        ("start = 2026-12-07T00:00:00Z", "start = 2026-12-07T00:00Z",
         "got 'start = 2026-12-07T00:00Z'; times of day need seconds, such as 06:00:00"),
    ],
)  # fmt: skip
def test_what_a_line_often_gets_wrong_is_told_with_its_mend(mission_folder, old, new, told):
    changed(mission_folder, old, new)
    (fault,) = faults(mission_folder)
    assert fault.endswith(told)


@pytest.mark.parametrize(
    "line",
    [
        "open = [[06:00:00, 22:00:00.5]]",
        "start = 2026-12-07T00:00:00+01:00",
        'name = "passes from 06:00 to 22:00"',
        "days = 7.0  # from 06:00 on",
    ],
)
def test_right_times_and_times_in_words_want_no_seconds(mission_folder, line):
    """On a line that another slip spoils: one bracket too many at its end."""
    spoiled = line.replace("  #", "]  #") if "#" in line else line + "]"
    (mission_folder / MISSION).write_text(f"# for one week, one satellite, two stations\n{spoiled}\n")
    (fault,) = faults(mission_folder)
    assert fault.startswith(f"{MISSION}: must be TOML: ")
    assert fault.endswith(f", got {spoiled!r}")


@pytest.mark.parametrize(
    ("other", "kind"),
    [
        ("tle_samples/marshlight.tle", "a two-line element set"),
        ("tle_samples/marshlight.omm.csv", "a CSV table"),
        ("tle_samples/marshlight.omm.json", "JSON"),
        ("tle_samples/marshlight.omm.xml", "XML"),
    ],
)
def test_a_file_of_another_form_given_as_a_mission(mission_folder, other, kind):
    (fault,) = faults(mission_folder, other)
    assert fault.startswith(f"{other}: must be TOML: ")
    assert fault.endswith(f"; it looks like {kind}")


def test_a_file_of_another_kind_is_told_as_what_it_is(mission_folder):
    assert faults(mission_folder, VARDHOLM) == [f"{VARDHOLM}: must be a mission file, got a station file"]
    changed(mission_folder, '"../stations/vardholm.toml"', '"craft.toml"')
    (mission_folder / "missions" / "craft.toml").write_text("recorder = 1\n")
    assert "missions/craft.toml: must be a station file, got a spacecraft file" in faults(mission_folder)


def test_an_empty_file_lacks_every_key(mission_folder):
    (mission_folder / MISSION).write_text("")
    required = (
        "name",
        "elements",
        "stations",
        "start",
        "days",
        "policy",
        "transmitter",
        "battery",
        "panel",
        "recorder",
    )
    assert faults(mission_folder) == [f"{MISSION}: {key}: is required" for key in required]


def test_files_beyond_50_mb_are_not_read(mission_folder):
    os.truncate(mission_folder / VARDHOLM, 50_100_000)
    assert faults(mission_folder) == [f"missions/../{VARDHOLM}: must be at most 50 MB, got 50.1 MB"]
    assert text.LARGEST_FILE_BYTES == 50_000_000


def test_ten_thousand_stations_are_refused_before_they_are_read(mission_folder, monkeypatch):
    listed = ", ".join(['"../stations/vardholm.toml"'] * 10_000)
    path = mission_folder / MISSION
    begin, _, rest = path.read_text().partition("stations = [")
    path.write_text(f"{begin}stations = [{listed}]{rest.partition(']')[2]}")
    read = []
    monkeypatch.setattr(files, "_station", lambda reader, name: read.append(name))
    (fault,) = faults(mission_folder)
    assert fault.startswith(f"{MISSION}: stations: must have at most 500 entries, got ('../stations/vardholm.toml', ")
    assert len(read) == files.MOST_STATIONS


def test_more_passes_than_fit_are_refused(mission_folder, monkeypatch):
    monkeypatch.setattr(files, "MOST_STATION_DAYS", 40)
    assert faults(mission_folder) == [f"{MISSION}: satellites x stations x days must be at most 40, got 1 x 6 x 7 = 42"]


def test_sixty_days_are_a_mission(mission_folder):
    changed(mission_folder, "days = 7.0", "days = 60.0")
    assert load_mission(mission_folder / MISSION).span_s == 60 * 86_400


def test_every_file_read_is_listed_with_its_hash(mission_folder):
    mission = load_mission(mission_folder / MISSION)
    names = [name for name, _ in mission.inputs]
    assert names == sorted(["marshlight.toml", f"../{ELEMENTS}", *(f"../stations/{p.name}" for p in
                            (mission_folder / "stations").iterdir())])  # fmt: skip
    assert all(len(digest) == 64 for _, digest in mission.inputs)


def test_changes_are_checked_anew(marshlight):
    assert marshlight.with_changes(policy={"soc_floor_pct": 55.0}).policy.soc_floor_pct == 55.0
    with pytest.raises(InputError) as caught:
        marshlight.with_changes(policy={"soc_floor_pct": 90.0})
    assert str(caught.value) == "policy: soc_end_pct must not be below soc_floor_pct, got 80 and 90"
    with pytest.raises(InputError) as caught:
        marshlight.with_changes(start_state={"soc_pc": 90.0})
    assert str(caught.value) == "start_state: soc_pc: unknown key"


def test_files_of_more_lines_than_memory_holds(mission_folder, monkeypatch):
    monkeypatch.setattr(text, "MOST_LINES", 20)
    (mission_folder / ELEMENTS).write_bytes(b"x\n" * 10 + b"y\r\n" * 6 + "z\u2028".encode() * 5)
    assert f"missions/../{ELEMENTS}: must have at most 20 lines, got 21" in faults_with_short_mission(mission_folder)


def faults_with_short_mission(folder) -> list[str]:
    """Of a mission file of few lines, that names one element file and one station."""
    (folder / MISSION).write_text(f'elements = "../{ELEMENTS}"\nstations = ["none"]\n')
    return faults(folder)


def test_trees_that_memory_does_not_hold(mission_folder, monkeypatch):
    monkeypatch.setattr(elements, "MOST_NESTED", 20)
    (mission_folder / ELEMENTS).write_text("[" + "0, " * 10 + "0]")
    assert faults(mission_folder) == [f"missions/../{ELEMENTS}: must be at most 20 characters as XML or JSON, got 33"]


def test_how_many_more_faults_there_are_survives_being_told_on(mission_folder):
    (mission_folder / ELEMENTS).write_text("x\n" * 500)
    assert faults(mission_folder)[-1] == "and 450 more faults"

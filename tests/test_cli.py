"""The commands as a shell sees them: exit statuses, words and files."""

import json
import re
import shutil
from pathlib import Path

import pytest
from shell import command, in_a_terminal, started

from planner import cli
from planner.cli import main
from planner.export.folder import claim_folder, verify_set
from planner.printing import counted

ROOT = Path(__file__).parents[1]
K = "K high rate"
COMMANDS = ("check", "passes", "link", "week", "audit", "afford", "compare", "pointing", "cards")
KEYS = ("UID", "STATUS", "SEQUENCE")
LINK_KEYS = (
    "satellite", "station", "mode", "modcod", "elevation_deg", "availability_pct", "slant_range_km", "eirp_dbw",
    "free_space_loss_db", "atmospheric_loss_db", "system_temperature_k", "gt_dbk", "cn0_dbhz", "ebn0_db", "esn0_db",
    "required_db", "margin_db", "flux_dbw_m2", "flux_limit_dbw_m2", "flux_bandwidth_hz", "lines",
)  # fmt: skip

LEAD = "upload_lead_h = 6.0"


@pytest.fixture
def here(quick_folder, monkeypatch):
    monkeypatch.chdir(quick_folder)
    return quick_folder


@pytest.fixture(scope="module")
def verbose(quick_folder):
    """The small week, written by a process of its own that says all it can."""
    done = command(quick_folder, "week", "--out", "week", "--verbose", PYTHONHASHSEED="1")
    assert done.returncode == 0
    return done


@pytest.fixture(scope="module")
def week(quick_folder, verbose):
    return quick_folder / "week"


def pass_of(week) -> str:
    return (week / "contacts.csv").read_text().splitlines()[1].split(",")[1]


# --- done ----------------------------------------------------------------------------------------------------------


def test_a_second_run_writes_the_same_bytes(quick_folder, week):
    done = command(quick_folder, "week", "--out", "again", PYTHONHASHSEED="2")
    assert done.returncode == 0
    for path in week.iterdir():
        same = (quick_folder / "again" / path.name).read_bytes() == path.read_bytes()
        assert same or path.name == "run_log.json", path.name


def test_what_week_wrote_is_whole_and_passes_the_audit(here, week, capsys):
    assert verify_set(week) == ()
    assert main(["audit", "week/contacts.csv"]) == 0
    assert (
        capsys.readouterr().out
        == f"{len((week / 'contacts.csv').read_text().splitlines()) - 1} contacts keep every limit\n"
    )


def test_check_and_passes_and_quiet_words(here, capsys):
    assert main(["check"]) == 0
    said = capsys.readouterr().out
    assert said.endswith("\n3 files read, no fault found.\n")
    assert re.search(r"^../stations/vardholm.toml +[0-9a-f]{16}… +outside that folder", said, re.MULTILINE)
    assert re.search(
        r"^battery +4S2P LiFePO4 3 Ah, 13\.\d V half full, 3\d\.\d Wh at health 0\.97;", said, re.MULTILINE
    )
    assert main(["passes", "missions/marshlight.toml"]) == 0
    listed = capsys.readouterr().out.splitlines()
    assert listed[-1] == f"{len(listed) - 2} passes"
    assert main(["passes", "--csv", "passes.csv"]) == 0
    assert len((here / "passes.csv").read_text().splitlines()) == len(listed) - 1


def checked(folder, capsys, **new) -> list[str]:
    """Lines of `check` on the demo with some lines of its file changed, blanks alike; none is too wide to read."""
    text = (folder / "missions" / "marshlight.toml").read_text()
    for old, changed in new.items():
        text, count = re.subn(rf"^{old} = .*$", changed, text, count=1, flags=re.MULTILINE)
        assert count == 1
    (folder / "missions" / "changed.toml").write_text(text)
    assert main(["check", str(folder / "missions" / "changed.toml")]) == 0
    lines = [line.rstrip() for line in capsys.readouterr().out.splitlines()]
    assert max(map(len, lines)) <= 120
    return [re.sub(" +", " ", line).strip() for line in lines]


@pytest.mark.parametrize(
    "line",
    [
        "Corrie Head 57.62 deg N 6.21 deg W 65 m 10 deg 2.8 m K 190 K, S 110 K 06:00-22:00, closed once",
        "Dry Pan 30.88 deg S 21.61 deg E 1180 m 7 deg 3 m K 180 K, S 110 K always",
        "slew 1 deg/s, 10 s to settle, 1 W more while it turns",
        "loads bus 4.6 W: always",
        "camera and processor 2.4 W: sunlit, duty 0.5",
        "battery heater 1.5 W: eclipse, while the battery is below 8 °C",
        "orbit trim thruster 12 W: 1 window, from 2026-12-10T13:05:00Z",
        "filled by wetland camera 12 Mbit/s: sunlit, duty 0.5",
        "at the start charge 92 % ± 4, 120000 Mbit stored, commands aboard until 2026-12-08T00:00:00Z",
        "pessimistic charge 88.0 % at the start; battery at health 0.85, 6 K colder, resistance x 1.4",
        "panels at end of life, x 0.98; loads x 1.04; transmitters x 1.03",
        "spread one sigma: capacity 3 %, resistance 15 %, array 3 %, loads 3 %, transmitters 2 %; 1000 weeks",
        "aging one sigma along the track: 1 km at epoch, + 2 km/day, + 0.5 km/day²",
        "S low rate 2245 MHz S LHCP 1 W 6 W patch yes",
        "K high rate 40 Mbaud 11, variable 1.5 dB 8 s",
    ],
)
def test_check_tells_of_the_demo(mission_folder, capsys, line):
    assert line in checked(mission_folder, capsys)


def test_check_tells_what_is_left_out_or_otherwise(mission_folder, capsys):
    ends = "2026-12-11T00:00:00Z], [2026-12-09T06:00:00Z, 2026-12-09T07:00:00Z"
    lines = checked(
        mission_folder,
        capsys,
        days="days = 1.0",
        commands_aboard_until="",
        health="health = 0.8",
        array_end_of_life="array_end_of_life = false",
        windows=f"windows = [[2026-12-10T13:05:00Z, {ends}]]\nduty = 0.25",
        settle_s=f"settle_s = 10.0\nno_slew_windows = [[2026-12-10T13:05:00Z, {ends}]]",
    )
    assert lines[0] == "MARSHLIGHT-1 week 50: 1 day from 2026-12-07T00:00:00Z"
    assert "orbit trim thruster 12 W: 2 windows, the first from 2026-12-09T06:00:00Z, duty 0.25" in lines
    assert (
        "slew 1 deg/s, 10 s to settle, 1 W more while it turns; none in 2 windows, the first from 2026-12-09T06:00:00Z"
        in lines
    )
    [pessimistic] = [line for line in lines if line.startswith("pessimistic ")]
    assert "battery at health 0.8, " in pessimistic  # the battery's own, which is lower
    assert "panels x 0.98; loads x 1.04; transmitters x 1.03" in lines
    [start] = [line for line in lines if line.startswith("at the start ")]
    assert start.endswith("commands aboard until 2026-12-08T00:00:00Z")  # the first day


def test_check_tells_of_commands_that_are_always_aboard(mission_folder, capsys):
    lines = checked(mission_folder, capsys, upload_lead_h="")
    assert "at the start charge 92 % ± 4, 120000 Mbit stored, commands always aboard" in lines


@pytest.mark.parametrize(
    ("longitude", "told"), [("353.79", "6.21 deg W"), ("-180.0", "180.00 deg W"), ("0", "0.00 deg E")]
)
def test_longitudes_all_round_have_their_side(mission_folder, capsys, longitude, told):
    path = mission_folder / "stations" / "corrie_head.toml"
    path.write_text(re.sub(r"longitude_deg = .*", f"longitude_deg = {longitude}", path.read_text()))
    assert any(line.startswith(f"Corrie Head 57.62 deg N {told} ") for line in checked(mission_folder, capsys))


def test_one_is_no_plural():
    """As English has it: one contact, no contacts, two passes."""
    assert [counted(n, "contact") for n in (0, 1, 2)] == ["0 contacts", "1 contact", "2 contacts"]
    assert [counted(n, "pass", "passes") for n in (1, 2)] == ["1 pass", "2 passes"]


def test_the_link_as_json_has_every_key(here, capsys):
    assert main(["link", "--station", "Vardholm", "--mode", K, "--elevation", "30", "--json"]) == 0
    budget = json.loads(capsys.readouterr().out)
    assert set(LINK_KEYS) <= set(budget)
    assert all(set(line) == {"item", "value", "unit", "source"} for line in budget["lines"])


def test_a_link_exits_0_whatever_its_margin(here, capsys):
    words = ["link", "--station", "Vardholm", "--mode", K, "--elevation", "0.5", "--availability", "99.9", "--json"]
    assert main(words) == 0
    assert json.loads(capsys.readouterr().out)["margin_db"] < 0


def test_afford_as_words_and_as_json(here, week, capsys):
    words = ["afford", "--pass", pass_of(week), "--mode", K, "--contacts", "week/contacts.csv"]
    status = main(words)
    said = capsys.readouterr().out
    assert said.startswith(("YES, affordable: ", "NO")[status])
    assert re.search(r"in place of, already planned +\S+, \d+ s on air", said)
    assert main([*words, "--json"]) == status
    assert json.loads(capsys.readouterr().out)["affordable"] == (status == 0)


def test_afford_says_where_only_a_rule_of_the_week_is_in_the_way(here, week, capsys):
    """A rule without a figure, as that of a contact which would carry the commands up."""
    text = (here / "missions" / "marshlight.toml").read_text()
    text = text.replace("aboard_until = 2026-12-08", "aboard_until = 2026-12-07").replace(
        "[policy]", "[policy]\n" + LEAD
    )
    (here / "other").mkdir()
    (here / "other" / "unled.toml").write_text(text)
    (here / "other" / "none.csv").write_text((week / "contacts.csv").read_text().splitlines()[0] + "\n")
    words = ["afford", "other/unled.toml", "--pass", pass_of(week), "--mode", K, "--contacts", "other/none.csv"]
    assert main(words) == 1
    said = capsys.readouterr().out
    assert re.search(r"the battery alone +could pay for the whole window", said)
    assert re.search(r"also in conflict +no contact with uplink between 48 h and 6 h before it can carry its", said)


def test_two_equal_weeks_compare_as_equal(here, week, capsys):
    assert main(["compare", "week", "week"]) == 0
    assert capsys.readouterr().out.startswith("no contact changed: all ")


def test_hand_over_writes_whole_sets(here, week, capsys):
    assert main(["pointing", "--contacts", "week/contacts.csv", "--out", "pointing", "--step", "30"]) == 0
    assert verify_set(here / "pointing", "pointing.json") == ()


def rows(path) -> dict[str, str]:
    """UID -> status and sequence of a calendar's events, as RFC 5545 writes them (lines of these are never folded)."""
    events = re.findall(r"BEGIN:VEVENT.*?END:VEVENT", path.read_text(), re.DOTALL)
    fields = ({key: re.search(rf"^{key}:(\S+)", event, re.MULTILINE)[1] for key in KEYS} for event in events)
    return {event["UID"]: f"{event['STATUS']} {event['SEQUENCE']}" for event in fields}


def test_a_replan_says_what_it_changed_and_its_calendar_follows_the_issue_before(here, week, capsys):
    """Into the folder that it replaces, and into a new one."""
    shutil.copytree(week, here / "replanned")
    drop, before = pass_of(week), rows(week / "week.ics")
    for out, given in (("replanned", "replanned/contacts.csv"), ("elsewhere", "week/contacts.csv")):
        assert main(["week", "--out", out, "--from", given, "--drop", drop]) == 0
        said = capsys.readouterr().out
        assert f"against {given}, valued anew: 0 gained, 1 lost, " in said
        events = rows(here / out / "week.ics")
        gone = {uid for uid, state in events.items() if state == "CANCELLED 1"}
        assert len(gone) == 1
        assert set(events) == set(before)


# --- the answer is no ------------------------------------------------------------------------------------------------


def test_tx_on_before_aos_fails_the_audit_with_the_place_and_the_figure(here, week, tmp_path, capsys):
    rows = (week / "contacts.csv").read_text().splitlines()
    cells = rows[1].split(",")
    aos, on = cells[5], cells[6]
    early = f"{aos[:17]}00.000Z"
    (tmp_path / "spoiled.csv").write_text(
        "\n".join([rows[0], rows[1].replace(f",{on},", f",{early},", 1), *rows[2:]]) + "\n"
    )
    assert main(["audit", str(tmp_path / "spoiled.csv")]) == 1
    said = capsys.readouterr().out.splitlines()
    assert said[0].startswith(
        f"BROKEN  line 2: {cells[0]}: tx_on_utc {early} is {float(aos[17:-1]):.1f} s before AOS {aos}"
    )
    assert said[-1].startswith("UNSAFE: ")
    assert main(["audit", str(tmp_path / "spoiled.csv"), "--json"]) == 1
    assert json.loads(capsys.readouterr().out)["safe"] is False


def test_a_limit_broken_orbit_after_orbit_is_told_twice_in_words_and_wholly_as_json(here, week, capsys):
    text = (here / "missions" / "marshlight.toml").read_text()
    high = text.replace("soc_floor_pct = 65.0", "soc_floor_pct = 88.0").replace(
        "soc_end_pct = 80.0", "soc_end_pct = 88.0"
    )
    (here / "missions" / "high.toml").write_text(high)
    words = ["audit", "missions/high.toml", "week/contacts.csv"]
    assert main([*words, "--json"]) == 1
    faults = json.loads(capsys.readouterr().out)["faults"]
    outside = [fault for fault in faults if fault["rule"] == "SoC floor" and fault["contact_id"] is None]
    first, *rest = outside
    assert len(rest) > 1
    assert main(words) == 1
    *said, unsafe = capsys.readouterr().out.splitlines()
    told = [line for line in said if line.startswith("BROKEN  MARSHLIGHT-1: SoC floor: ")]
    worst = min(rest, key=lambda fault: fault["value"])
    assert told == [
        f"BROKEN  {first['text']}",
        f"BROKEN  MARSHLIGHT-1: SoC floor: {len(rest)} more times (--json lists all), from {rest[0]['time_utc']};"
        f" worst {worst['value']:.2f} % from {worst['time_utc']}",
    ]
    assert len([line for line in said if line.startswith("BROKEN")]) == len(faults) - len(rest) + 1
    assert unsafe.startswith(f"UNSAFE: {len(faults)} rules broken, ")


@pytest.mark.parametrize(("epoch", "hinted"), [("2026-12-07T12:00:00", True), ("2026-12-07T00:30:00", False)])
def test_contacts_that_newer_elements_put_beside_their_pass_may_have_flown(here, week, capsys, epoch, hinted):
    """All of them before the epoch, or none; they end by then or begin after it."""
    elements = (here / "tle_samples" / "marshlight.omm.csv").read_text()
    (here / "tle_samples" / "newer.csv").write_text(elements.replace("2026-12-06T18:00:00", epoch))
    text = (here / "missions" / "marshlight.toml").read_text()
    (here / "missions" / "newer.toml").write_text(text.replace("marshlight.tle", "newer.csv"))
    words = ["audit", "missions/newer.toml", "week/contacts.csv"]
    hint = "hint    flown already? --freeze-until UTC leaves contacts that power on before unjudged"
    assert main(words) == 1
    assert (hint in capsys.readouterr().out.splitlines()) == hinted
    main([*words, "--freeze-until", "2026-12-07T12:00:00Z"])
    assert hint not in capsys.readouterr().out


def test_no_week_is_possible(here, capsys):
    path = here / "missions" / "marshlight.toml"
    (here / "missions" / "tired.toml").write_text(path.read_text().replace("soc_pct = 92.0", "soc_pct = 60.0"))
    assert main(["week", "missions/tired.toml", "--out", "none"]) == 1
    assert "even without a session: MARSHLIGHT-1: SoC floor: " in capsys.readouterr().err
    assert not (here / "none").exists()


# --- the input is wrong ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["check", "missions/marshlite.toml"],
         'missions/marshlite.toml: no such file; did you mean "marshlight.toml"?'),
        (["check", "missions"], "missions: must be a regular file, got a folder"),
        (["link", "--station", "Vardhol", "--mode", K, "--elevation", "9"],
         "station 'Vardhol' is not known; did you mean \"Vardholm\"?"),
        (["link", "--station", "Vardholm", "--mode", "K hi rate", "--elevation", "9"],
         "mode 'K hi rate' is not known on MARSHLIGHT-1; did you mean \"K high rate\"?"),
        (["link", "--station", "Vardholm", "--mode", K, "--elevation", "nan"],
         "elevation_deg must be 0 to 90, got nan"),
        (["week", "--out", "none", "--keep", "nothing:K high rate"],
         "keep: must be the id of a pass in the span, as `passes` lists them, got 'nothing'"),
        (["week", "--out", "none", "--drop", "nothing"],
         "drop: must be the id of a pass in the span, as `passes` lists them, got 'nothing'"),
        (["week", "--out", "none", "--freeze-until", "noon"],
         "--freeze-until must be a time such as 2026-12-08T06:00:00Z, got 'noon'"),
        (["week", "--out", "none", "--freeze-until", "2026-12-08T06:00:00"],
         "--freeze-until must carry a time zone (append Z for UTC), got '2026-12-08T06:00:00'"),
        (["week", "--out", "none", "--time-limit", "nan"],
         "--time-limit must be above 0 s and below 1e6 s, got nan"),
        (["week", "--out", "none", "--from", "gone.csv"], "gone.csv: no such file"),
        (["audit", "gone.csv"], "gone.csv: no such file"),
        (["audit", "week/contacts.csv", "missions/marshlight.toml"],
         "audit takes the mission file first, then the contacts, got missions/marshlight.toml last"),
        (["audit", "a", "b", "c"], "audit takes a mission file and a contacts file, got 3 files"),
        (["afford", "--pass", "nothing", "--mode", K],
         "pass must be in the span, as `passes` lists them, got 'nothing'"),
        (["pointing", "--contacts", "gone.csv", "--out", "none"], "gone.csv: no such file"),
        (["cards", "--contacts", "gone.csv", "--out", "none"], "gone.csv: no such file"),
        (["week", "--out", "missions"],
         "--out must be a folder of its own, got missions, which holds missions/marshlight.toml, which the mission is"
         " read from"),
        (["cards", "--contacts", "week/contacts.csv", "--out", "/"],
         "--out must be a folder of its own, got /, which is the root of the disk"),
        (["week", "--out", "missions/marshlight.toml"],
         "missions/marshlight.toml: must be a folder of its own (links are not followed for output)"),
    ],
)  # fmt: skip
def test_wrong_input_gives_its_message_and_no_file(here, words, message, capsys):
    before = sorted(here.rglob("*"))
    assert main(words) == 2
    said = capsys.readouterr()
    assert (said.out, said.err) == ("", message + "\n")
    assert sorted(here.rglob("*")) == before


def test_an_unknown_modcod_is_told_with_its_file(here, capsys):
    path = here / "missions" / "marshlight.toml"
    (here / "missions" / "typo.toml").write_text(path.read_text().replace('"QPSK 1/2", ', '"QPSK 1/22", '))
    for words in (["check"], ["passes"], ["week", "--out", "none"]):
        assert main([words[0], "missions/typo.toml", *words[1:]]) == 2
        assert capsys.readouterr().err == (
            "missions/typo.toml: modcod 'QPSK 1/22' is not known to mode 'K high rate'; did you mean \"QPSK 1/2\"?\n"
        )
    assert not (here / "none").exists()


@pytest.mark.parametrize("words", [[], ["weak"], ["week", "--outt", "x"], ["link"], ["link", "--elevation", "x"]])
def test_words_that_no_command_takes(here, words, capsys):
    with pytest.raises(SystemExit) as left:
        main(words)
    assert left.value.code == 2
    assert "usage: python -m planner" in capsys.readouterr().err


def test_several_faults_come_one_a_line_and_without_a_traceback(mission_folder):
    path = mission_folder / "missions" / "marshlight.toml"
    path.write_text(path.read_text().replace("days = 7.0", "days = 0.0").replace("= 1.5\nchem", "= -1.5\nchem"))
    (mission_folder / "stations" / "dry_pan.toml").write_text("name = 'Dry Pan'\nlatitude_deg = 'north'\n")
    done = command(mission_folder, "week", "--out", "week")
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.splitlines() == [
        "missions/marshlight.toml: days: must be above 0, got 0.0",
        "missions/marshlight.toml: battery.cell_capacity_ah: must be above 0, got -1.5",
        "missions/../stations/dry_pan.toml: latitude_deg: must be a number, got 'north'",
        "missions/../stations/dry_pan.toml: longitude_deg: is required",
        "missions/../stations/dry_pan.toml: antenna: is required",
        "missions/../stations/dry_pan.toml: receiver: is required",
    ]
    assert not (mission_folder / "week").exists()


# --- the machine could not -------------------------------------------------------------------------------------------


def test_a_folder_that_cannot_be_made(here, capsys):
    assert main(["week", "--out", "/proc/week"]) == 3
    assert capsys.readouterr().err.startswith("/proc/week: ")


def test_a_folder_that_another_run_holds(quick_folder, week):
    with claim_folder(week):
        done = command(quick_folder, "week", "--out", "week")
    assert done.returncode == 3
    assert "is writing here; wait for it or choose another folder" in done.stderr
    assert verify_set(week) == ()


def test_memory_that_does_not_hold_the_mission(here, monkeypatch, capsys):
    def full(*_):
        raise MemoryError

    monkeypatch.setattr(cli, "load_mission", full)
    assert main(["check"]) == 3
    assert capsys.readouterr().err.startswith("the machine's memory does not hold this mission")


def test_two_runs_at_once_leave_one_whole_set(quick_folder):
    first, second = (started(quick_folder, "week", "--out", "contested") for _ in range(2))
    statuses = sorted([first.wait(120), second.wait(120)])
    assert statuses in ([0, 0], [0, 3])
    assert verify_set(quick_folder / "contested") == ()
    for process in (first, second):
        process.communicate()


# --- words and looks -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", COMMANDS)
def test_help_shows_an_example(name, capsys):
    with pytest.raises(SystemExit) as left:
        main([name, "--help"])
    assert left.value.code == 0
    assert re.search(rf"Example: python -m\s+planner\s+{name}", capsys.readouterr().out)


def test_every_command_is_in_the_help(capsys):
    with pytest.raises(SystemExit):
        main(["--help"])
    said = capsys.readouterr().out
    assert all(re.search(rf"^    {name} ", said, re.MULTILINE) for name in COMMANDS)
    assert "Exit status: 0 done;" in said


def test_piped_words_are_plain(quick_folder):
    done = command(quick_folder, "passes")
    assert done.returncode == 0
    assert "\x1b" not in done.stdout + done.stderr


def test_a_terminal_is_told_the_stage_and_how_long_it_has_taken(quick_folder, week):
    said = in_a_terminal(quick_folder, "cards", "--contacts", "week/contacts.csv", "--out", "cards")
    assert re.search(r"file of cards 1 of \d+ .*0:00:\d\d", said)
    assert said.splitlines()[-1].endswith("cards and the week sheet written to cards")


def test_a_terminal_gets_no_colour_where_it_wants_none(quick_folder):
    assert not re.search(r"\x1b\[[\d;]*(3\d|4\d|9\d)m", in_a_terminal(quick_folder, "passes", NO_COLOR="1"))


def test_quiet_says_the_answer_and_verbose_logs_the_stages(here, verbose, capsys):
    assert main(["week", "--out", "quiet", "--quiet"]) == 0
    quiet = capsys.readouterr()
    assert len(quiet.out.splitlines()) <= 6
    assert quiet.err == ""
    assert re.search(
        r"^ +[\d.]+ s  solution 1, \d+ windows: worth [\d.]+, at most [\d.]+ ", verbose.stderr, re.MULTILINE
    )
    assert re.search(r"\d+ sessions keep every limit in the full physics$", verbose.stderr, re.MULTILINE)
    assert len(verbose.stdout.splitlines()) > len(quiet.out.splitlines())


def test_a_pipe_that_closes_early_is_no_fault(quick_folder):
    process = started(quick_folder, "passes")
    process.stdout.close()
    assert process.wait(60) == 0
    assert process.stderr.read() == ""
    process.stderr.close()

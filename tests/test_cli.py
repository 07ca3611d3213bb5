"""The commands as a shell sees them: exit statuses, words, files, and an end at any moment."""

import json
import os
import pty
import random
import re
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from planner import cli
from planner.cli import main
from planner.export.folder import claim_folder, verify_set, write_set
from planner.export.week import write_week

ROOT = Path(__file__).parents[1]
K = "K high rate"
COMMANDS = ("check", "passes", "link", "week", "audit", "afford", "compare", "pointing", "cards")
LINK_KEYS = (
    "satellite", "station", "mode", "modcod", "elevation_deg", "availability_pct", "slant_range_km", "eirp_dbw",
    "free_space_loss_db", "atmospheric_loss_db", "system_temperature_k", "gt_dbk", "cn0_dbhz", "ebn0_db", "esn0_db",
    "required_db", "margin_db", "flux_dbw_m2", "flux_limit_dbw_m2", "flux_bandwidth_hz", "lines",
)  # fmt: skip
TABLES = ("contacts.csv", "passes.csv", "battery.csv", "recorder.csv")
A_SECOND = 1.0
KILLS = 50


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """The demo's files, the mission cut down to two passes over one station."""
    folder = tmp_path_factory.mktemp("cli")
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, folder / name)
    path = folder / "missions" / "marshlight.toml"
    begin, _, rest = path.read_text().partition("stations = [")
    text = f'{begin}stations = ["../stations/vardholm.toml"]{rest.partition("]")[2]}'
    for old, new in {
        "days = 7.0": "days = 0.4",
        'daily_contact_modes = ["S low rate"]': "",
        "upload_lead_h = 6.0": "",
    }.items():
        assert old in text
        text = text.replace(old, new)
    path.write_text(text)
    return folder


@pytest.fixture
def here(folder, monkeypatch):
    monkeypatch.chdir(folder)
    return folder


def command(folder, *words, **options) -> subprocess.CompletedProcess:
    """The command as a process of its own."""
    environment = os.environ | {"PYTHONPATH": str(ROOT)} | options.pop("env", {})
    return subprocess.run([sys.executable, "-m", "planner", *words], cwd=folder, env=environment, capture_output=True,
                          text=True, timeout=120, **options)  # fmt: skip


def started(folder, *words) -> subprocess.Popen:
    environment, pipe = os.environ | {"PYTHONPATH": str(ROOT)}, subprocess.PIPE
    return subprocess.Popen([sys.executable, "-m", "planner", *words], cwd=folder, env=environment, stdout=pipe,
                            stderr=pipe, text=True, start_new_session=True)  # fmt: skip


@pytest.fixture(scope="module")
def verbose(folder):
    """The small week, written by a process of its own that says all it can."""
    done = command(folder, "week", "--out", "week", "--verbose", env={"PYTHONHASHSEED": "1"})
    assert done.returncode == 0
    return done


@pytest.fixture(scope="module")
def week(folder, verbose):
    return folder / "week"


def pass_of(week) -> str:
    return (week / "contacts.csv").read_text().splitlines()[1].split(",")[1]


# --- done ----------------------------------------------------------------------------------------------------------


def test_a_second_run_writes_the_same_bytes(folder, week):
    done = command(folder, "week", "--out", "again", env={"PYTHONHASHSEED": "2"})
    assert done.returncode == 0
    for path in week.iterdir():
        same = (folder / "again" / path.name).read_bytes() == path.read_bytes()
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
    assert capsys.readouterr().out.endswith("3 files read, no fault found.\n")
    assert main(["passes", "missions/marshlight.toml"]) == 0
    listed = capsys.readouterr().out.splitlines()
    assert listed[-1] == f"{len(listed) - 2} passes"
    assert main(["passes", "--csv", "passes.csv"]) == 0
    assert len((here / "passes.csv").read_text().splitlines()) == len(listed) - 1


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
    assert capsys.readouterr().out.startswith(("YES, affordable", "NO, not affordable")[status])
    assert main([*words, "--json"]) == status
    assert json.loads(capsys.readouterr().out)["affordable"] == (status == 0)


def test_two_equal_weeks_compare_as_equal(here, week, capsys):
    assert main(["compare", "week", "week"]) == 0
    assert capsys.readouterr().out.startswith("no contact changed: all ")


def test_hand_over_writes_whole_sets(here, week, capsys):
    assert main(["pointing", "--contacts", "week/contacts.csv", "--out", "pointing", "--step", "30"]) == 0
    assert verify_set(here / "pointing", "pointing.json") == ()


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
         "keep: must be the id of a pass in the span, got 'nothing'"),
        (["week", "--out", "none", "--drop", "nothing"], "drop: must be the id of a pass in the span, got 'nothing'"),
        (["week", "--out", "none", "--freeze-until", "noon"],
         "--freeze-until must be a time such as 2026-12-08T06:00:00Z, got 'noon'"),
        (["week", "--out", "none", "--freeze-until", "2026-12-08T06:00:00"],
         "--freeze-until must carry a time zone (append Z for UTC), got '2026-12-08T06:00:00'"),
        (["week", "--out", "none", "--time-limit", "nan"],
         "--time-limit must be above 0 s and below 1e6 s, got nan"),
        (["week", "--out", "none", "--from", "gone.csv"], "gone.csv: no such file"),
        (["audit", "gone.csv"], "gone.csv: no such file"),
        (["audit", "a", "b", "c"], "audit takes a mission file and a contacts file, got 3 files"),
        (["afford", "--pass", "nothing", "--mode", K], "pass must be in the span, got 'nothing'"),
        (["pointing", "--contacts", "gone.csv", "--out", "none"], "gone.csv: no such file"),
        (["cards", "--contacts", "gone.csv", "--out", "none"], "gone.csv: no such file"),
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


def test_several_faults_come_one_a_line_and_without_a_traceback(folder, tmp_path):
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, tmp_path / name)
    path = tmp_path / "missions" / "marshlight.toml"
    path.write_text(path.read_text().replace("days = 7.0", "days = 0.0").replace("= 1.5\nchem", "= -1.5\nchem"))
    (tmp_path / "stations" / "dry_pan.toml").write_text("name = 'Dry Pan'\nlatitude_deg = 'north'\n")
    done = command(tmp_path, "week", "--out", "week")
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.splitlines() == [
        "missions/marshlight.toml: days: must be above 0, got 0.0",
        "missions/marshlight.toml: battery.cell_capacity_ah: must be above 0, got -1.5",
        "missions/../stations/dry_pan.toml: latitude_deg: must be a number, got 'north'",
        "missions/../stations/dry_pan.toml: longitude_deg: is required",
        "missions/../stations/dry_pan.toml: antenna: is required",
        "missions/../stations/dry_pan.toml: receiver: is required",
    ]
    assert not (tmp_path / "week").exists()


# --- the machine could not -------------------------------------------------------------------------------------------


def test_a_folder_that_cannot_be_made(here, capsys):
    assert main(["week", "--out", "/proc/week"]) == 3
    assert capsys.readouterr().err.startswith("/proc/week: ")


def test_a_folder_that_another_run_holds(folder, week):
    with claim_folder(week):
        done = command(folder, "week", "--out", "week")
    assert done.returncode == 3
    assert "is writing here; wait for it or choose another folder" in done.stderr
    assert verify_set(week) == ()


def test_memory_that_does_not_hold_the_mission(here, monkeypatch, capsys):
    def full(*_):
        raise MemoryError

    monkeypatch.setattr(cli, "load_mission", full)
    assert main(["check"]) == 3
    assert capsys.readouterr().err.startswith("the machine's memory does not hold this mission")


def test_two_runs_at_once_leave_one_whole_set(folder):
    first, second = (started(folder, "week", "--out", "contested") for _ in range(2))
    statuses = sorted([first.wait(120), second.wait(120)])
    assert statuses in ([0, 0], [0, 3])
    assert verify_set(folder / "contested") == ()
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


def test_piped_words_are_plain(folder):
    done = command(folder, "passes")
    assert done.returncode == 0
    assert "\x1b" not in done.stdout + done.stderr


def in_a_terminal(folder, *words, **environment) -> str:
    """What a command says to a terminal."""
    master, slave = pty.openpty()
    environment = os.environ | {"PYTHONPATH": str(ROOT), "TERM": "xterm-256color"} | environment
    process = subprocess.Popen([sys.executable, "-m", "planner", *words], cwd=folder, stdout=slave, stderr=slave,
                               env=environment)  # fmt: skip
    os.close(slave)
    said = b""
    while True:
        try:
            more = os.read(master, 65536)
        except OSError:  # the other end is closed
            break
        if not more:
            break
        said += more
    os.close(master)
    assert process.wait(60) == 0
    return said.decode()


def test_a_terminal_gets_no_colour_where_it_wants_none(folder):
    assert not re.search(r"\x1b\[[\d;]*(3\d|4\d|9\d)m", in_a_terminal(folder, "passes", NO_COLOR="1"))


def test_quiet_says_the_answer_and_verbose_logs_the_stages(here, verbose, capsys):
    assert main(["week", "--out", "quiet", "--quiet"]) == 0
    quiet = capsys.readouterr()
    assert len(quiet.out.splitlines()) <= 6
    assert quiet.err == ""
    assert "schedule, solution 1" in verbose.stderr
    assert len(verbose.stdout.splitlines()) > len(quiet.out.splitlines())


def test_a_pipe_that_closes_early_is_no_fault(folder):
    process = started(folder, "passes")
    process.stdout.close()
    assert process.wait(60) == 0
    assert process.stderr.read() == ""
    process.stderr.close()


# --- an end at any moment --------------------------------------------------------------------------------------------


def descendants(pid: int) -> set[int]:
    """Process ids of all that a process started and that still run."""
    found: set[int] = set()
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = stat.read_text().rpartition(")")[2].split()
        except OSError:
            continue
        if int(fields[3]) == pid and fields[0] != "Z":  # its session
            found.add(int(stat.parent.name))
    return found - {pid}


@pytest.mark.parametrize("after_s", [0.3, 1.5, 3.0])
def test_ctrl_c_stops_within_a_second_and_leaves_nothing(folder, tmp_path, after_s):
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, tmp_path / name)
    process = started(tmp_path, "week", "--out", "week")
    time.sleep(after_s)
    began = time.perf_counter()
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: the solver's child hears it too
    _, said = process.communicate(timeout=30)
    took_s = time.perf_counter() - began
    assert process.returncode == 130
    assert said in ("", "interrupted; nothing was written\n")
    assert not (tmp_path / "week").exists()
    assert took_s < A_SECOND
    time.sleep(0.2)
    assert descendants(process.pid) == set()


def test_killed_at_any_moment_either_the_old_or_the_new_set_is_there(two_day_mission, two_day_plan, tmp_path):
    """Fifty runs killed at random moments of their writing: what is left is whole, or the next run mends it."""
    chance = random.Random(50)
    folder = tmp_path / "week"
    old, new = (_Marked(two_day_plan, mark) for mark in ("old", "new"))
    began = time.perf_counter()
    with claim_folder(folder) as claimed:
        write_week(claimed, two_day_mission, old, {})
    usual_s = time.perf_counter() - began
    left = {"old": 0, "new": 0}
    for _ in range(KILLS):
        child = os.fork()
        if child == 0:
            with claim_folder(folder) as claimed:
                write_week(claimed, two_day_mission, new, {})
            os._exit(0)
        _wait_for(folder / ".coming" if chance.random() < 0.7 else folder / ".kept", 3 * usual_s)
        time.sleep(chance.choice((0.0, chance.uniform(0, 0.005), chance.uniform(0, 0.03))))
        os.kill(child, signal.SIGKILL)
        os.waitpid(child, 0)
        if verify_set(folder):
            with claim_folder(folder) as claimed:
                assert claimed.mended
        assert verify_set(folder) == ()
        mark = json.loads((folder / "summary.json").read_text())["mark"]
        left[mark] += 1
        if mark == "new":  # back to the old one, quickly
            names = [p.name for p in folder.glob("[!.]*") if p.name not in ("summary.json", "run_log.json")]
            write_set(folder, {name: (folder / name).read_bytes() for name in names}, {"mark": "old"})
    assert left["old"] > 0
    assert left["new"] > 0


def _wait_for(path: Path, at_most_s: float) -> None:
    """Until a file is there: most of a run computes, and only its last hundredth replaces files."""
    end = time.perf_counter() + at_most_s
    while not path.exists() and time.perf_counter() < end:
        time.sleep(0.0005)


class _Marked:
    """A plan whose summary carries a mark."""

    def __init__(self, plan, mark: str):
        self.contacts, self.passes, self.battery, self.recorder = (
            plan.contacts,
            plan.passes,
            plan.battery,
            plan.recorder,
        )
        self.plan, self.flown = plan.plan, plan.flown
        self.summary = plan.summary | {"mark": mark}


def test_a_killed_command_leaves_no_solver_and_the_old_week(folder, week):
    before = {path.name: path.read_bytes() for path in week.iterdir()}
    chance = random.Random(3)
    for _ in range(4):
        process = started(folder, "week", "--out", "week")
        time.sleep(chance.uniform(0.5, 3.0))
        os.kill(process.pid, signal.SIGKILL)
        process.communicate()
        with claim_folder(week):
            pass
        assert verify_set(week) == ()
        assert all((week / name).read_bytes() == content for name, content in before.items() if name in TABLES)
        for _ in range(60):
            if not descendants(process.pid):
                break
            time.sleep(0.05)
        assert descendants(process.pid) == set()

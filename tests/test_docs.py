"""README and DEVELOPERS.md say what is so: commands, options, files, columns, printed figures, paths."""

import json
import re
import shlex
import shutil
import textwrap
import tomllib
from fnmatch import fnmatch
from hashlib import sha256
from pathlib import Path

import pytest

import planner
from planner import cli
from planner.export.contacts import contacts_csv
from planner.export.folder import claim_folder
from planner.export.week import write_week
from planner.mission.station import Station
from planner.mission.transmitter import OwnModcod

ROOT = Path(__file__).parents[1]
README, DEVELOPERS = (ROOT / name for name in ("README.md", "DEVELOPERS.md"))
# Another build of the solver may choose another of the plans that are equal within its gap (0.1 % of the volume)
A_FEW_CONTACTS = 2
SOLVER_GAP = 2e-3  # each of two plans may be that far from the best
HALF_A_MBIT = 0.5  # per printed line, which shows whole ones
# Scripts depend on these: public columns in their order, new ones after them
PASSES = (
    "pass_id", "satellite", "station", "aos_utc", "tca_utc", "los_utc", "duration_s", "aos_azimuth_deg",
    "tca_azimuth_deg", "los_azimuth_deg", "max_elevation_deg", "tca_range_km", "sunlit_fraction",
)  # fmt: skip
COLUMNS = {
    "contacts.csv": (
        "contact_id", "pass_id", "satellite", "station", "mode", "aos_utc", "tx_on_utc", "tx_off_utc", "los_utc",
        "duration_s", "aos_azimuth_deg", "los_azimuth_deg", "max_elevation_deg", "min_margin_db", "volume_mbit",
        "energy_wh", "soc_start_pct", "soc_min_pct", "soc_end_pct", "max_doppler_khz", "cautions", "power_on_utc",
        "frequency_mhz", "symbol_rate_mbaud", "polarisation", "modcods", "expected_volume_mbit",
    ),
    "passes.csv": (*PASSES, "verdict", "reason"),
    "battery.csv": (
        "satellite", "time_utc", "soc_pct", "soc_worst_pct", "cell_v", "worst_cell_v", "bus_v", "cell_a", "battery_c",
        "array_w", "load_w", "loss_w", "spill_w", "sunlit", "attitude",
    ),
    "recorder.csv": ("satellite", "time_utc", "stored_mbit", "produced_mbit", "delivered_mbit", "lost_mbit"),
}  # fmt: skip
SUMMARY = (
    "satellites", "stations", "passes", "contacts", "volume_mbit", "expected_volume_mbit", "upper_bound_mbit",
    "gap_pct", "objective", "objective_bound", "solver_gap_pct", "status", "soc_min_pct", "soc_floor_pct",
    "soc_end_pct", "station_cost", "stored_end_mbit", "lost_mbit", "elements_age_days_max", "cautions", "versions",
    "inputs", "files",
)  # fmt: skip


def blocks(document: Path, opening: str = "") -> list[list[str]]:
    """The indented code blocks of a document whose first line begins so, without their indentation."""
    found = re.findall(r"(?:^ {4}.*\n(?:\n(?= {4}))?)+", document.read_text(), re.MULTILINE)
    stripped = [textwrap.dedent(block).splitlines() for block in found]
    return [block for block in stripped if block[0].startswith(opening)]


def block(document: Path, opening: str) -> list[str]:
    [only] = blocks(document, opening)
    return only


def table_rows(document: Path) -> list[list[str]]:
    """Rows of the tables of a document, cell by cell, headings and rules among them."""
    return [line.strip("|").split("|") for line in document.read_text().splitlines() if line.startswith("|")]


def ticked(text: str) -> list[str]:
    return re.findall(r"`([^`]+)`", text)


COMMAND_LINES = block(README, "python -m planner check")


def words_of(line: str) -> list[str]:
    """What stands after `python -m planner`, without the comment."""
    words = shlex.split(line, comments=True)
    assert words[:3] == ["python", "-m", "planner"]
    return words[3:]


def help_of(capsys, *words: str) -> str:
    with pytest.raises(SystemExit) as ended:
        cli.main([*words, "--help"])
    assert ended.value.code == cli.DONE
    return capsys.readouterr().out


def options_in(text: str) -> set[str]:
    return set(re.findall(r"(?<![\w-])--[a-z][a-z-]+", text))


def commands_in(text: str) -> list[str]:
    """Names that the program's own help lists."""
    return re.findall(r"^    (\w+) ", text, re.MULTILINE)


# --- the first block, which CI and newcomers copy ---


def test_the_first_block_has_two_lines_to_run_and_to_test():
    first, *_ = re.findall(r"^```\w*\n(.*?)^```", README.read_text(), re.MULTILINE | re.DOTALL)
    run, test = first.splitlines()
    assert run.endswith("-m planner week")
    assert test.endswith("-m pytest")


# --- what the demo prints and writes ---


def masked(line: str) -> str:
    """The line with its figures (but not its dates and section numbers) and its blanks alike."""
    return re.sub(r"\s+", " ", re.sub(r"(?<![\w-])\d+(\.\d+)?(?![\w-])", "0", line)).strip()


def printed_block() -> list[str]:
    return block(README, "day ")


def figures(lines: list[str], pattern: str) -> list[float]:
    [found] = [match.groups() for match in (re.search(pattern, line) for line in lines) if match]
    return [float(number) for number in found]


def test_the_printed_words_are_those_of_the_readme(demo_week):
    shown, printed = ([masked(line) for line in lines] for lines in (printed_block(), demo_week.printed))
    left_out = shown.index("…")
    assert printed[:left_out] == shown[:left_out]
    assert printed[-1] == shown[-1]


def test_the_printed_counts_are_those_of_the_readme(demo_week):
    pattern = r"^(\d+) contacts on (\d+) of (\d+) passes \((\d+) left out, (\d+) unusable, (\d+) dropped\)"
    contacts, planned, passes, left_out, unusable, dropped = figures(printed_block(), pattern)
    written = demo_week.summary
    assert contacts == pytest.approx(written["contacts"], abs=A_FEW_CONTACTS)
    assert (passes, unusable, dropped) == tuple(figures(demo_week.printed, pattern)[k] for k in (2, 4, 5))
    assert passes == written["passes"] == planned + left_out + unusable + dropped


def test_the_printed_volume_is_that_of_the_readme(demo_week):
    pattern = r"^(\d+) Mbit at (\d+) % availability; nothing better than (\d+) Mbit"
    volume_mbit, availability_pct, bound_mbit = figures(printed_block(), pattern)
    written = demo_week.summary
    assert volume_mbit == pytest.approx(written["volume_mbit"], rel=SOLVER_GAP)
    assert bound_mbit == pytest.approx(written["upper_bound_mbit"], rel=SOLVER_GAP)
    assert availability_pct == written["policy"]["availability_pct"]


def test_the_days_of_the_readme_add_up(demo_week):
    days = [line.split() for line in printed_block() if re.match(r"\d{4}-\d\d-\d\d ", line)]
    [contacts] = figures(printed_block(), r"^(\d+) contacts on")
    [volume_mbit] = figures(printed_block(), r"^(\d+) Mbit at")
    assert sum(int(day[1]) for day in days) == contacts
    assert sum(float(day[2]) for day in days) == pytest.approx(volume_mbit, abs=HALF_A_MBIT * (len(days) + 1))
    assert {day[0] for day in days} == {row["tx_on_utc"][:10] for row in demo_week.rows("contacts.csv")}


def test_the_table_of_files_is_what_week_writes(demo_week):
    start = [row[0].strip() for row in table_rows(README)].index("file")
    named = [name for row in table_rows(README)[start + 2 :] for name in ticked(row[0]) if "." in name]
    written = sorted(path.name for path in demo_week.folder.iterdir())
    assert [name for name in written if not any(fnmatch(name, pattern) for pattern in named)] == []
    assert [pattern for pattern in named if not any(fnmatch(name, pattern) for name in written)] == []


def test_the_summary_has_its_keys_and_the_hash_of_every_file(demo_week):
    assert [key for key in SUMMARY if key not in demo_week.summary] == []
    written = {path.name: path for path in demo_week.folder.iterdir()}
    hashed = {name: sha256(path.read_bytes()).hexdigest() for name, path in written.items()}
    assert demo_week.summary["files"] == {
        name: digest for name, digest in hashed.items() if name not in ("summary.json", "run_log.json")
    }


@pytest.mark.parametrize("name", COLUMNS)
def test_the_columns_are_the_public_ones_in_their_order(demo_week, name):
    columns = tuple(demo_week.rows(name)[0])
    assert columns[: len(COLUMNS[name])] == COLUMNS[name]


def test_the_verdicts_are_those_of_the_readme(demo_week):
    [row] = [row for row in table_rows(README) if "`passes.csv`" in row[0]]
    assert {found["verdict"] for found in demo_week.rows("passes.csv")} <= set(ticked(row[1]))


# --- every command shown is run ---


@pytest.fixture(scope="module")
def desk(copy_of_demo, tmp_path_factory, two_day_mission, two_day_plan):
    """The demo's files, a mission of two days beside it, its week twice, and a few contacts of it to make cards of."""
    folder = copy_of_demo(tmp_path_factory.mktemp("docs"))
    text = (folder / "missions" / "marshlight.toml").read_text()
    stations = ", ".join(f'"../stations/{name}.toml"' for name in ("vardholm", "cape_tern"))
    text = re.sub(r"^stations = \[.*?\]", f"stations = [{stations}]", text, flags=re.MULTILINE | re.DOTALL)
    text = re.sub(r"^days = .*$", "days = 2.0", text, flags=re.MULTILINE)
    (folder / "missions" / "two_days.toml").write_text(text)
    for name in ("week", "week_old"):
        with claim_folder(folder / name) as claimed:
            write_week(claimed, two_day_mission, two_day_plan, {})
    few = two_day_plan.contacts.groupby("mode").head(2)
    (folder / "few.csv").write_bytes(contacts_csv(few))
    return folder


PLANNING = ("week", "audit", "afford", "pointing", "cards")


@pytest.mark.parametrize("line", COMMAND_LINES, ids=lambda line: words_of(line)[0])
def test_a_command_of_the_readme_ends_as_told(desk, two_day_plan, monkeypatch, capsys, line):
    """`afford` answers yes or no by its status; all else is done. Where it plans, on the two days."""
    monkeypatch.chdir(desk)
    passes, contacts = two_day_plan.passes, two_day_plan.contacts
    kept = contacts.iloc[0]
    stand_in = {
        "PASS:MODE": f"{kept['pass_id']}:{kept['mode']}",
        "PASS": passes["pass_id"][passes["verdict"] == "left out"].iloc[0],
        "PASS_ID": kept["pass_id"],
    }
    name, *words = [stand_in.get(word, word) for word in words_of(line)]
    if name == "cards":
        words[words.index("week/contacts.csv")] = "few.csv"
    mission = ["missions/two_days.toml"] if name in PLANNING else []
    status = cli.main([name, *mission, *words])
    said = capsys.readouterr()
    expected = cli.NO if name == "afford" and said.out.startswith("NO") else cli.DONE
    assert (status, said.err) == (expected, "")
    assert said.out


def test_the_middle_of_the_week_goes_as_told(desk, two_day_plan, monkeypatch, capsys):
    """On the two days, of which the second is planned anew from before the contact that carries its commands up."""
    monkeypatch.chdir(desk)
    copy, *commands, cards = block(README, "cp -r ")
    folder, kept = copy.split()[2:]
    shutil.copytree(folder, kept, dirs_exist_ok=True)
    contacts = two_day_plan.contacts
    dropped = contacts["pass_id"][contacts["tx_on_utc"] > "2026-12-08T10"].iloc[0]
    instead = {"PASS": dropped, "2026-12-09T08:00:00Z": "2026-12-08T02:00:00Z"}
    for line in commands:
        name, *words = (instead.get(word, word) for word in words_of(line))
        mission = [] if name == "compare" else ["missions/two_days.toml"]
        assert cli.main([name, *mission, *words]) == cli.DONE
    said = capsys.readouterr().out
    assert re.search(r"^lost +.*", said, re.MULTILINE)
    assert dropped in said
    assert options_in(cards) <= options_in(help_of(capsys, words_of(cards)[0]))


def test_every_command_is_shown_in_the_readme(capsys):
    shown = {words_of(line)[0] for line in COMMAND_LINES}
    assert shown == set(commands_in(help_of(capsys)))


@pytest.mark.parametrize("line", COMMAND_LINES, ids=lambda line: words_of(line)[0])
def test_options_shown_with_a_command_are_its_own(capsys, line):
    assert options_in(line) <= options_in(help_of(capsys, words_of(line)[0]))


@pytest.mark.parametrize("name", [words_of(line)[0] for line in COMMAND_LINES])
def test_the_help_of_every_command_has_an_example_that_it_takes(capsys, name):
    text = " ".join(help_of(capsys, name).split())
    assert {"--quiet", "--verbose"} <= options_in(text)
    example = re.search(r"Example: (python -m planner .*)$", text)[1]
    assert cli._parser().parse_args(words_of(example)).command == name


def test_exit_statuses_are_those_of_the_readme():
    told = re.search(r"Exit status: (.*?)\n\n", README.read_text(), re.DOTALL)[1]
    statuses = [int(part.split()[0]) for part in told.replace("\n", " ").split("; ")]
    assert statuses == [cli.DONE, cli.NO, cli.WRONG_INPUT, cli.MACHINE, cli.INTERRUPTED]


def test_passes_alone_have_their_columns(desk, monkeypatch):
    monkeypatch.chdir(desk)
    assert cli.main(["passes", "missions/two_days.toml", "--csv", "bare.csv"]) == cli.DONE
    columns = (desk / "bare.csv").read_text().splitlines()[0].split(",")
    assert tuple(columns[: len(PASSES)]) == PASSES


def test_the_python_lines_of_the_readme_run(desk, two_day_plan, monkeypatch):
    """On the two days, planned before."""
    monkeypatch.chdir(desk)
    monkeypatch.setattr(planner, "plan_week", lambda mission: two_day_plan)
    lines = block(README, "import planner")
    exec("\n".join(lines).replace("missions/marshlight.toml", "missions/two_days.toml"), names := {})
    assert json.dumps(names["week"].summary)
    named = re.search(r"# (.*) \(DataFrames\), \.summary", "\n".join(lines))[1]
    assert all(len(getattr(names["week"], table.strip("."))) for table in named.split())


# --- models and their sources ---


def model_rows() -> list[list[str]]:
    rows = table_rows(README)
    start = [row[0].strip() for row in rows].index("what")
    return rows[start + 2 :]


@pytest.mark.parametrize("row", model_rows(), ids=lambda row: row[0].strip())
def test_a_model_s_sources_stand_in_its_file_too(row):
    """Numbers of standards, recommendations and papers, and the warning that a value was not read at its source."""
    text = "".join((ROOT / name).read_text() for name in ticked(row[-1]))
    cited = re.findall(
        r"P\.\d+(?:-\d+)?|CCSDS [\d.]+-B|EN [\d ]+-\d|E1049-\d\d|AIAA [\d-]+|SSC[\w-]+|GMST|WGS \d+", row[1]
    )
    marked = [words for words in ("second-hand", "from memory") if words in row[1]]
    assert [source for source in cited + marked if source not in text] == []


# --- paths and options that the documents name ---


@pytest.mark.parametrize("document", [README, DEVELOPERS], ids=lambda path: path.name)
def test_every_path_named_is_there(document):
    text = document.read_text()
    shown = ticked(re.sub(r"^```.*?^```", "", text, flags=re.MULTILINE | re.DOTALL))
    paths = [word for word in shown if re.fullmatch(r"[\w./]+/[\w.]*|[\w./]+\.(md|toml|py|ipynb)", word)]
    paths += re.findall(r"\]\(([^)]+)\)", text) + re.findall(r"\b(?:notebooks|missions|benchmarks)/\w+\.\w+", text)
    written_by_week = {"week/"}
    missing = [
        path
        for path in sorted(set(paths) - written_by_week)
        if not (ROOT / path).exists() and not (ROOT / "planner" / path).exists()
    ]
    assert paths
    assert missing == []


def test_what_is_shown_for_adding_things_is_taken(marshlight):
    station = tomllib.loads("\n".join(block(DEVELOPERS, 'name = "Saltmere"')))
    assert Station.model_validate(station, strict=False).receiver_for("S")
    table = tomllib.loads("\n".join(block(DEVELOPERS, "[[transmitter.own_modcods]]")))["transmitter"]
    assert [OwnModcod.model_validate(row) for row in table["own_modcods"]]
    battery = marshlight.satellites[0].spacecraft.battery
    curve = tomllib.loads("\n".join(block(DEVELOPERS, "[battery]")))["battery"]["open_circuit"]
    own = battery.model_dump() | {"open_circuit": tuple(map(tuple, curve))}
    assert type(battery).model_validate(own).open_circuit[-1] == (100.0, 3.45)


def test_every_file_named_for_a_room_is_there():
    rows = [row for row in table_rows(DEVELOPERS) if re.match(r" `\w+/` ", row[0])]
    named = [f"{ticked(row[0])[0]}{name}.py" for row in rows for name in ticked(re.sub(r"\([^)]*\)", "", row[1]))]
    schedule = [re.split(r"\s{2,}", line)[0].split(", ") for line in block(DEVELOPERS, "week  ")]
    named += [f"schedule/{name}.py" for names in schedule for name in names]
    assert len(named) > len(rows)
    assert [name for name in named if not (ROOT / "planner" / name).is_file()] == []


def test_every_room_is_in_the_developers_table():
    rooms = {path.parent.name for path in (ROOT / "planner").glob("*/__init__.py")}
    assert {ticked(row[0])[0] for row in table_rows(DEVELOPERS) if "/` " in row[0]} == {f"{room}/" for room in rooms}


def test_options_named_for_developers_are_there(capsys):
    for line in block(DEVELOPERS, "python -m planner week --verbose"):
        if line.startswith("python -m planner"):
            assert options_in(line) <= options_in(help_of(capsys, words_of(line)[0]))
        elif script := re.search(r"benchmarks/\w+\.py", line):
            text = (ROOT / script[0]).read_text()
            assert [option for option in options_in(line) if f'"{option}"' not in text] == []

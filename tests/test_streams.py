"""What the commands do with odd streams, odd names of files and narrow terminals."""

import os
import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st
from shell import MODULE, ROOT, command, in_a_terminal, started

from planner import commands, hand_over, printing
from planner.cli import main


@pytest.fixture(scope="module")
def contacts(quick_folder):
    """Contacts of a small week, and the same with the first one on air before its pass begins."""
    assert command(quick_folder, "week", "--out", "heard").returncode == 0
    head, first, *rest = (quick_folder / "heard" / "contacts.csv").read_text().splitlines()
    on = first.split(",")[6]
    spoiled = first.replace(f",{on},", f",{on[:17]}00.000Z,", 1)
    assert spoiled != first
    (quick_folder / "bad.csv").write_text("\n".join([head, spoiled, *rest]) + "\n")
    return quick_folder / "heard" / "contacts.csv"


def in_a_shell(folder, words: str, where: str, **environment) -> subprocess.CompletedProcess:
    """A command with its streams put where a shell puts them; `$PLANNER` is how it is called."""
    told = f'"{sys.executable}" -m planner {words} {where}'
    surroundings = os.environ | {"PYTHONPATH": str(ROOT)} | environment
    return subprocess.run(["sh", "-c", told], cwd=folder, env=surroundings, capture_output=True, text=True, timeout=120)


# --- a reader that goes away, a full disk, a closed stream -----------------------------------------------------------


@pytest.mark.parametrize("more", [(), ("--json",), ("--verbose",)])
@pytest.mark.parametrize(("file", "status"), [("bad.csv", 1), ("heard/contacts.csv", 0)])
def test_the_verdict_stands_when_its_reader_goes_away(quick_folder, contacts, file, status, more):
    process = started(quick_folder, "audit", file, *more)
    process.stdout.close()
    assert process.wait(120) == status
    said = process.stderr.read()
    process.stderr.close()
    assert "Traceback" not in said
    assert said == "" or "--verbose" in more


@pytest.mark.parametrize("words", ["audit nofile.csv", "weak", "check nofile.toml", "compare none none"])
@pytest.mark.parametrize("where", ["2>/dev/full", "2>&-", "2>&- >&-", "2>&- >&- <&-"])
def test_wrong_input_ends_as_such_when_nobody_hears_it(quick_folder, words, where):
    done = in_a_shell(quick_folder, words, where)
    assert (done.returncode, done.stdout, done.stderr) == (2, "", "")


def test_wrong_input_ends_as_such_when_the_reader_of_its_faults_is_gone(quick_folder):
    process = subprocess.Popen([*MODULE, "audit", "nofile.csv"], cwd=quick_folder, stdout=subprocess.PIPE,
                               stderr=subprocess.STDOUT, env=os.environ | {"PYTHONPATH": str(ROOT)})  # fmt: skip
    process.stdout.close()
    assert process.wait(120) == 2


@pytest.mark.parametrize(("file", "status"), [("bad.csv", 1), ("heard/contacts.csv", 0)])
def test_a_closed_standard_output_leaves_the_verdict(quick_folder, contacts, file, status):
    done = in_a_shell(quick_folder, f"audit {file}", ">&-")
    assert (done.returncode, done.stderr) == (status, "")


def test_a_full_disk_under_the_standard_output_is_told(quick_folder, contacts):
    done = in_a_shell(quick_folder, "audit heard/contacts.csv", ">/dev/full")
    assert (done.returncode, done.stderr) == (3, "the machine: No space left on device\n")


def test_letters_that_a_stream_cannot_encode_are_escaped(quick_folder):
    done = command(quick_folder, "check", PYTHONIOENCODING="ascii")
    assert (done.returncode, done.stderr) == (0, "")
    assert "\\u2026" in done.stdout  # the rest of each SHA-256
    done = command(quick_folder, "check", "missions/mårsh.toml", PYTHONIOENCODING="ascii:strict")
    assert done.returncode == 2
    assert done.stderr.startswith("missions/m\\xe5rsh.toml: no such file")


# --- names of files --------------------------------------------------------------------------------------------------


@pytest.fixture
def here(mission_folder, monkeypatch):
    monkeypatch.chdir(mission_folder)
    return mission_folder


@pytest.mark.parametrize(
    "name", ["stations/vardholm.toml", "missions/marshlight.toml", "missions/../soft.csv", "hard.csv"]
)
def test_a_table_of_passes_replaces_no_file_that_the_mission_is_read_from(here, name, capsys):
    (here / "soft.csv").symlink_to("stations/dry_pan.toml")
    (here / "hard.csv").hardlink_to("stations/dry_pan.toml")
    before = {path: path.read_bytes() for path in here.rglob("*") if path.is_file()}
    assert main(["passes", "--csv", name]) == 2
    assert capsys.readouterr().err == f"--csv must be a file of its own, got {name}, which the mission is read from\n"
    assert {path: path.read_bytes() for path in here.rglob("*") if path.is_file()} == before


@pytest.mark.parametrize(
    ("words", "option", "what"),
    [
        (["passes", "--csv", ""], "--csv", "a file"),
        (["week", "--out", ""], "--out", "a folder"),
        (["week", "--out", " "], "--out", "a folder"),
        (["pointing", "--contacts", "contacts.csv", "--out", ""], "--out", "a folder"),
        (["cards", "--contacts", "contacts.csv", "--out", ""], "--out", "a folder"),
    ],
)
def test_an_empty_name_is_refused(here, words, option, what, capsys):
    before = sorted(here.rglob("*"))
    assert main(words) == 2
    assert capsys.readouterr().err == (
        f"{option} must be the name of {what}, got nothing; is a variable of the shell not set?\n"
    )
    assert sorted(here.rglob("*")) == before


ELSEWHERE = "move it elsewhere, or choose another folder\n"


@pytest.mark.parametrize(
    ("words", "index"),
    [
        (["week"], "summary.json"),
        (["pointing", "--contacts", "contacts.csv"], "pointing.json"),
        (["cards", "--contacts", "contacts.csv"], "cards.json"),
    ],
)
def test_a_folder_that_holds_something_else_is_refused_before_anything_is_computed(
    here, monkeypatch, words, index, capsys
):
    for room, name in ((commands, "week"), (hand_over, "write_pointing"), (hand_over, "write_cards")):
        monkeypatch.setattr(room, name, lambda *_: pytest.fail("it was computed"))
    (here / "theirs").mkdir()
    (here / "theirs" / index).write_text('{"files": ["thesis.txt"]}')
    (here / "theirs" / "thesis.txt").write_text("mine")
    assert main([*words, "--out", "theirs"]) == 2
    assert capsys.readouterr().err == (
        f"theirs/{index}: is not what this tool writes (files must be a table of file names and their SHA-256);"
        f" {ELSEWHERE}"
    )
    assert (here / "theirs" / "thesis.txt").read_text() == "mine"


def test_ones_own_contacts_are_not_overwritten_nor_are_they_computed_anew(here, monkeypatch, capsys):
    monkeypatch.setattr(commands, "week", lambda *_: pytest.fail("it was computed"))
    (here / "mine").mkdir()
    (here / "mine" / "contacts.csv").write_text("mine")
    assert main(["week", "--out", "mine"]) == 2
    assert capsys.readouterr().err == (
        f"mine/contacts.csv: is not of the set that summary.json lists and would be overwritten; {ELSEWHERE}"
    )


# --- tables ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("width", ["60", "80", "400"])
def test_a_terminal_shows_every_id_in_one_piece(quick_folder, width):
    piped = command(quick_folder, "passes").stdout.splitlines()
    ids = [line.split()[0] for line in piped[1:-1]]
    shown = in_a_terminal(quick_folder, "passes", COLUMNS=width, NO_COLOR="1")
    assert all(each in shown.split() for each in ids)
    assert len(ids) == int(piped[-1].split()[0])
    assert all(len(line) <= int(width) for line in shown.replace("\x1b[1m", "").replace("\x1b[0m", "").splitlines())


def test_a_pipe_takes_a_table_of_any_width(capsys):
    name = "n" * 300
    printing.table([("name", "left"), ("value", "right")], [(name, "1"), ("short", "12 345")])
    assert capsys.readouterr().out.splitlines() == [
        "name" + " " * 298 + " value", name + "       1", "short" + " " * 297 + "12 345"
    ]  # fmt: skip


texts = st.text(st.characters(min_codepoint=33, max_codepoint=126), min_size=1, max_size=60)
sentences = st.lists(texts, max_size=6).map(" ".join)


@given(st.lists(st.tuples(sentences, st.sampled_from(["left", "right"])), min_size=1, max_size=8), st.integers(1, 120))
def test_a_folded_row_keeps_every_letter_and_the_width(columns, most):
    row, justified = zip(*columns, strict=True)
    lines = printing._lines(row, [len(text) + 2 for text in row], justified, most)
    assert "".join("".join(lines).split()) == "".join("".join(row).split())
    assert all(len(line) <= max(most, 5) for line in lines)


@given(st.lists(st.text("abc-.0123", min_size=1, max_size=40), min_size=1, max_size=8), st.integers(44, 120))
def test_a_word_that_fits_a_line_is_never_broken(row, most):
    lines = printing._lines(row, [len(text) for text in row], ["left"] * len(row), most)
    assert " ".join(lines).split() == row

"""A set is old or new, never a mixture, whatever happens at whatever instant."""

import errno
import itertools
import json
import os
import random
import subprocess
import sys
import time

import pytest

from planner.errors import InputError, MachineError
from planner.export import folder as rooms
from planner.export.folder import check_ours, claim_folder, json_bytes, verify_set, write_file, write_set

OLD = {"contacts.csv": b"old contacts\n", "passes.csv": b"the same\n", "gone.csv": b"only in the old set\n"}
NEW = {"contacts.csv": b"new contacts\n", "passes.csv": b"the same\n", "added.csv": b"only in the new set\n"}
WORKING_NAMES = {".lock", ".coming", ".keeping", ".kept", ".done"}


def contents(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir() if path.name not in WORKING_NAMES}


def visible(folder):
    return {name for name in os.listdir(folder) if name not in WORKING_NAMES}


@pytest.fixture
def whole(tmp_path):
    """A folder that holds the old set, and a file of the user's own."""
    write_set(tmp_path / "week", OLD, {"volume_mbit": 1.0})
    (tmp_path / "week" / "notes.txt").write_text("mine")
    return tmp_path / "week"


def is_exactly(folder, files, volume_mbit):
    found = contents(folder)
    index = json.loads(found.pop("summary.json"))
    found.pop("run_log.json", None)
    assert found.pop("notes.txt") == b"mine"
    return found == files and index["volume_mbit"] == volume_mbit and not verify_set(folder)


def is_old(folder):
    return is_exactly(folder, OLD, 1.0)


def is_new(folder):
    return is_exactly(folder, NEW, 2.0)


def test_a_set_is_written_with_its_hashes_last_and_nothing_else_is_left(whole):
    assert is_old(whole)
    assert list(json.loads((whole / "summary.json").read_bytes())) == ["volume_mbit", "files"]
    assert set(os.listdir(whole)) == {*OLD, "summary.json", "notes.txt"}


def test_a_new_set_takes_the_place_of_the_old_and_spares_what_is_not_ours(whole):
    assert write_set(whole, NEW, {"volume_mbit": 2.0}, run_log={"seconds": 1.5}) == ()
    assert is_new(whole)
    assert set(os.listdir(whole)) == {*NEW, "summary.json", "run_log.json", "notes.txt"}


def test_the_same_set_twice_gives_the_same_bytes_but_for_the_run_log(tmp_path):
    for seconds in (1.0, 2.0):
        write_set(tmp_path / str(seconds), NEW, {"volume_mbit": 2.0}, run_log={"seconds": seconds})
    first, second = contents(tmp_path / "1.0"), contents(tmp_path / "2.0")
    assert {name for name in first if first[name] != second[name]} == {"run_log.json"}


def test_a_second_kind_of_set_shares_the_folder_without_harm(whole):
    write_set(whole, {"pointing_1.csv": b"az\n"}, {}, index="pointing.json")
    assert not verify_set(whole)
    assert not verify_set(whole, "pointing.json")
    assert (whole / "contacts.csv").read_bytes() == OLD["contacts.csv"]


@pytest.mark.parametrize(
    ("spoil", "told"),
    [
        (lambda week: (week / "contacts.csv").write_bytes(b"edited"), "csv: differs from the hash in the index"),
        (lambda week: (week / "gone.csv").unlink(), "gone.csv: is missing"),
        (lambda week: (week / "summary.json").unlink(), "summary.json: cannot be read: No such file or directory"),
        (lambda week: (week / "summary.json").write_bytes(b"{"), "summary.json: files must be a table of file names"),
        (lambda week: (week / "summary.json").write_text('{"files": {"../x": ""}}'), "files must be a table"),
    ],
)  # fmt: skip
def test_a_set_that_is_not_whole_says_where(whole, spoil, told):
    spoil(whole)
    [fault] = verify_set(whole)
    assert told in fault


# --- dying at any instant -------------------------------------------------------------------------------------------

STEPS = ("mkdir", "open", "link", "fsync", "replace", "rename", "unlink", "rmdir", "ftruncate")


def dies_at_step(folder, files, volume_mbit, step, claim_only=False):
    """A child process writes the set and ends, without any clean-up, before its `step`-th call of the system."""
    child = os.fork()
    if child == 0:
        count = itertools.count()

        def deadly(call):
            def wrapper(*args, **options):
                if next(count) == step:
                    os._exit(9)
                return call(*args, **options)

            return wrapper

        try:
            for name in STEPS:
                setattr(rooms.os, name, deadly(getattr(os, name)))
            with claim_folder(folder) as claimed:
                if not claim_only:
                    claimed.write(files, {"volume_mbit": volume_mbit}, run_log={})
        finally:
            os._exit(0)
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]) == 9


def test_death_before_every_single_system_call_leaves_the_old_or_the_new_set(whole):
    told, outcomes = set(), []
    for step in itertools.count():
        died = dies_at_step(whole, NEW, 2.0, step)
        assert verify_set(whole) or is_old(whole) or contents(whole).items() >= NEW.items()
        with claim_folder(whole) as claimed:
            told.update(line.split(": ", 1)[1].split(";")[0] for line in claimed.mended)
        assert is_old(whole) or is_new(whole)
        outcomes.append(is_new(whole))
        assert not WORKING_NAMES & set(os.listdir(whole))
        write_set(whole, OLD, {"volume_mbit": 1.0})
        if not died:
            break
    assert step > 40  # the whole course was walked through
    assert outcomes == sorted(outcomes)  # old up to one instant, new from there on
    assert told == {
        "an earlier run was interrupted before it replaced anything",
        "an earlier run was interrupted while it replaced the set",
        "an earlier run ended just after it replaced the set",
    }


def test_death_while_mending_is_mended_too(whole):
    def mend():
        with claim_folder(whole):
            pass

    midway = 0
    while dies_at_step(whole, NEW, 2.0, midway) and not verify_set(whole):
        mend()
        midway += 1
    mixture = contents(whole)
    for step in itertools.count():
        died = dies_at_step(whole, NEW, 2.0, step, claim_only=True)
        mend()
        assert is_old(whole)
        if not died:
            break
        assert dies_at_step(whole, NEW, 2.0, midway)
        assert contents(whole) == mixture
    assert step > 5


WRITER = """
import sys
from planner.export.folder import write_set
print("ready", flush=True)
for round in range(1_000_000):
    files = {f"{name}.csv": b"%d" % round * 2000 for name in "abcd"}
    write_set(sys.argv[1], files, {"round": round}, run_log={"round": round})
"""


def test_kill_9_at_random_moments_never_leaves_a_mixture(tmp_path):
    """On a busy machine many writers die before their first set is in place: as many are killed as it takes."""
    rng = random.Random(2026)
    rounds, kills = [], 0
    while len(rounds) < 26:
        kills += 1
        assert kills < 500
        writer = subprocess.Popen([sys.executable, "-c", WRITER, str(tmp_path)], stdout=subprocess.PIPE)
        assert writer.stdout.readline() == b"ready\n"
        time.sleep(rng.uniform(0.0, 0.03))
        writer.kill()
        writer.communicate()
        with claim_folder(tmp_path):
            pass
        if not visible(tmp_path):
            continue  # killed before the first set was in place
        assert verify_set(tmp_path) == ()
        round_now = json.loads((tmp_path / "summary.json").read_bytes())["round"]
        assert {(tmp_path / f"{name}.csv").read_bytes() for name in "abcd"} == {b"%d" % round_now * 2000}
        rounds.append(round_now)


# --- what the machine refuses ---------------------------------------------------------------------------------------

FULL, READ_ONLY = (errno.ENOSPC, "the disk is full"), (errno.EROFS, "the file system is read-only")
FORBIDDEN = (errno.EACCES, "no permission to write here")


def refuse(monkeypatch, call, number, at):
    """The `at`-th use of a system call fails, the others work."""
    real, count = getattr(os, call), itertools.count()

    def refusing(*args, **options):
        if next(count) == at:
            raise OSError(number, os.strerror(number))
        return real(*args, **options)

    monkeypatch.setattr(rooms.os, call, refusing)


@pytest.mark.parametrize(
    ("call", "fault", "at"),
    [("fsync", FULL, at) for at in range(6)]
    + [("replace", READ_ONLY, at) for at in range(4)]
    + [("mkdir", READ_ONLY, 0), ("mkdir", FULL, 1), ("rename", FORBIDDEN, 0)],
)
def test_what_the_disk_refuses_is_told_and_the_old_set_is_kept(whole, monkeypatch, call, fault, at):
    with claim_folder(whole) as claimed:
        refuse(monkeypatch, call, fault[0], at)
        with pytest.raises(MachineError) as told:
            claimed.write(NEW, {"volume_mbit": 2.0})
    assert str(told.value) == f"{whole}: {fault[1]}; the set that was there is kept"
    assert is_old(whole)
    assert not WORKING_NAMES & set(os.listdir(whole))


@pytest.mark.parametrize("fault", [READ_ONLY, FORBIDDEN])
def test_a_folder_that_takes_no_file_is_told_at_once(whole, monkeypatch, fault):
    refuse(monkeypatch, "open", fault[0], 0)  # the lock
    with pytest.raises(MachineError) as told, claim_folder(whole):
        pass
    assert str(told.value) == f"{whole}: {fault[1]}; nothing was written"
    assert is_old(whole)


@pytest.mark.parametrize("call", ["write", "ftruncate"])
def test_a_lock_that_the_disk_has_no_room_for_is_let_go(whole, monkeypatch, call):
    with monkeypatch.context() as at_first:
        refuse(at_first, call, errno.ENOSPC, 0)
        with pytest.raises(MachineError, match="the disk is full; nothing was written"), claim_folder(whole):
            pass
    assert is_old(whole)
    assert not WORKING_NAMES & set(os.listdir(whole))
    assert write_set(whole, NEW, {"volume_mbit": 2.0}) == ()


def test_a_file_system_without_hard_links_keeps_copies(whole, monkeypatch):
    def no_links(*args, **options):
        raise OSError(errno.EPERM, "Operation not permitted")

    monkeypatch.setattr(rooms.os, "link", no_links)
    refuse(monkeypatch, "replace", errno.ENOSPC, 1)
    with pytest.raises(MachineError):
        write_set(whole, NEW, {"volume_mbit": 2.0})
    assert is_old(whole)


def test_what_cannot_be_tidied_up_is_no_failure(whole, monkeypatch):
    refuse(monkeypatch, "rename", errno.EROFS, 1)
    write_set(whole, NEW, {"volume_mbit": 2.0})
    assert is_new(whole)
    with claim_folder(whole) as claimed:
        [told] = claimed.mended
    assert told.endswith("an earlier run ended just after it replaced the set; the new set is whole and in place")


def test_ctrl_c_between_two_replacements_puts_the_old_set_back(whole, monkeypatch):
    real, count = os.replace, itertools.count()

    def interrupted(*args):
        if next(count) == 2:
            raise KeyboardInterrupt
        real(*args)

    monkeypatch.setattr(rooms.os, "replace", interrupted)
    with pytest.raises(KeyboardInterrupt):
        write_set(whole, NEW, {"volume_mbit": 2.0})
    assert is_old(whole)


# --- two runs, links, names -----------------------------------------------------------------------------------------


def test_a_second_claim_is_refused_with_the_holder_and_the_first_goes_on(whole):
    with claim_folder(whole) as claimed:
        with pytest.raises(MachineError) as told, claim_folder(whole):
            pass
        other = subprocess.run([sys.executable, "-c", WRITER, str(whole)], capture_output=True, text=True)
        claimed.write(NEW, {"volume_mbit": 2.0})
    refusal = f"{whole}: another run (process {os.getpid()}) is writing here; wait for it or choose another folder"
    assert str(told.value) == refusal
    assert refusal in other.stderr
    assert is_new(whole)


def test_the_lock_of_a_dead_process_holds_nobody_off(whole):
    (whole / ".lock").write_text("999999\n")
    assert write_set(whole, NEW, {"volume_mbit": 2.0}) == ()
    assert is_new(whole)


def test_links_are_not_followed(whole, tmp_path):
    precious = tmp_path / "precious.txt"
    precious.write_text("precious")
    (whole / "contacts.csv").unlink()
    (whole / "contacts.csv").symlink_to(precious)
    with pytest.raises(
        InputError, match=r"contacts\.csv: stands where a file is to be written and is not a plain file"
    ):
        write_set(whole, NEW, {})
    (tmp_path / "linked").symlink_to(whole)
    with pytest.raises(InputError, match=r"linked: must be a folder of its own \(links are not followed for output\)"):
        write_set(tmp_path / "linked", NEW, {})
    (whole / ".coming").symlink_to(tmp_path)
    with claim_folder(whole):
        pass
    assert precious.read_text() == "precious"
    assert "contacts.csv: cannot be read: Too many levels of symbolic links" in verify_set(whole)[0]


def test_a_file_where_the_folder_should_be_is_refused(tmp_path):
    (tmp_path / "week").write_text("a file")
    with pytest.raises(InputError, match="week: must be a folder of its own"):
        write_set(tmp_path / "week", NEW, {})


def test_a_name_too_long_for_the_disk_is_told(tmp_path):
    with pytest.raises(MachineError, match="File name too long; nothing was written"):
        write_set(tmp_path / ("x" * 300), NEW, {})


def test_a_run_that_writes_nothing_leaves_no_folder(tmp_path):
    with claim_folder(tmp_path / "week"):
        assert (tmp_path / "week").is_dir()
    assert not (tmp_path / "week").exists()


def test_folders_above_it_go_again_too_but_none_that_was_there_or_holds_something(tmp_path):
    (tmp_path / "a").mkdir()
    with claim_folder(tmp_path / "a" / "b" / "c" / "week"):
        pass
    assert list(tmp_path.rglob("*")) == [tmp_path / "a"]
    with claim_folder(tmp_path / "a" / "b" / "c" / "week"):
        (tmp_path / "a" / "b" / "notes.txt").write_text("mine")
    assert sorted(tmp_path.rglob("*")) == [tmp_path / "a", tmp_path / "a" / "b", tmp_path / "a" / "b" / "notes.txt"]
    with pytest.raises(MachineError, match="File name too long"):
        write_set(tmp_path / "d" / ("x" * 300), NEW, {})
    assert not (tmp_path / "d").exists()


@pytest.mark.parametrize("name", ["../x.csv", "/x.csv", ".hidden", "a/b", "line\nbreak", ""])
def test_names_that_are_not_plain_never_reach_the_disk(tmp_path, name):
    with pytest.raises(ValueError, match="a set holds plain visible file names"):
        write_set(tmp_path, {name: b""}, {})


ELSEWHERE = "move it elsewhere, or choose another folder"
NO_TABLE = f"is not what this tool writes (files must be a table of file names and their SHA-256); {ELSEWHERE}"
SOME_DIGEST = "0" * 64


def all_files(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def refusal(folder, files=NEW, **options) -> str:
    """What a run is told that may not write here, before it computes where that can be known; nothing is touched."""
    before = all_files(folder)
    with pytest.raises(InputError) as told:
        write_set(folder, files, {"volume_mbit": 2.0}, **options)
    assert all_files(folder) == before
    with pytest.raises(InputError) as foretold:
        check_ours(folder, options.get("index", "summary.json"), files)
    assert str(foretold.value) == str(told.value)
    return str(told.value)


@pytest.mark.parametrize(
    "content",
    [
        '{"files": ["thesis.txt"]}', '{"files": "thesis.txt"}', '{"files": {"thesis.txt": 1}}', '{"files": {}}', "[]",
        '{"files": {"thesis.txt": "00"}}', json.dumps({"files": {"../x": SOME_DIGEST}}), '{"files": 5}',
        '{"mission": "x"}', '"mission"', "my summary", "", "[" * 100_000, '{"files":' * 100_000, "9" * 5000, "\ud800",
    ],
    ids=lambda content: content[:25],
)  # fmt: skip
@pytest.mark.parametrize("index", ["summary.json", "pointing.json"])
def test_an_index_that_another_tool_wrote_is_refused_and_its_files_stay(tmp_path, index, content):
    (tmp_path / index).write_text(content, errors="surrogatepass")
    (tmp_path / "thesis.txt").write_text("mine")
    assert refusal(tmp_path, index=index) == f"{tmp_path / index}: {NO_TABLE}"


@pytest.mark.parametrize("name", ["contacts.csv", "gone.csv"])
def test_a_file_that_was_edited_since_is_neither_replaced_nor_removed(whole, name):
    (whole / name).write_bytes(b"edited by hand")
    assert refusal(whole) == (
        f"{whole / name}: was not written by this tool or was changed since (differs from the hash in the index);"
        f" {ELSEWHERE}"
    )
    (whole / name).rename(whole.parent / name)
    write_set(whole, NEW, {"volume_mbit": 2.0})
    assert is_new(whole)


@pytest.mark.parametrize("name", ["contacts.csv", "added.csv", "run_log.json"])
def test_a_file_that_was_there_before_any_set_is_not_overwritten(tmp_path, name):
    (tmp_path / name).write_text("mine")
    told = f"{tmp_path / name}: is not of the set that summary.json lists and would be overwritten; {ELSEWHERE}"
    with pytest.raises(InputError) as refused:
        write_set(tmp_path, NEW, {}, run_log={})
    assert str(refused.value) == told
    assert all_files(tmp_path) == {name: b"mine"}


def test_a_users_file_that_only_the_new_set_names_is_not_overwritten(whole):
    (whole / "added.csv").write_text("mine")
    assert "added.csv: is not of the set that summary.json lists" in refusal(whole)


def test_a_file_that_is_missing_from_the_set_hinders_nobody(whole):
    (whole / "contacts.csv").unlink()
    check_ours(whole)
    write_set(whole, NEW, {"volume_mbit": 2.0})
    assert is_new(whole)


def test_an_empty_set_is_ours_too(tmp_path):
    for _ in range(2):
        write_set(tmp_path, {}, {"mission": "Marshlight", "tables": 0}, index="pointing.json")


def test_a_set_left_half_way_is_not_judged_before_it_is_mended(whole):
    midway = 0
    while dies_at_step(whole, NEW, 2.0, midway) and not verify_set(whole):
        write_set(whole, OLD, {"volume_mbit": 1.0})
        midway += 1
    assert verify_set(whole)
    check_ours(whole)
    write_set(whole, NEW, {"volume_mbit": 2.0})
    assert is_new(whole)


def put_pipe(path):
    path.unlink(missing_ok=True)
    os.mkfifo(path)


@pytest.mark.parametrize("name", ["summary.json", "contacts.csv"])
def test_a_pipe_in_the_set_is_told_and_nobody_waits_for_it(whole, name):
    put_pipe(whole / name)
    assert f"{whole / name}: cannot be read: must be a plain file" in verify_set(whole)
    with pytest.raises(InputError, match=rf"{name}: (is|was) not .*must be a plain file.*{ELSEWHERE}"):
        check_ours(whole)
    with pytest.raises(InputError, match=f"{name}: stands where a file is to be written and is not a plain file"):
        write_set(whole, NEW, {})


def test_a_pipe_as_the_journal_stops_the_run(whole):
    (whole / ".kept").mkdir()
    put_pipe(whole / ".kept" / ".journal")
    with pytest.raises(MachineError, match="is not what this tool writes; save what you need"):
        write_set(whole, NEW, {})


def test_a_pipe_as_the_lock_keeps_nobody_waiting(whole):
    put_pipe(whole / ".lock")
    with pytest.raises(MachineError, match="nothing was written"):
        write_set(whole, NEW, {})


def test_a_journal_that_is_not_ours_stops_the_run(whole):
    (whole / ".kept").mkdir()
    (whole / ".kept" / ".journal").write_text('{"index": "../x", "sha256": "", "old": [], "new": []}')
    with pytest.raises(MachineError, match="is not what this tool writes; save what you need"):
        write_set(whole, NEW, {})


def test_a_link_in_place_of_what_was_kept_moves_nothing_from_elsewhere(whole, tmp_path):
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "contacts.csv").write_text("theirs")
    journal = {"index": "summary.json", "sha256": "", "old": ["contacts.csv"], "new": ["contacts.csv"]}
    (tmp_path / "elsewhere" / ".journal").write_bytes(json_bytes(journal))
    (whole / ".kept").symlink_to(tmp_path / "elsewhere")
    with pytest.raises(MachineError, match="is not what this tool writes"):
        write_set(whole, NEW, {})
    assert (tmp_path / "elsewhere" / "contacts.csv").read_text() == "theirs"


def test_json_refuses_what_json_has_no_word_for():
    assert json_bytes({"soc_min_pct": 61.25, "note": "Ø"}) == '{\n  "soc_min_pct": 61.25,\n  "note": "Ø"\n}\n'.encode()
    with pytest.raises(ValueError, match="Out of range float values are not JSON compliant"):
        json_bytes({"soc_min_pct": float("nan")})


def test_a_single_file_is_written_whole_and_replaces_the_one_before(tmp_path):
    target = tmp_path / "passes.csv"
    write_file(target, b"old")
    write_file(target, b"new")
    assert target.read_bytes() == b"new"
    assert [entry.name for entry in tmp_path.iterdir()] == ["passes.csv"]


def test_a_single_file_is_not_written_through_a_link_or_over_a_folder(tmp_path):
    (tmp_path / "elsewhere").write_bytes(b"theirs")
    (tmp_path / "link").symlink_to(tmp_path / "elsewhere")
    for target in (tmp_path / "link", tmp_path):
        with pytest.raises(InputError, match="links are not followed"):
            write_file(target, b"mine")
    assert (tmp_path / "elsewhere").read_bytes() == b"theirs"


def test_a_single_file_in_a_missing_folder_is_told(tmp_path):
    with pytest.raises(MachineError, match="nothing was written"):
        write_file(tmp_path / "none" / "passes.csv", b"new")

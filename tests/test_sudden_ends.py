"""`week` ended at any moment, by Ctrl-C or by kill -9: nothing half-done is left, and no process either."""

import json
import os
import random
import shutil
import signal
import subprocess
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest
from shell import command, descendants, started

from planner.export.folder import claim_folder, verify_set

A_HANG_S = 30.0  # how soon Ctrl-C ends a run is measured in benchmarks/promptness.py
KILLS = 50
AT_ONCE = 2
TIMINGS = "run_log.json"


def _modules_load(process: subprocess.Popen) -> bool:
    """Before that Python itself is starting, and ends by the signal as every Python program does."""
    return "numpy" in Path(f"/proc/{process.pid}/maps").read_text()


def _solver_is_there(process: subprocess.Popen) -> bool:
    return bool(descendants(process.pid))


@pytest.mark.parametrize("sign", [_modules_load, _solver_is_there])
@pytest.mark.parametrize("after_s", [0.0, 0.2, 1.5])
def test_ctrl_c_ends_it_and_leaves_nothing(mission_folder, sign, after_s):
    process = started(mission_folder, "week", "--out", "week")
    while not sign(process):
        time.sleep(0.001)
    time.sleep(after_s)
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: the solver's child hears it too
    _, said = process.communicate(timeout=A_HANG_S)
    assert process.returncode == 130
    assert said in ("", "interrupted; nothing was written\n")
    assert not (mission_folder / "week").exists()
    assert _dies_out(process)


def _dies_out(process: subprocess.Popen) -> bool:
    """Whether nothing that a command started outlives it for long (a loaded machine takes its time)."""
    for _ in range(600):
        if not descendants(process.pid):
            return True
        time.sleep(0.05)
    return False


def _files(folder: Path) -> dict[str, bytes]:
    """The visible files that a run on the same input writes alike."""
    return {path.name: path.read_bytes() for path in folder.glob("[!.]*") if path.name != TIMINGS}


@pytest.fixture(scope="module")
def usual_s(quick_folder):
    """How long a whole run takes; leaves the folders `old` and `new`, written without one of the passes and with it."""
    assert command(quick_folder, "passes", "--csv", "passes.csv").returncode == 0
    dropped = (quick_folder / "passes.csv").read_text().splitlines()[1].split(",")[0]
    assert command(quick_folder, "week", "--out", "old", "--drop", dropped).returncode == 0
    shutil.copytree(quick_folder / "old", quick_folder / "new")
    began = time.perf_counter()
    assert command(quick_folder, "week", "--out", "new").returncode == 0
    return time.perf_counter() - began


def _marked(folder: Path) -> str:
    """Which of the two a folder's index says it is: they differ in the number of contacts."""
    contacts = json.loads((folder / "summary.json").read_text())["contacts"]
    return "old" if contacts == json.loads((folder.parent / "old" / "summary.json").read_text())["contacts"] else "new"


def _killed(folder: Path, place: Path, number: int, usual_s: float) -> str:
    """Kill -9 one run of `week` that replaces the old set at `place`; which set is there after the next start."""
    chance = random.Random(number)
    shutil.rmtree(place, ignore_errors=True)
    shutil.copytree(folder / "old", place)
    process = started(folder, "week", "--out", str(place))
    if chance.random() < 0.3:
        time.sleep(chance.uniform(0.0, usual_s))
    else:  # while it writes, which takes a hundredth of its time
        sign = place / chance.choice((".coming", ".kept"))
        while process.poll() is None and not sign.exists():
            time.sleep(0.0005)
        time.sleep(chance.choice((0.0, chance.uniform(0.0, 0.005), chance.uniform(0.0, 0.05))))
    process.kill()
    process.communicate()
    assert _dies_out(process)
    mixed = bool(verify_set(place))
    with claim_folder(place) as claimed:  # as the next `week` does
        assert claimed.mended or not mixed
    assert verify_set(place) == ()
    found, mark = _files(place), _marked(place)
    expected = _files(folder / mark)
    assert {name for name in found | expected if found.get(name) != expected.get(name)} == set()
    return mark


def test_fifty_runs_killed_at_random_moments_leave_the_old_or_the_new_week(quick_folder, usual_s):
    def one_after_another(lane: int) -> list[str]:
        place = quick_folder / f"lane_{lane}"
        return [_killed(quick_folder, place, number, usual_s) for number in range(lane, KILLS, AT_ONCE)]

    with ThreadPoolExecutor(AT_ONCE) as lanes:
        left = [name for lane in lanes.map(one_after_another, range(AT_ONCE)) for name in lane]
    assert len(left) == KILLS
    assert set(left) == {"old", "new"}

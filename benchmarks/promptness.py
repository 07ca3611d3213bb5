"""How soon the tool does what a person at the keys asks: stop, or show the week another way.

    python benchmarks/promptness.py [MISSION]

Each time stands beside a yardstick of the same run: Ctrl-C beside a bare Python that sleeps, a redrawn week beside the
same picture drawn anew. The last column is what is asked of the line.
"""

import asyncio
import os
import signal
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import planner
from planner.notebook.workbench import Workbench

ROOT = Path(__file__).parents[1]
SLEEPER = [sys.executable, "-c", "import time; time.sleep(600)"]
REPEATS = 5


def seconds(call) -> float:
    began = time.perf_counter()
    call()
    return time.perf_counter() - began


def ended_after_s(words: list[str], folder: Path, sign) -> float:
    """From Ctrl-C, as a terminal sends it, to the end of the process; the median of some [s]."""
    taken_s = []
    for _ in range(REPEATS):
        quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
        process = subprocess.Popen(words, cwd=ROOT, start_new_session=True, **quiet)
        while not sign(process):
            time.sleep(0.001)
        taken_s.append(seconds(lambda p=process: (os.killpg(p.pid, signal.SIGINT), p.wait())))
        assert not (folder / "week").exists()
    return statistics.median(taken_s)


def after(moment_s: float):
    return lambda process: time.sleep(moment_s) or True


def solver_works(process: subprocess.Popen) -> bool:
    """A while after the solver's child process was started."""
    tasks = Path(f"/proc/{process.pid}/task").glob("*/children")
    if any(task.read_text() for task in tasks):
        time.sleep(2.0)
        return True
    return False


def interrupts(mission: str) -> None:
    bare_s = ended_after_s(SLEEPER, ROOT, after(0.5))
    print(f"{'Ctrl-C: a bare Python that sleeps':<46} {1e3 * bare_s:6.0f} ms")
    with tempfile.TemporaryDirectory() as folder:
        words = [sys.executable, "-m", "planner", "week", mission, "--out", f"{folder}/week"]
        signs = {"0.3 s": after(0.3), "1 s": after(1.0), "2 s": after(2.0), "3 s": after(3.0), "solving": solver_works}
        for when, sign in signs.items():
            taken_s = ended_after_s(words, Path(folder), sign)
            name = f"Ctrl-C: week, {'while ' * (when == 'solving')}{when}{' after its start' * (when != 'solving')}"
            print(f"{name:<46} {1e3 * taken_s:6.0f} ms {taken_s / bare_s:6.1f} times    below 1000 ms")


async def redraws(mission: str) -> None:
    bench = Workbench(loaded := planner.load_mission(mission), planner.plan_week(loaded))
    desk, week = bench.desk, bench.week
    week.picture.canvas.draw()
    desk._watchers[:] = [lambda what: week.redraw()]
    free = desk.plan.passes.query("verdict == 'left out'")["pass_id"].iloc[0]
    acts = {
        "drop": [lambda s=s: desk.drop_pass(s.pass_id) for s in desk.plan.flown.sessions[:REPEATS]],
        "keep": [lambda: desk.keep_pass(free, desk.plan.flown.sessions[0].mode)],
        "floor": [
            lambda f=f: desk.alter(desk.changes.with_value("policy", "soc_floor_pct", f)) for f in (60.0, 50.0, 40.0)
        ],
    }
    anew_s = min(seconds(lambda: (week.turn_page(), week.picture.canvas.draw())) for _ in range(REPEATS))
    print(f"{'the week drawn anew':<46} {1e3 * anew_s:6.0f} ms")
    for name, calls in acts.items():
        taken_s = statistics.median(seconds(call) for call in calls)
        print(f"{f'redrawn after {name}':<46} {1e3 * taken_s:6.0f} ms {taken_s / anew_s:6.2f} times    below 300 ms")


def main(mission: str) -> None:
    interrupts(mission)
    asyncio.run(redraws(mission))


if __name__ == "__main__":
    main(*(sys.argv[1:] or ["missions/marshlight.toml"]))

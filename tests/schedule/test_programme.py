"""The solver's child process: known optima, none, a limit, and an end at once when cancelled."""

import os
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from planner.errors import MachineError
from planner.schedule import programme
from planner.schedule.programme import Programme, Solving, solve

ROOT = Path(__file__).parents[2]
A_SECOND = 1.0
A_WHILE_S = 30.0  # of a solve that would last for many minutes; benchmarks/promptness.py measures how soon it ends
A_BILLIONTH = 1e-6  # HiGHS' own feasibility tolerance


def knapsack(weights, values, room) -> Programme:
    made = Programme()
    columns = [made.variable(highest=1, gain=value, whole=True) for value in values]
    made.row(list(zip(columns, weights, strict=True)), highest=room)
    return made


def hard_knapsacks() -> Programme:
    """Many knapsacks over the same 300 things: minutes of work."""
    chance = np.random.default_rng(4)
    made = Programme()
    columns = [made.variable(highest=1, gain=float(gain), whole=True) for gain in chance.integers(50, 100, 300)]
    for _ in range(40):
        weights = chance.integers(5, 100, 300)
        made.row(list(zip(columns, weights.astype(float), strict=True)), highest=float(weights.sum() / 2))
    return made


def working() -> set[int]:
    """Process ids of this process's children that work (state running); one that waits for a question does not."""
    found = set()
    for task in os.listdir("/proc/self/task"):
        children = Path(f"/proc/self/task/{task}/children").read_text().split()
        found |= {int(pid) for pid in children if "\nState:\tR" in Path(f"/proc/{pid}/status").read_text()}
    return found


def test_a_known_optimum():
    # weights 10, 20, 30, values 60, 100, 120, room 50: the textbook's two last (common example, no source)
    solution = solve(knapsack([10.0, 20.0, 30.0], [60.0, 100.0, 120.0], 50.0), relative_gap=0.0)
    assert solution.values == pytest.approx([0, 1, 1], abs=A_BILLIONTH)
    assert (solution.objective, solution.bound) == pytest.approx((220, 220))
    assert (solution.status, solution.gap_pct) == ("optimal", 0)


def test_a_continuous_optimum():
    made = Programme()
    x, y = made.variable(gain=3.0), made.variable(gain=2.0)
    made.row([(x, 1.0), (y, 1.0)], highest=4.0)
    made.row([(x, 1.0), (y, 3.0)], highest=6.0)
    made.row([(x, 1.0)], highest=3.0)
    assert solve(made, relative_gap=0.0).values == pytest.approx([3, 1])


def test_no_solution_is_told():
    made = Programme()
    x = made.variable(highest=1.0)
    made.row([(x, 1.0)], lowest=2.0)
    solution = solve(made, relative_gap=0.0)
    assert solution.values is None
    assert solution.status == "infeasible"


def test_the_same_answer_twice():
    first, second = (solve(knapsack([3.0, 4, 5, 6], [4.0, 5, 6, 7], 10.0), relative_gap=0.0) for _ in range(2))
    assert first.values.tolist() == second.values.tolist()


def test_a_time_limit_gives_the_best_so_far_and_a_bound_above_it():
    solution = solve(hard_knapsacks(), relative_gap=0.0, time_limit_s=1.0)
    assert solution.status == "time limit"
    assert solution.values is None or solution.objective <= solution.bound
    assert solution.seconds < A_WHILE_S


def test_a_cancelled_solve_ends_and_no_process_is_left():
    with Solving(hard_knapsacks(), relative_gap=0.0) as solving:
        time.sleep(A_SECOND)
        began = time.perf_counter()
        with pytest.raises(KeyboardInterrupt):
            solving.solution(lambda: True)
        at_work = working()
    assert time.perf_counter() - began < A_WHILE_S
    assert at_work
    for _ in range(100):  # the next worker may still be loading; one that was left would work for minutes
        if not working() & at_work:
            return
        time.sleep(0.05)
    pytest.fail("a solver still works")


PARENT = """
import time
from test_programme import Solving, hard_knapsacks
with Solving(hard_knapsacks(), relative_gap=0.0) as solving:
    print(solving._worker.pid, flush=True)
    time.sleep(600)
"""


def test_a_parent_killed_while_the_solver_works_takes_it_along():
    paths = {"PYTHONPATH": os.pathsep.join((str(Path(__file__).parent), str(ROOT)))}
    parent = subprocess.Popen([sys.executable, "-c", PARENT], stdout=subprocess.PIPE, env=os.environ | paths)
    worker = Path(f"/proc/{int(parent.stdout.readline())}/stat")

    def seconds_worked() -> float:
        return int(worker.read_text().rpartition(")")[2].split()[11]) / os.sysconf("SC_CLK_TCK")

    while seconds_worked() < 3 * A_SECOND:  # it has long read the programme, and solves
        time.sleep(0.05)
    parent.kill()
    parent.communicate()
    for _ in range(600):
        if not worker.exists():
            return
        time.sleep(0.05)
    pytest.fail("the solver goes on for nobody")


def test_a_child_that_dies_is_the_machine_s_fault(monkeypatch, tmp_path):
    worker = tmp_path / "worker.py"
    worker.write_text("raise SystemExit('out of memory')")
    monkeypatch.setattr(programme, "WORKER", worker)
    monkeypatch.setattr(programme, "_waiting", [])
    with pytest.raises(MachineError) as caught:
        solve(knapsack([1.0], [1.0], 1.0), relative_gap=0.0)
    assert "out of memory" in str(caught.value)

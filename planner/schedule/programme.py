"""A mixed-integer programme, gathered row by row and solved by HiGHS in a child process.

HiGHS hears no signal until it returns; in a child it can be ended at once by Ctrl-C or by a cancelled re-plan.
"""

import pickle
import subprocess
import sys
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from scipy import sparse

from planner.errors import MachineError

WORKER = Path(__file__).with_name("worker.py")
LOOK_EVERY_S = 0.05  # how often a waiting parent looks for a cancelled re-plan


@dataclass(frozen=True)
class Solution:
    """Values of all variables (None if none was found), the objective, its bound, and how the solver ended."""

    values: np.ndarray | None
    objective: float
    bound: float
    status: str  # "optimal", "time limit", "infeasible" or the solver's own words
    seconds: float

    @property
    def gap_pct(self) -> float:
        """How far the objective may be from the programme's optimum, in percent of the bound."""
        return max(0.0, 100 * (self.bound - self.objective) / max(abs(self.bound), 1e-9))


@dataclass
class Programme:
    """Maximise `gain` · x over rows `lower <= A x <= upper`, bounds and integrality."""

    gain: list[float] = field(default_factory=list)
    lowest: list[float] = field(default_factory=list)
    highest: list[float] = field(default_factory=list)
    whole: list[int] = field(default_factory=list)
    _rows: list[int] = field(default_factory=list)
    _columns: list[int] = field(default_factory=list)
    _factors: list[float] = field(default_factory=list)
    _row_lowest: list[float] = field(default_factory=list)
    _row_highest: list[float] = field(default_factory=list)

    def variable(self, lowest: float = 0.0, highest: float = np.inf, *, gain: float = 0.0, whole: bool = False) -> int:
        """Add a variable; its index."""
        self.gain.append(gain)
        self.lowest.append(lowest)
        self.highest.append(highest)
        self.whole.append(int(whole))
        return len(self.gain) - 1

    def row(self, terms: Iterable[tuple[int, float]], lowest: float = -np.inf, highest: float = np.inf) -> int:
        """Add `lowest <= sum of factor x variable <= highest`; its index."""
        index = len(self._row_lowest)
        for column, factor in terms:
            self._rows.append(index)
            self._columns.append(column)
            self._factors.append(factor)
        self._row_lowest.append(lowest)
        self._row_highest.append(highest)
        return index

    def fix(self, variable: int, value: float) -> None:
        self.lowest[variable] = self.highest[variable] = value

    def tighten_row(self, index: int, by: float) -> None:
        """Raise the lower limit of a row."""
        self._row_lowest[index] += by

    def arrays(self) -> dict:
        """What the solver takes: a minimisation."""
        shape = (len(self._row_lowest), len(self.gain))
        return {
            "c": -np.array(self.gain),
            "bounds": (np.array(self.lowest), np.array(self.highest)),
            "integrality": np.array(self.whole),
            "matrix": sparse.csr_array((self._factors, (self._rows, self._columns)), shape=shape),
            "rows": (np.array(self._row_lowest), np.array(self._row_highest)),
        }


def solve(
    programme: Programme,
    *,
    relative_gap: float,
    time_limit_s: float | None = None,
    cancelled: Callable[[], bool] = lambda: False,
) -> Solution:
    """Solve one programme; see `solve_all`."""
    return solve_all([programme], relative_gap=relative_gap, time_limit_s=time_limit_s, cancelled=cancelled)[0]


def solve_all(
    programmes: list[Programme],
    *,
    relative_gap: float,
    time_limit_s: float | None = None,
    cancelled: Callable[[], bool] = lambda: False,
) -> list[Solution]:
    """Solve each programme in a child process of its own, all at once.

    Parameters
    ----------
    relative_gap : the solver may stop when objective and bound differ by no more than this share
    time_limit_s : seconds for each, or None for as long as it takes (only then is the result the same on every run)
    cancelled : asked every 50 ms; when it says True the children are ended

    Raises
    ------
    KeyboardInterrupt : interrupted or cancelled; no child is left running
    MachineError : a child ended without an answer
    """
    options = {"mip_rel_gap": relative_gap} | ({} if time_limit_s is None else {"time_limit": time_limit_s})
    began = time.perf_counter()
    children = [_Child(programme.arrays() | {"options": options}) for programme in programmes]
    try:
        while any(child.running() for child in children):
            if cancelled():
                raise KeyboardInterrupt
            time.sleep(LOOK_EVERY_S)
        return [child.solution(time.perf_counter() - began) for child in children]
    finally:
        for child in children:
            child.end()


class _Child:
    """One solver process. Question and answer go through unnamed temporary files, so no pipe can fill and block."""

    def __init__(self, question: dict):
        import tempfile

        self.question, self.answer = tempfile.TemporaryFile(), tempfile.TemporaryFile()
        pickle.dump(question, self.question)
        self.question.seek(0)
        self.process = subprocess.Popen(
            [sys.executable, str(WORKER)], stdin=self.question, stdout=self.answer, stderr=subprocess.PIPE
        )

    def running(self) -> bool:
        return self.process.poll() is None

    def solution(self, seconds: float) -> Solution:
        self.answer.seek(0)
        content = self.answer.read()
        if self.process.returncode or not content:
            words = self.process.stderr.read().decode(errors="replace").strip().splitlines()
            raise MachineError(f"the solver ended without an answer: {words[-1] if words else self.process.returncode}")
        found = pickle.loads(content)
        return Solution(seconds=seconds, **found)

    def end(self) -> None:
        if self.running():
            self.process.kill()
        self.process.wait()
        for file in (self.question, self.answer, self.process.stderr):
            file.close()

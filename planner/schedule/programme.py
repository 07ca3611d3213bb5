"""A mixed-integer programme, gathered row by row and solved by HiGHS in a child process.

HiGHS hears no signal until it returns; in a child it can be ended at once by Ctrl-C or by a cancelled re-plan.
"""

import contextlib
import pickle
import subprocess
import sys
import tempfile
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


class Solving:
    """A programme being solved in a child process; leaving the `with` block ends the child, whatever happened.

    Question and answer go through unnamed temporary files, so no pipe can fill and block.

    Parameters
    ----------
    relative_gap : the solver may stop when objective and bound differ by no more than this share
    time_limit_s : seconds, or None for as long as it takes (only then is the result the same on every run)
    """

    def __init__(self, programme: Programme, *, relative_gap: float, time_limit_s: float | None = None):
        limit = {} if time_limit_s is None else {"time_limit": time_limit_s}
        self._began = time.perf_counter()
        with contextlib.ExitStack() as files:
            question, self._answer, self._words = (files.enter_context(tempfile.TemporaryFile()) for _ in range(3))
            pickle.dump(programme.arrays() | {"options": {"mip_rel_gap": relative_gap} | limit}, question)
            question.seek(0)
            command = [sys.executable, str(WORKER)]
            self._process = subprocess.Popen(command, stdin=question, stdout=self._answer, stderr=self._words)
            self._files = files.pop_all()

    def __enter__(self) -> "Solving":
        return self

    def __exit__(self, *_) -> None:
        if self._process.poll() is None:
            self._process.kill()
        self._process.wait()
        self._files.close()

    def solution(self, cancelled: Callable[[], bool] = lambda: False) -> Solution:
        """Wait for the answer.

        Raises
        ------
        KeyboardInterrupt : interrupted, or `cancelled` (asked every 50 ms) says True
        MachineError : the child ended without an answer
        """
        while self._process.poll() is None:
            if cancelled():
                raise KeyboardInterrupt
            time.sleep(LOOK_EVERY_S)
        self._answer.seek(0)
        content = self._answer.read()
        if self._process.returncode or not content:
            self._words.seek(0)
            words = self._words.read().decode(errors="replace").strip().splitlines()
            raise MachineError(
                f"the solver ended without an answer: {words[-1] if words else self._process.returncode}"
            )
        return Solution(seconds=time.perf_counter() - self._began, **pickle.loads(content))


def solve(programme: Programme, *, cancelled: Callable[[], bool] = lambda: False, **options) -> Solution:
    """Solve one programme; parameters as `Solving`."""
    with Solving(programme, **options) as solving:
        return solving.solution(cancelled)

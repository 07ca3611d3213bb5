"""A mixed-integer programme, gathered row by row and solved by HiGHS in a child process.

HiGHS hears no signal until it returns; in a child it can be ended at once by Ctrl-C or by a cancelled re-plan.
"""

import atexit
import contextlib
import pickle
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from scipy import sparse

from planner.errors import MachineError

WORKER = Path(__file__).with_name("worker.py")
LOOK_EVERY_S = 0.05  # how often a waiting parent looks for a cancelled re-plan
_waiting: list[subprocess.Popen] = []


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

    def __str__(self) -> str:
        found = "nothing found"
        if self.values is not None:
            found = f"worth {self.objective:.1f}, at most {self.bound:.1f} (gap {self.gap_pct:.3f} %)"
        return f"{found}, {self.status} in {self.seconds:.2f} s"


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


def start_worker() -> None:
    """Have a worker loaded and waiting before it is needed; it ends by itself when this process does."""
    if not _waiting:
        pipe = subprocess.PIPE
        _waiting.append(subprocess.Popen([sys.executable, str(WORKER)], stdin=pipe, stdout=pipe, stderr=pipe))


def _take_worker() -> subprocess.Popen:
    """A worker that waits for its question; the next one begins to load."""
    while True:
        start_worker()
        worker = _waiting.pop()
        if worker.poll() is None:
            start_worker()
            return worker
        _close(worker)


def _close(worker: subprocess.Popen) -> None:
    if worker.poll() is None:
        worker.kill()
    worker.wait()
    for stream in filter(None, (worker.stdin, worker.stdout, worker.stderr)):
        with contextlib.suppress(OSError):
            stream.close()


@atexit.register
def _close_waiting() -> None:
    while _waiting:
        _close(_waiting.pop())


class Solving:
    """A programme being solved in a child process; leaving the `with` block ends the child, whatever happened.

    Parameters
    ----------
    relative_gap : the solver may stop when objective and bound differ by no more than this share
    time_limit_s : seconds, or None for as long as it takes (only then is the result the same on every run)
    """

    def __init__(self, programme: Programme, *, relative_gap: float, time_limit_s: float | None = None):
        limit = {} if time_limit_s is None else {"time_limit": time_limit_s}
        question = pickle.dumps(programme.arrays() | {"options": {"mip_rel_gap": relative_gap} | limit})
        self._began = time.perf_counter()
        self._worker = _take_worker()
        # a thread of its own, so that no pipe can fill and block
        self._asking = threading.Thread(target=self._ask, args=(question,), daemon=True)
        self._answer, self._words = b"", b""
        self._asking.start()

    def _ask(self, question: bytes) -> None:
        with contextlib.suppress(OSError, ValueError):  # the worker was ended
            self._answer, self._words = self._worker.communicate(question)

    def __enter__(self) -> "Solving":
        return self

    def __exit__(self, *_) -> None:
        if self._worker.poll() is None:
            self._worker.kill()
        self._asking.join()
        _close(self._worker)

    def solution(self, cancelled: Callable[[], bool] = lambda: False) -> Solution:
        """Wait for the answer.

        Raises
        ------
        KeyboardInterrupt : interrupted, or `cancelled` (asked every 50 ms) says True
        MachineError : the child ended without an answer
        """
        while self._asking.is_alive():
            if cancelled():
                raise KeyboardInterrupt
            self._asking.join(LOOK_EVERY_S)
        if self._worker.returncode or not self._answer:
            words = self._words.decode(errors="replace").strip().splitlines()
            raise MachineError(f"the solver ended without an answer: {words[-1] if words else self._worker.returncode}")
        return Solution(seconds=time.perf_counter() - self._began, **pickle.loads(self._answer))


def solve(programme: Programme, *, cancelled: Callable[[], bool] = lambda: False, **options) -> Solution:
    """Solve one programme; parameters as `Solving`."""
    with Solving(programme, **options) as solving:
        return solving.solution(cancelled)

"""The child process that runs HiGHS: a pickled programme on standard input, a pickled answer on standard output.

Run by path, so that it loads numpy and scipy and nothing else.
"""

import fcntl
import os
import pickle
import select
import signal
import sys
from contextlib import contextmanager

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp

STATUS = {0: "optimal", 1: "time limit", 2: "infeasible", 3: "unbounded"}


def answer(question: dict) -> dict:
    """Solve and report as a maximisation."""
    result = milp(
        question["c"],
        bounds=Bounds(*question["bounds"]),
        integrality=question["integrality"],
        constraints=LinearConstraint(question["matrix"], *question["rows"]),
        options=question["options"],
    )
    bound = getattr(result, "mip_dual_bound", None)
    objective = np.nan if result.x is None else -float(result.fun)
    return {
        "values": result.x,
        "objective": objective,
        "bound": objective if bound is None else -float(bound),
        "status": STATUS.get(result.status, result.message),
    }


@contextmanager
def _ends_with_reader(pipe: int):
    """Within, this process ends as soon as nobody reads the pipe any more: HiGHS would solve on for nobody.

    Linux tells the writer of a pipe by SIGIO, which ends a process that does not handle it. Elsewhere nothing happens.
    """
    signal.signal(signal.SIGIO, signal.SIG_DFL)  # a parent may have had it ignored
    flags = fcntl.fcntl(pipe, fcntl.F_GETFL)
    fcntl.fcntl(pipe, fcntl.F_SETOWN, os.getpid())
    fcntl.fcntl(pipe, fcntl.F_SETFL, flags | os.O_ASYNC)
    look = select.poll()
    look.register(pipe, 0)
    if look.poll(0):  # the reader went before it could be told of
        sys.exit()
    yield
    fcntl.fcntl(pipe, fcntl.F_SETFL, flags)


def main() -> None:
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent ends this process itself
    output = os.dup(1)
    os.dup2(2, 1)  # whatever the solver prints must not mix with the answer
    question = sys.stdin.buffer.read()
    if not question:  # the parent ended without asking
        return
    with _ends_with_reader(output):
        found = pickle.dumps(answer(pickle.loads(question)))
    with os.fdopen(output, "wb") as stream:
        stream.write(found)


if __name__ == "__main__":
    main()

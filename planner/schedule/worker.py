"""The child process that runs HiGHS: a pickled programme on standard input, a pickled answer on standard output.

Run by path, so that it loads numpy and scipy and nothing else.
"""

import os
import pickle
import signal
import sys

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


def main() -> None:
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent ends this process itself
    output = os.dup(1)
    os.dup2(2, 1)  # whatever the solver prints must not mix with the answer
    question = sys.stdin.buffer.read()
    if not question:  # the parent ended without asking
        return
    found = pickle.dumps(answer(pickle.loads(question)))
    with os.fdopen(output, "wb") as stream:
        stream.write(found)


if __name__ == "__main__":
    main()

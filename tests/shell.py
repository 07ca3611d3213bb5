"""Commands as processes of their own, as a shell and a terminal see them."""

import os
import pty
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]
MODULE = [sys.executable, "-m", "planner"]


def _surroundings(more: dict[str, str]) -> dict[str, str]:
    return os.environ | {"PYTHONPATH": str(ROOT)} | more


def command(folder, *words, **environment) -> subprocess.CompletedProcess:
    """What a command said and its exit status, once it has ended."""
    return subprocess.run([*MODULE, *words], cwd=folder, env=_surroundings(environment), capture_output=True,
                          text=True, timeout=120)  # fmt: skip


def started(folder, *words) -> subprocess.Popen:
    """A command that runs in a session of its own."""
    pipe = subprocess.PIPE
    return subprocess.Popen([*MODULE, *words], cwd=folder, env=_surroundings({}), stdout=pipe, stderr=pipe, text=True,
                            start_new_session=True)  # fmt: skip


def in_a_terminal(folder, *words, **environment) -> str:
    """What a command says to a terminal."""
    master, slave = pty.openpty()
    surroundings = _surroundings({"TERM": "xterm-256color"} | environment)
    process = subprocess.Popen([*MODULE, *words], cwd=folder, stdout=slave, stderr=slave, env=surroundings)
    os.close(slave)
    said = b""
    while True:
        try:
            more = os.read(master, 65536)
        except OSError:  # the other end is closed
            break
        if not more:
            break
        said += more
    os.close(master)
    assert process.wait(60) == 0
    return said.decode()


def descendants(pid: int) -> set[int]:
    """Process ids of all that a started command started and that still run."""
    found: set[int] = set()
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = stat.read_text().rpartition(")")[2].split()
        except OSError:
            continue
        if int(fields[3]) == pid and fields[0] != "Z":  # its session
            found.add(int(stat.parent.name))
    return found - {pid}

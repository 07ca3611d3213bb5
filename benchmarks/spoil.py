"""Spoiled files of every kind through the real commands, in workers that are watched for time and memory.

    python benchmarks/spoil.py --seed 1 --files 10000
    python benchmarks/spoil.py --seed 1 --files 500 --kind mission --strain --deep 5

Every file goes through `check`; what is accepted goes through `passes` and `link`, and with --deep every N-th of it
through `week`, `audit`, `pointing` and `cards`. Prints JSON, failures also on standard error as they come. A failure
names the kind and the number that repeat it: --kind KIND --number NUMBER. Whatever is not exit 0, 1 or 2, finite
figures and silence on standard error at exit 0 is a failure.
"""

import argparse
import collections
import contextlib
import csv
import io
import json
import multiprocessing
import os
import re
import resource
import shutil
import signal
import sys
import tempfile
import threading
import time
import traceback
import warnings
from pathlib import Path

ROOT = Path(__file__).parents[1]
sys.path[:0] = [str(ROOT), str(ROOT / "tests" / "mission")]

from spoiling import spoiled, strained, with_true_checksums  # noqa: E402

from planner.cli import main  # noqa: E402
from planner.mission.files import load_mission  # noqa: E402

SAMPLES = ("two_satellites.omm", "marshlight.omm.xml", "marshlight.omm.json", "marshlight.omm.csv")
KINDS = {
    "mission": ("missions/marshlight.toml",),
    "station": ("stations/vardholm.toml",),
    "tle": ("tle_samples/marshlight.tle",),
    "omm": tuple(f"tle_samples/{name}" for name in SAMPLES),
    "oem": ("tle_samples/marshlight.oem",),
    "pattern": ("missions/pattern.csv",),
    "contacts": ("week/contacts.csv",),
}
MISSION = "missions/marshlight.toml"
LIMIT_S, DEEP_LIMIT_S, MOST_MB, ADDRESS_SPACE = 60, 300, 1000, 6 << 30
CARDS_ONE_IN = 4  # of the files that go deep, because cards are slow
NOT_FINITE = re.compile(r"(?<![\w-])(nan|-?inf|-?infinity)(?![\w-])", re.IGNORECASE)
TOLD_TEXT = 1500  # characters of what a command said


def prepared(folder: Path) -> Path:
    """The demo over one station for part of a day, with a measured pattern and a planned week."""
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, folder / name)
    begin, _, rest = (folder / MISSION).read_text().partition("stations = [")
    text = f'{begin}stations = ["../stations/vardholm.toml"]{rest.partition("]")[2]}'
    text = text.replace('"patch"\ngain_dbi = 6.0', '"measured pattern"\nfile = "pattern.csv"')
    (folder / MISSION).write_text(text.replace("days = 7.0", "days = 0.4"))
    rows = "".join(f"{angle},{6 - angle / 5:.1f}\n" for angle in range(0, 181, 20))
    (folder / "missions" / "pattern.csv").write_text("off_axis_deg,gain_dbi\n" + rows)
    with contextlib.chdir(folder), contextlib.redirect_stdout(io.StringIO()):
        assert main(["week", "--quiet"]) == 0
    return folder


class Trial:
    """One spoiled file in the working folder, and what the commands made of it."""

    def __init__(self, screens: tuple, kind: str, number: int, strain: bool):
        self.name, self.screens = KINDS[kind][number % len(KINDS[kind])], screens
        self.content = (strained if strain else spoiled)(Path(self.name).read_bytes(), number)
        if kind == "tle" and number % 3:
            self.content = with_true_checksums(self.content)
        Path(self.name).write_bytes(self.content)
        if kind in ("tle", "omm", "oem"):
            text = Path(MISSION).read_text()
            Path(MISSION).write_text(re.sub(r"(?m)^elements = .*$", f'elements = "../{self.name}"', text))
        self.with_cards = number % CARDS_ONE_IN == 0
        self.statuses: list[tuple[str, int]] = []
        self.failures: list[str] = []

    def run(self, command: str, *words: str) -> int:
        """One command on the mission; its exit status, with whatever breaks the promise noted."""
        try:
            status = main([command, MISSION, *words])
        except (Exception, SystemExit):
            status = -1
            traceback.print_exc()
        sys.stdout.flush(), sys.stderr.flush()
        said, told = map(_drained, self.screens)
        self.statuses.append((command, status))
        fitting = {0: not told.strip(), 1: True, 2: bool(told.strip())}.get(status, False)
        if not fitting or "Warning" in told:
            self.failures.append(f"{command} {' '.join(words)}: exit {status}, standard error {told[-TOLD_TEXT:]!r}")
        elif status < 2:
            self.look(command, said)
        return status

    def look(self, place: str, text: str) -> None:
        """A figure that is not finite, where the file itself has no such word."""
        found = NOT_FINITE.search(text)
        if found and not NOT_FINITE.search(self.content.decode(errors="replace")):
            self.failures.append(f"{place}: not finite: {text[max(0, found.start() - 200) : found.end() + 50]!r}")

    def down_the_river(self, deep: bool) -> None:
        """Every command in turn, as long as the one before was content."""
        if self.name.endswith("contacts.csv"):
            safe = self.run("audit", self.name)
            if safe < 2:
                self.run("pointing", "--contacts", self.name, "--out", "pointing", "--force")
            if deep and safe < 2:
                self.run("week", "--from", self.name, "--out", "new", "--quiet")
            if deep and safe == 0:
                self.run("cards", "--contacts", self.name, "--out", "cards")
        elif self.run("check") == 0:
            self.passes_and_links()
            if deep and self.run("week", "--out", "new", "--quiet", "--time-limit", "30") == 0:
                self.after_a_week()

    def passes_and_links(self) -> None:
        mission = load_mission(MISSION)
        satellite, station = mission.satellites[0], mission.stations[0].name
        for mode in satellite.spacecraft.transmitter:
            where = (f"--station={station}", f"--mode={mode.mode}", f"--satellite={satellite.name}")
            self.run("link", *where, "--elevation", "30")
        if self.run("passes", "--csv", "passes.csv") == 0:
            text = Path("passes.csv").read_text()
            self.look("passes.csv", text)
            for row in list(csv.DictReader(text.splitlines()))[:1]:
                self.run("link", *where, f"--pass={row['pass_id']}")

    def after_a_week(self) -> None:
        for path in sorted(Path("new").iterdir()):
            if path.suffix != ".png":
                self.look(path.name, path.read_text())
        self.run("audit", "new/contacts.csv")
        self.run("pointing", "--contacts", "new/contacts.csv", "--out", "pointing", "--force")
        if self.with_cards:
            self.run("cards", "--contacts", "new/contacts.csv", "--out", "cards")


def _drained(screen) -> str:
    """What stands on a screen, which is then empty."""
    text = os.pread(screen.fileno(), os.fstat(screen.fileno()).st_size, 0).decode(errors="replace")
    os.ftruncate(screen.fileno(), 0)
    return text


def work(pipe, example: str, strain: bool) -> None:
    """The worker: a job in, a report out, until the pipe closes. The alarm ends a worker that hangs, wherever it is."""
    os.setsid()
    resource.setrlimit(resource.RLIMIT_AS, (ADDRESS_SPACE, ADDRESS_SPACE))
    for category in (RuntimeWarning, UserWarning, FutureWarning):
        warnings.simplefilter("always", category)
    with tempfile.TemporaryDirectory() as parent, contextlib.suppress(EOFError):
        home = Path(parent) / "home"
        screens = tuple(open(Path(parent) / name, "ab+", buffering=0) for name in ("out", "err"))  # noqa: SIM115
        for number, screen in enumerate(screens, 1):
            os.dup2(screen.fileno(), number)
        while True:
            kind, number, deep = pipe.recv()
            shutil.rmtree(home, ignore_errors=True)
            shutil.copytree(example, home)
            os.chdir(home)
            Path("/proc/self/clear_refs").write_text("5")  # peak memory counts anew
            began = time.perf_counter()
            signal.setitimer(signal.ITIMER_REAL, DEEP_LIMIT_S if deep else LIMIT_S)
            trial = Trial(screens, kind, number, strain)
            trial.down_the_river(deep)
            signal.setitimer(signal.ITIMER_REAL, 0)
            too_wide = [f"{_peak_mb():.0f} MB of memory"] if _peak_mb() > MOST_MB else []
            pipe.send((trial.statuses, trial.failures + too_wide, time.perf_counter() - began, _peak_mb()))


def _peak_mb() -> float:
    own_kb = int(re.search(r"VmHWM:\s*(\d+)", Path("/proc/self/status").read_text())[1])
    return max(own_kb, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss) / 1024


def tended(context, example: str, strain: bool, jobs, reports: list) -> None:
    """Hand jobs to a worker, a new one whenever it ends, and keep what it reports."""
    worker = pipe = None
    for job in jobs:
        if worker is None:
            pipe, theirs = context.Pipe()
            worker = context.Process(target=work, args=(theirs, example, strain))
            worker.start()
            theirs.close()
        try:
            pipe.send(job)
            reports.append((job[1], *pipe.recv()))
        except (EOFError, OSError):
            worker.join()
            with contextlib.suppress(ProcessLookupError):
                os.killpg(worker.pid, signal.SIGKILL)  # a solver that outlived it
            reports.append((job[1], [], [f"the worker ended: {worker.exitcode}"], 0.0, 0.0))
            worker = None
        for failure in reports[-1][2]:
            print(*job[:2], failure, file=sys.stderr)
    if worker is not None:
        pipe.close()
        worker.join()


def spoil(kind: str, numbers, *, strain: bool, deep: int, workers: int, example: str) -> dict:
    """All the files of one kind, and what they came to."""
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["planner.commands", "planner.schedule.result", "planner.link"])
    jobs, reports = [(kind, number, bool(deep) and k % deep == 0) for k, number in enumerate(numbers)], []
    threads = [
        threading.Thread(target=tended, args=(context, example, strain, jobs[k::workers], reports))
        for k in range(workers)
    ]
    for step in (threading.Thread.start, threading.Thread.join):
        for thread in threads:
            step(thread)
    refused = sum(any(status == 2 for _, status in statuses) for _, statuses, *_ in reports)
    failures = [{"kind": kind, "number": number, "what": what} for number, _, found, *_ in reports for what in found]
    failed = len({failure["number"] for failure in failures})
    exits = collections.Counter(f"{command} {status}" for _, statuses, *_ in reports for command, status in statuses)
    slowest, widest = max(reports, key=lambda r: r[3]), max(reports, key=lambda r: r[4])
    return {
        "files": len(reports),
        "refused": refused,
        "failed": failed,
        "exits": dict(sorted(exits.items())),
        "slowest_s": round(slowest[3], 2),
        "slowest_number": slowest[0],
        "peak_mb": round(widest[4]),
        "peak_number": widest[0],
        "failures": failures,
    }


def arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--files", type=int, default=1000, help="of each kind")
    parser.add_argument("--kind", choices=KINDS, action="append", help="repeatable; all by default")
    parser.add_argument("--number", type=int, help="this one file alone")
    parser.add_argument("--strain", action="store_true", help="only numbers change, to what validation may accept")
    parser.add_argument(
        "--deep", type=int, nargs="?", const=1, default=0, metavar="N", help="every N-th, as far as cards"
    )
    parser.add_argument("--workers", type=int, default=os.cpu_count())
    return parser.parse_args()


if __name__ == "__main__":
    asked = arguments()
    first = asked.seed * 1_000_000
    which = [asked.number] if asked.number is not None else range(first, first + asked.files)
    with tempfile.TemporaryDirectory() as scratch:
        home = str(prepared(Path(scratch) / "example"))
        found = {kind: spoil(kind, which, strain=asked.strain, deep=asked.deep, workers=asked.workers, example=home)
                 for kind in asked.kind or KINDS}  # fmt: skip
    print(json.dumps(found, indent=2, ensure_ascii=False))
    sys.exit(any(each["failed"] for each in found.values()))

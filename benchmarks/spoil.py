"""Spoiled files of every kind through the real commands, in workers that are watched for time and memory.

    python benchmarks/spoil.py --seed 1 --files 10000
    python benchmarks/spoil.py --seed 1 --files 500 --kind mission --strain --deep 5

Every file goes through `check`; what is accepted goes through `passes` and `link`, and with --deep every N-th of it
through `week`, `audit`, `pointing` and `cards`. Prints JSON. A failure names the kind and the number that repeat it:
--kind KIND --number NUMBER. Nothing but exit 0, 1 or 2, a silent standard error on 0 and finite figures is no failure.
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

KINDS = {
    "mission": ("missions/marshlight.toml",),
    "station": ("stations/vardholm.toml",),
    "tle": ("tle_samples/marshlight.tle",),
    "omm": tuple(
        f"tle_samples/{name}"
        for name in ("two_satellites.omm", "marshlight.omm.xml", "marshlight.omm.json", "marshlight.omm.csv")
    ),  # fmt: skip
    "oem": ("tle_samples/marshlight.oem",),
    "pattern": ("missions/pattern.csv",),
    "contacts": ("week/contacts.csv",),
}
MISSION = "missions/marshlight.toml"
LIMIT_S, DEEP_LIMIT_S, MOST_MB, ADDRESS_SPACE = 60, 300, 1000, 6 << 30
NOT_FINITE = re.compile(r"(?<![\w-])(nan|-?inf|-?infinity)(?![\w-])", re.IGNORECASE)
TOLD_TEXT, TOLD_FAILURES = 1500, 60


def prepared(folder: Path) -> Path:
    """The demo over one station for part of a day, with a measured pattern and a planned week."""
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, folder / name)
    text = (folder / MISSION).read_text()
    begin, _, rest = text.partition("stations = [")
    text = f'{begin}stations = ["../stations/vardholm.toml"]{rest.partition("]")[2]}'.replace(
        "days = 7.0", "days = 0.4"
    )
    text = text.replace('"patch"\ngain_dbi = 6.0', '"measured pattern"\nfile = "pattern.csv"')
    (folder / MISSION).write_text(text)
    rows = "".join(f"{angle},{6 - angle / 5:.1f}\n" for angle in range(0, 181, 20))
    (folder / "missions" / "pattern.csv").write_text("off_axis_deg,gain_dbi\n" + rows)
    with contextlib.chdir(folder), contextlib.redirect_stdout(io.StringIO()):
        assert main(["week", "--quiet"]) == 0
    return folder


class Trial:
    """One spoiled file in a folder of its own, and what the commands made of it."""

    def __init__(self, folder: Path, screens: tuple, kind: str, number: int, strain: bool):
        names = KINDS[kind]
        self.name, self.screens, self.began = names[number % len(names)], screens, time.perf_counter()
        self.whole = (folder / self.name).read_bytes()
        self.content = (strained if strain else spoiled)(self.whole, number)
        if kind == "tle" and number % 3:
            self.content = with_true_checksums(self.content)
        (folder / self.name).write_bytes(self.content)
        if kind in ("tle", "omm", "oem"):
            text = Path(MISSION).read_text()
            Path(MISSION).write_text(re.sub(r"(?m)^elements = .*$", f'elements = "../{self.name}"', text))
        self.statuses: list[tuple[str, int]] = []
        self.failures: list[str] = []

    def run(self, *words: str) -> int:
        """One command; its exit status, with whatever breaks the promise noted."""
        try:
            status = main(list(words))
        except (Exception, SystemExit):
            status = -1
            traceback.print_exc()
        sys.stdout.flush(), sys.stderr.flush()
        said, told = (self._drain(screen) for screen in self.screens)
        self.statuses.append((words[0], status))
        if status not in (0, 1, 2):
            self._fail(words, f"exit {status}: {told[-TOLD_TEXT:]}")
        elif (status == 2 and not told.strip()) or "Warning" in told or (status == 0 and told.strip()):
            self._fail(words, f"exit {status}, standard error: {told[-TOLD_TEXT:]!r}")
        elif status < 2:
            self._look(words, said)
        return status

    def _drain(self, screen) -> str:
        text = os.pread(screen.fileno(), os.fstat(screen.fileno()).st_size, 0).decode(errors="replace")
        os.ftruncate(screen.fileno(), 0)
        return text

    def _look(self, words, text: str) -> None:
        found = NOT_FINITE.search(text)
        if found and not NOT_FINITE.search(self.content.decode(errors="replace")):
            self._fail(words, f"not finite: {text[max(0, found.start() - 200) : found.end() + 50]!r}")

    def _fail(self, words, what: str) -> None:
        self.failures.append(f"{' '.join(words)}: {what}")

    def down_the_river(self, kind: str, deep: bool) -> None:
        """Every command in turn, as long as the one before was content."""
        if kind == "contacts":
            safe = self.run("audit", MISSION, self.name)
            if safe == 2:
                return
            self.run("pointing", MISSION, "--contacts", self.name, "--out", "pointing", "--force")
            self.run("week", MISSION, "--from", self.name, "--out", "new", "--quiet") if deep else None
            self.run("cards", MISSION, "--contacts", self.name, "--out", "cards") if deep and safe == 0 else None
        elif self.run("check", MISSION) == 0:
            self._sky_and_link()
            self._week() if deep else None

    def _sky_and_link(self) -> None:
        from planner.mission.files import load_mission

        passes = self.run("passes", MISSION, "--csv", "passes.csv")
        mission = load_mission(MISSION)
        satellite, station = mission.satellites[0], mission.stations[0].name
        for mode in satellite.spacecraft.transmitter:
            where = (f"--station={station}", f"--mode={mode.mode}", f"--satellite={satellite.name}")
            self.run("link", MISSION, *where, "--elevation", "30")
        if passes == 0:
            text = Path("passes.csv").read_text()
            self._look(("passes.csv",), text)
            first = next(csv.DictReader(text.splitlines()), None)
            self.run("link", MISSION, *where, f"--pass={first['pass_id']}") if first else None

    def _week(self) -> None:
        if self.run("week", MISSION, "--out", "new", "--quiet", "--time-limit", "30"):
            return
        for path in sorted(Path("new").iterdir()):
            self._look((path.name,), path.read_text()) if path.suffix != ".png" else None
        self.run("audit", MISSION, "new/contacts.csv")
        self.run("pointing", MISSION, "--contacts", "new/contacts.csv", "--out", "pointing", "--force")
        self.run("cards", MISSION, "--contacts", "new/contacts.csv", "--out", "cards") if len(
            self.content
        ) % 4 == 0 else None


def work(pipe, example: str, strain: bool) -> None:
    """The worker: a job in, a report out, until the pipe closes. The alarm ends a worker that hangs, wherever it is."""
    os.setsid()
    resource.setrlimit(resource.RLIMIT_AS, (ADDRESS_SPACE, ADDRESS_SPACE))
    with tempfile.TemporaryDirectory() as parent:
        home = Path(parent) / "home"
        screens = tuple(open(Path(parent) / name, "ab+", buffering=0) for name in ("out", "err"))  # noqa: SIM115
        for number, screen in enumerate(screens, 1):
            os.dup2(screen.fileno(), number)
        with contextlib.suppress(EOFError):
            while True:
                kind, number, deep = pipe.recv()
                shutil.rmtree(home, ignore_errors=True)
                shutil.copytree(example, home)
                os.chdir(home)
                Path("/proc/self/clear_refs").write_text("5")  # peak memory counts anew
                signal.setitimer(signal.ITIMER_REAL, DEEP_LIMIT_S if deep else LIMIT_S)
                with warnings.catch_warnings():
                    for category in (RuntimeWarning, UserWarning, FutureWarning):
                        warnings.simplefilter("always", category)
                    trial = Trial(home, screens, kind, number, strain)
                    trial.down_the_river(kind, deep)
                signal.setitimer(signal.ITIMER_REAL, 0)
                pipe.send((trial.statuses, trial.failures, time.perf_counter() - trial.began, _peak_mb()))


def _peak_mb() -> float:
    own_kb = int(re.search(r"VmHWM:\s*(\d+)", Path("/proc/self/status").read_text())[1])
    return max(own_kb, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss) / 1024


class Tally:
    """What all files came to; workers' keepers add to it by turns."""

    def __init__(self):
        self.lock, self.files, self.clean, self.refused = threading.Lock(), 0, 0, 0
        self.exits, self.slowest, self.peak, self.failures = collections.Counter(), (0.0, 0), (0.0, 0), []

    def add(self, kind: str, number: int, report) -> None:
        statuses, failures, seconds, peak_mb = report
        if peak_mb > MOST_MB:
            failures = [*failures, f"{peak_mb:.0f} MB of memory"]
        with self.lock:
            self.files += 1
            refused = any(status == 2 for _, status in statuses)
            self.refused, self.clean = self.refused + refused, self.clean + (not refused and not failures)
            self.exits.update(f"{command} {status}" for command, status in statuses)
            self.slowest, self.peak = max(self.slowest, (seconds, number)), max(self.peak, (peak_mb, number))
            self.failures += [{"kind": kind, "number": number, "what": what} for what in failures]


def keep_a_worker(context, example: str, strain: bool, jobs, tally: Tally) -> None:
    """Hand jobs to a worker, a new one whenever it ends."""
    worker = pipe = None
    for kind, number, deep in jobs:
        if worker is None:
            pipe, theirs = context.Pipe()
            worker = context.Process(target=work, args=(theirs, example, strain))
            worker.start()
            theirs.close()
        try:
            pipe.send((kind, number, deep))
            report = pipe.recv()
        except (EOFError, OSError):
            worker.join()
            with contextlib.suppress(ProcessLookupError):
                os.killpg(worker.pid, signal.SIGKILL)  # a solver that outlived it
            report, worker = ([], [f"the worker ended: {worker.exitcode}"], 0.0, 0.0), None
        tally.add(kind, number, report)
    if worker is not None:
        pipe.close()
        worker.join()


def spoil(kind: str, numbers, *, strain: bool, deep: int, workers: int, example: str) -> dict:
    """All the files of one kind."""
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(
        ["planner.commands", "planner.schedule.result", "planner.schedule.audit", "planner.link"]
    )
    tally = Tally()
    jobs = [(kind, number, bool(deep) and k % deep == 0) for k, number in enumerate(numbers)]
    keepers = [threading.Thread(target=keep_a_worker, args=(context, example, strain, jobs[k::workers], tally))
               for k in range(workers)]  # fmt: skip
    for step in (threading.Thread.start, threading.Thread.join):
        for keeper in keepers:
            step(keeper)
    return {
        "files": tally.files, "clean": tally.clean, "refused": tally.refused, "exits": dict(sorted(tally.exits.items())),
        "slowest_s": round(tally.slowest[0], 2), "slowest_number": tally.slowest[1], "peak_mb": round(tally.peak[0]),
        "peak_number": tally.peak[1], "failed": len(tally.failures), "failures": tally.failures[:TOLD_FAILURES],
    }  # fmt: skip


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

"""What tests of several rooms start from: the demo mission, a folder of its files to spoil, a small planned week."""

import csv
import json
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

import pytest
from hypothesis import settings

import planner

settings.register_profile("a busy machine", deadline=None)
settings.load_profile("a busy machine")
ROOT = Path(__file__).parents[1]


@pytest.fixture(scope="session")
def marshlight():
    """The demo mission."""
    return planner.load_mission(ROOT / "missions" / "marshlight.toml")


@pytest.fixture(scope="session")
def two_day_mission(marshlight):
    """Two days of it over a high-rate and a low-rate station: planned in a few seconds."""
    stations = tuple(station for station in marshlight.stations if station.name in ("Vardholm", "Cape Tern"))
    return marshlight.model_copy(update={"days": 2.0, "stations": stations})


@pytest.fixture(scope="session")
def two_day_plan(two_day_mission):
    return planner.plan_week(two_day_mission)


@pytest.fixture(scope="session")
def copy_of_demo():
    """Copies missions/, stations/ and tle_samples/ into a folder, and returns it."""

    def copy(folder: Path) -> Path:
        for name in ("missions", "stations", "tle_samples"):
            shutil.copytree(ROOT / name, folder / name)
        return folder

    return copy


@pytest.fixture
def mission_folder(copy_of_demo, tmp_path):
    """A copy of the demo's files; returns the folder that holds missions/, stations/ and tle_samples/."""
    return copy_of_demo(tmp_path)


@pytest.fixture(scope="session")
def quick_folder(copy_of_demo, tmp_path_factory):
    """The demo's files, the mission cut down to two passes over one station: a week in some seconds."""
    folder = copy_of_demo(tmp_path_factory.mktemp("quick"))
    path = folder / "missions" / "marshlight.toml"
    begin, _, rest = path.read_text().partition("stations = [")
    text = f'{begin}stations = ["../stations/vardholm.toml"]{rest.partition("]")[2]}'
    for old, new in {
        "days = 7.0": "days = 0.4",
        'daily_contact_modes = ["S low rate"]': "",
        "upload_lead_h = 6.0": "",
    }.items():
        assert old in text
        text = text.replace(old, new)
    path.write_text(text)
    return folder


@dataclass(frozen=True)
class WrittenWeek:
    """What `week` printed, and the folder it wrote."""

    folder: Path
    printed: list[str]

    @property
    def summary(self) -> dict:
        return json.loads((self.folder / "summary.json").read_text())

    def rows(self, name: str) -> list[dict[str, str]]:
        """The rows of one of its tables."""
        with (self.folder / name).open(newline="") as file:
            return list(csv.DictReader(file))


@pytest.fixture(scope="session")
def demo_week(copy_of_demo, tmp_path_factory) -> WrittenWeek:
    """The whole demo week, planned once for all tests, as a shell does it."""
    folder = copy_of_demo(tmp_path_factory.mktemp("demo"))
    words = [sys.executable, "-m", "planner", "week"]
    done = subprocess.run(words, cwd=folder, capture_output=True, text=True, check=True)
    return WrittenWeek(folder / "week", done.stdout.splitlines())

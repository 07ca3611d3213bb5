"""What tests of several rooms start from: the demo mission, a folder of its files to spoil, a small planned week."""

import shutil
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


@pytest.fixture
def mission_folder(tmp_path):
    """A copy of the demo's files; returns the folder that holds missions/, stations/ and tle_samples/."""
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, tmp_path / name)
    return tmp_path

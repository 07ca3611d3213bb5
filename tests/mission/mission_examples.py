"""Faulty mission folders: one change to the demo's files, and what is said of it."""

from pathlib import Path

import pytest

from planner.errors import InputError
from planner.mission.files import load_mission

MISSION = "missions/marshlight.toml"
VARDHOLM = "stations/vardholm.toml"
ELEMENTS = "tle_samples/marshlight.tle"


def changed(folder: Path, old: str, new: str, file: str = MISSION) -> None:
    """Replace text that stands once or more in a file by another, at its first place."""
    path = folder / file
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


def faults(folder: Path, mission: str = MISSION) -> list[str]:
    """What is said of a mission of the folder, file names without the folder."""
    with pytest.raises(InputError) as caught:
        load_mission(folder / mission)
    return [fault.replace(f"{folder}/", "") for fault in caught.value.faults]

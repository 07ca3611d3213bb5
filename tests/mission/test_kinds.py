"""A file of one kind given where another kind is wanted: told in one line what it is."""

import pytest
from mission_examples import MISSION, VARDHOLM, changed, faults

OTHER = "missions/other.toml"
STATION, CRAFT = '"../stations/vardholm.toml"', "[policy]"


def as_station(folder, text: str) -> list[str]:
    """What is said of a mission that names a file of that text among its stations."""
    (folder / OTHER).write_text(text)
    changed(folder, STATION, '"other.toml"')
    return faults(folder)


def test_a_mission_file_is_no_station_file(mission_folder):
    whole = (mission_folder / MISSION).read_text()
    assert as_station(mission_folder, whole) == [f"{OTHER}: must be a station file, got a mission file"]


def test_a_mission_that_names_itself_as_a_station(mission_folder):
    changed(mission_folder, STATION, '"marshlight.toml"')
    assert faults(mission_folder) == [f"{MISSION}: must be a station file, got a mission file"]


@pytest.mark.parametrize("key", ["elements = 'x.tle'", "stations = ['x.toml']"])
def test_files_that_only_a_mission_names_tell_a_mission(mission_folder, key):
    found = as_station(mission_folder, f"{key}\n[recorder]\ncapacity_mbit = 1.0\n")
    assert found == [f"{OTHER}: must be a station file, got a mission file"]


def test_a_mission_file_is_no_spacecraft_file(mission_folder):
    (mission_folder / OTHER).write_bytes((mission_folder / MISSION).read_bytes())
    changed(mission_folder, CRAFT, '[[satellite]]\nname = "MARSHLIGHT-1"\nspacecraft = "other.toml"\n\n[policy]')
    assert faults(mission_folder) == [f"{OTHER}: must be a spacecraft file, got a mission file"]


def test_a_spacecraft_file_is_neither(mission_folder):
    text = (mission_folder / MISSION).read_text()
    (mission_folder / OTHER).write_text(text[text.index("[[transmitter]]") :])
    assert faults(mission_folder, OTHER) == [f"{OTHER}: must be a mission file, got a spacecraft file"]


def test_one_key_out_of_place_makes_no_other_kind(mission_folder):
    path = mission_folder / VARDHOLM
    path.write_text(f"days = 7.0\n{path.read_text()}")
    assert faults(mission_folder) == [f"missions/../{VARDHOLM}: days: unknown key"]

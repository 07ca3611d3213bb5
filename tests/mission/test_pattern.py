"""Measured antenna patterns: what is read, and what each fault says."""

import pytest
from mission_examples import MISSION, changed, faults

from planner.errors import InputError
from planner.mission.files import load_mission
from planner.mission.pattern import read_pattern

HEADER = "off_axis_deg,gain_dbi\n"


def written(tmp_path, rows: str):
    path = tmp_path / "pattern.csv"
    path.write_text(HEADER + rows)
    return path


def test_the_rows_of_a_pattern(tmp_path):
    assert read_pattern(written(tmp_path, "0,6.5\n30.5, 2\n180,-20\n")) == ((0.0, 6.5), (30.5, 2.0), (180.0, -20.0))


@pytest.mark.parametrize(
    ("rows", "messages"),
    [
        (
            '"0,0","6,1"\n',
            [
                "line 2: off_axis_deg and gain_dbi must be numbers, got '0,0' and '6,1'; write decimals with a point",
            ],
        ),
        ("0,6\n10,six\n", ["line 3: off_axis_deg and gain_dbi must be numbers, got '10' and 'six'"]),
        ("0,6\n20,3\n10,4\n", ["line 4: off_axis_deg must rise, got 10 after 20"]),
        ("0,6\n181,3\n", ["line 3: must be 0..180 deg and -200..100 dBi, got 181 and 3"]),
        ("0,nan\n10,inf\n", ["line 2: off_axis_deg and gain_dbi must be numbers, got '0' and 'nan'",
                             "line 3: off_axis_deg and gain_dbi must be numbers, got '10' and 'inf'"]),
        ("0,6\n1_0,3\n", ["line 3: off_axis_deg and gain_dbi must be numbers, got '1_0' and '3'"]),
        ("0,6\n１０,3\n", ["line 3: off_axis_deg and gain_dbi must be numbers, got '１０' and '3'"]),
        ("5,6\n10,3\n", ["must have two rows or more and begin at off_axis_deg 0, got 2 rows"]),
        ("0,6\n", ["must have two rows or more and begin at off_axis_deg 0, got 1 rows"]),
        ("", ["must have two rows or more and begin at off_axis_deg 0, got 0 rows"]),
        ("0,6\n10,3,5\n", ["line 3: must have 2 cells, got 3; are there decimal commas?"]),
    ],
)  # fmt: skip
def test_a_faulty_pattern(tmp_path, rows, messages):
    path = written(tmp_path, rows)
    with pytest.raises(InputError) as caught:
        read_pattern(path)
    assert list(caught.value.faults) == [f"{path}: {message}" for message in messages]


def test_a_mission_reads_the_pattern_that_it_names(mission_folder):
    changed(mission_folder, 'kind = "patch"\ngain_dbi = 6.0', 'kind = "measured pattern"\nfile = "pattern.csv"')
    written(mission_folder / "missions", "0,6\n180,-20\n")
    mission = load_mission(mission_folder / MISSION)
    assert mission.satellites[0].spacecraft.mode("S low rate").antenna.samples == ((0.0, 6.0), (180.0, -20.0))
    assert "pattern.csv" in dict(mission.inputs)


def test_a_pattern_that_is_missing_is_told_beside_other_faults(mission_folder):
    changed(mission_folder, 'kind = "patch"\ngain_dbi = 6.0', 'kind = "measured pattern"\nfile = "pattern.csv"')
    changed(mission_folder, "days = 7.0", "days = 0.0")
    assert faults(mission_folder) == [
        f"{MISSION}: days: must be above 0, got 0.0",
        "missions/pattern.csv: no such file",
    ]

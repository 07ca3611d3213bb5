"""What the Tab key offers, asked as bash asks (the protocol of argcomplete: a line and a place in it, answers on 8)."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
ASK = "import os, sys; sys.argv[0] = 'downlink-planner'; from planner.cli import main; main()"


def offered(folder, line: str) -> set[str]:
    reading, writing = os.pipe()
    asked = {
        "_ARGCOMPLETE": "1", "_ARGCOMPLETE_SHELL": "bash", "_ARGCOMPLETE_IFS": "\n", "COMP_TYPE": "9",
        "COMP_LINE": line, "COMP_POINT": str(len(line)), "PYTHONPATH": str(ROOT),
        "_ARGCOMPLETE_STDOUT_FILENAME": f"/proc/{os.getpid()}/fd/{writing}",
    }  # fmt: skip
    done = subprocess.run([sys.executable, "-c", ASK], cwd=folder, env=os.environ | asked, capture_output=True)
    os.close(writing)
    with os.fdopen(reading) as answers:
        said = answers.read()
    assert (done.returncode, done.stderr) == (0, b"")
    return {answer.strip() for answer in said.split("\n")}


@pytest.mark.parametrize(
    ("line", "answers"),
    [
        ("downlink-planner ", {"check", "passes", "link", "week", "audit", "afford", "compare", "pointing", "cards"}),
        ("downlink-planner aff", {"afford"}),
        ("downlink-planner week --free", {"--freeze-until"}),
        ("downlink-planner link --station ", {"Vardholm"}),
        ("downlink-planner link --mode ", {r"K\ high\ rate", r"S\ low\ rate"}),
        ("downlink-planner check mis", {"missions/"}),
        ("downlink-planner check missions/", {"missions/marshlight.toml"}),
        ("downlink-planner afford --pass marshlight-1.vardholm.20261207-04", {"marshlight-1.vardholm.20261207-04"}),
    ],
)
def test_what_tab_offers(quick_folder, line, answers):
    assert answers <= offered(quick_folder, line)


def test_a_mission_that_cannot_be_read_offers_no_names_and_says_nothing(quick_folder):
    assert offered(quick_folder, "downlink-planner link missions/gone.toml --station ") == {""}

"""The demo mission and its sky, observed once."""

from dataclasses import replace
from datetime import timedelta
from pathlib import Path

import numpy as np
import pytest

from planner.mission.contacts import Session
from planner.mission.files import load_mission
from planner.sky import observe

MISSION = Path(__file__).parents[2] / "missions" / "marshlight.toml"


@pytest.fixture(scope="session")
def mission():
    return load_mission(MISSION)


@pytest.fixture(scope="session")
def sky(mission):
    return observe(mission)


@pytest.fixture(scope="session")
def session(mission, sky):
    """Some K-band transmission on a high pass of the first quarter day."""
    early = np.flatnonzero(sky.passes.aos_s < timedelta(hours=12).total_seconds())
    row = early[np.argmax(sky.passes.max_elevation_deg[early])]
    made = Session(
        tx_on_s=float(np.ceil(sky.passes.aos_s[row] + 60)),
        tx_off_s=float(np.floor(sky.passes.los_s[row] - 60)),
        satellite=str(sky.passes.satellite[row]),
        station=str(sky.passes.station[row]),
        mode="K high rate",
        pass_id=str(sky.passes.pass_id[row]),
    )
    assert replace(made).duration_s > 60
    return made

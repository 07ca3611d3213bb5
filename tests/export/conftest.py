"""The demo mission and its sky, observed once."""

from dataclasses import replace
from datetime import timedelta
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest
from made_up_contacts import contacts

from planner.export.contacts import BATTERY, RECORDER
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


@pytest.fixture
def plan(sky):
    """What looks like a WeekPlan: forty contacts, the real passes, two rows of battery and recorder."""
    passes = sky.passes.frame(sky.clock).assign(verdict="left out", reason="")
    moments = ["2026-12-07T00:00:00.000Z", "2026-12-13T23:00:00.000Z"]
    battery = pd.DataFrame({name: [90.0, 88.0] for name in BATTERY})
    recorder = pd.DataFrame({name: [0.0, 1000.0] for name in RECORDER})
    for table in (battery, recorder):
        table["satellite"], table["time_utc"] = "MARSHLIGHT-1", moments
    return SimpleNamespace(
        contacts=contacts(*range(1, 41)),
        passes=passes,
        battery=battery.assign(sunlit="yes"),
        recorder=recorder,
        summary={"volume_mbit": 560_000.0, "soc_min_pct": 88.0, "soc_floor_pct": 60.0},
    )

"""A plausible week for pictures: real passes, sessions on every fourth of them, charge and data in simple curves."""

from functools import cache
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pandas as pd

from planner.mission.files import load_mission
from planner.sky import observe
from planner.sky.clock import Clock
from planner.sky.sun import eclipse_edges_s

MISSION = Path(__file__).parents[2] / "missions" / "marshlight.toml"
STEP_S = 120.0


@cache
def mission_and_sky():
    mission = load_mission(MISSION)
    return mission, observe(mission)


@cache
def mission_and_plan():
    """(mission, what looks like a WeekPlan)."""
    mission, sky = mission_and_sky()
    passes = sky.passes.frame(sky.clock)
    index = np.arange(len(passes))
    passes["verdict"] = np.where(index % 4 == 0, "planned", np.where(index % 7 == 1, "unusable", "left out"))
    passes.loc[5, "verdict"] = "dropped"
    passes["reason"] = "made up"
    contacts = _contacts(mission, sky, np.flatnonzero(passes["verdict"] == "planned"))
    battery = _battery(mission, sky, contacts)
    recorder = _recorder(mission, sky.clock, contacts)
    summary = {
        "passes": len(passes),
        "contacts": len(contacts),
        "volume_mbit": float(contacts["volume_mbit"].sum()),
        "soc_min_pct": float(battery["soc_worst_pct"].min()),
        "soc_floor_pct": mission.policy.soc_floor_pct,
    }
    return mission, SimpleNamespace(
        contacts=contacts, passes=passes, battery=battery, recorder=recorder, summary=summary
    )


def empty(plan):
    """The plan of a week without any pass."""
    return SimpleNamespace(
        contacts=plan.contacts[:0],
        passes=plan.passes[:0],
        battery=plan.battery[:0],
        recorder=plan.recorder[:0],
        summary=plan.summary | {"volume_mbit": 0.0},
    )


def _contacts(mission, sky, rows) -> pd.DataFrame:
    modes = [transmitter.mode for transmitter in mission.satellites[0].spacecraft.transmitter]
    taken = sky.passes.take(rows)
    mode = [modes[int(k % 3 == 2)] for k in range(len(rows))]
    length_s = taken.los_s - taken.aos_s
    return pd.DataFrame(
        {
            "contact_id": taken.pass_id,
            "pass_id": taken.pass_id,
            "satellite": taken.satellite,
            "station": taken.station,
            "mode": mode,
            "aos_utc": sky.clock.iso(taken.aos_s),
            "tx_on_utc": sky.clock.iso(taken.aos_s + 0.2 * length_s),
            "tx_off_utc": sky.clock.iso(taken.los_s - 0.1 * length_s),
            "los_utc": sky.clock.iso(taken.los_s),
            "volume_mbit": [9.0 * s if name == modes[0] else 0.1 * s for s, name in zip(length_s, mode, strict=True)],
        }
    )


def _battery(mission, sky, contacts) -> pd.DataFrame:
    time_s = np.arange(0.0, mission.span_s, STEP_S)
    edges_s = eclipse_edges_s(sky.tracks[0], sky.clock)
    dark = np.searchsorted(edges_s, time_s) % 4 >= 2
    used = _in_session(sky.clock, contacts, time_s)
    soc, low = np.empty(len(time_s)), 92.0
    for k in range(len(time_s)):
        low = min(low + STEP_S / 3600 * (-7.0 * dark[k] + 6.0 * ~dark[k] - 30.0 * used[k]), 100.0)
        soc[k] = low = max(low, 61.2)
    return pd.DataFrame(
        {
            "satellite": mission.satellites[0].name,
            "time_utc": sky.clock.iso(time_s),
            "soc_pct": np.minimum(soc + 4.0, 100.0),
            "soc_worst_pct": soc,
            "sunlit": np.where(dark, "no", "yes"),
        }
    )


def _recorder(mission, clock: Clock, contacts) -> pd.DataFrame:
    time_s = np.arange(0.0, mission.span_s, STEP_S)
    stored, level, room = np.empty(len(time_s)), 120_000.0, mission.satellites[0].spacecraft.recorder.usable_mbit
    for k, used in enumerate(_in_session(clock, contacts, time_s)):
        level = min(max(level + STEP_S * (1.0 - 20.0 * used), 0.0), room)
        stored[k] = level
    return pd.DataFrame(
        {
            "satellite": mission.satellites[0].name,
            "time_utc": clock.iso(time_s),
            "stored_mbit": stored,
            "lost_mbit": 0.0,
        }
    )


def _in_session(clock: Clock, contacts, time_s):
    on, off = (
        (pd.to_datetime(contacts[f"tx_{edge}_utc"]) - pd.Timestamp(clock.start)).dt.total_seconds().to_numpy()
        for edge in ("on", "off")
    )
    return np.any((time_s[:, None] >= on) & (time_s[:, None] < off), axis=1)

"""Small batteries, spacecraft and weeks for the tests of this room."""

from datetime import UTC, datetime
from types import SimpleNamespace

import numpy as np
from hypothesis import strategies as st

from planner.mission.elements import ElementSet
from planner.mission.models import Mission, Policy, Recorder, Satellite, Spacecraft, StartState
from planner.mission.pointing import Pointing
from planner.mission.power import Battery, Panel
from planner.mission.station import GroundAntenna, Receiver, Station
from planner.mission.transmitter import Isotropic, Transmitter
from planner.power.balance import SatellitePower
from planner.power.battery import describe_cell
from planner.power.corners import corner_of
from planner.power.intervals import Intervals
from planner.power.loads import Draw
from planner.power.series import run_battery
from planner.sky.clock import Clock
from planner.sky.track import track_satellite

START = datetime(2026, 12, 7, tzinfo=UTC)
LEAKLESS = {"self_discharge_pct_month": 0.0, "coulombic_efficiency": 1.0}
FLAT_CURVE = ((0.0, 3.3), (100.0, 3.3 + 1e-9))  # as good as level, and still rising
LEVEL_RESISTANCE = {
    "resistance_by_charge": ((0.0, 1.0), (100.0, 1.0)),
    "resistance_by_temperature": ((-50.0, 1.0), (80.0, 1.0)),
}
SMALLEST_R_MOHM = 1e-9  # a resistance must be above 0: this one loses nothing that counts


def battery(**changes) -> Battery:
    """One LiFePO4 cell of 2.5 Ah unless told otherwise, charged to the top of its curve."""
    curve = changes.get("open_circuit") or ((0.0, 2.8), (100.0, 3.6))
    plain = {
        "cells_series": 1,
        "cells_parallel": 1,
        "cell_capacity_ah": 2.5,
        "cell_resistance_mohm": 14.0,
        "cell_max_discharge_a": 10.0,
        "cell_max_charge_a": 1.25,
        "cell_max_v": curve[-1][1],
        "cell_min_v": min(2.8, curve[0][1]),
    }
    return Battery.model_validate(plain | changes)


def cell(health: float = 1.0, **changes):
    return describe_cell(battery(**changes), health=health)


def transmitter(**changes) -> Transmitter:
    plain = {
        "mode": "K",
        "frequency_mhz": 26_250.0,
        "rf_power_w": 1.0,
        "antenna": Isotropic(kind="isotropic"),
        "symbol_rate_mbaud": 10.0,
        "modcods": ("QPSK 1/2",),
        "dc_power_w": 15.0,
    }
    return Transmitter.model_validate(plain | changes)


def craft(cell_battery: Battery | None = None, **changes) -> Spacecraft:
    plain = {
        "transmitter": (transmitter(),),
        "battery": cell_battery or battery(),
        "panel": (Panel(name="top", normal=(0.0, 0.0, -1.0), cell_area_m2=0.05),),
        "recorder": Recorder(capacity_mbit=1000.0),
        "pointing": Pointing(),
    }
    return Spacecraft.model_validate(plain | changes)


def satellite(spacecraft: Spacecraft | None = None, soc_pct: float = 90.0, soc_error_pct: float = 4.0) -> Satellite:
    elements = ElementSet(
        name="TEST-1",
        catalog_number="90000",
        epoch=START,
        mean_motion_rev_day=15.1,
        eccentricity=0.001,
        inclination_deg=97.5,
        ra_of_asc_node_deg=230.0,
        arg_of_pericenter_deg=0.0,
        mean_anomaly_deg=0.0,
    )
    start = StartState(soc_pct=soc_pct, soc_error_pct=soc_error_pct)
    return Satellite(name="TEST-1", elements=elements, spacecraft=spacecraft or craft(), start_state=start)


def mission(spacecraft: Spacecraft | None = None, days: float = 1.0, **start) -> Mission:
    """A satellite 540 km up, one station on the equator, a day."""
    station = Station(
        name="Reed Point",
        latitude_deg=0.0,
        longitude_deg=10.0,
        antenna=GroundAntenna(diameter_m=3.0),
        receiver=(Receiver(bands=("K",), noise_temperature_k=200.0),),
    )
    return Mission(
        name="a test",
        start=START,
        days=days,
        satellites=(satellite(spacecraft, **start),),
        stations=(station,),
        policy=policy(),
    )


def power_of(flown: Mission) -> SatellitePower:
    """The power of the one satellite, without asking the sky for passes."""
    clock = Clock(flown.start, flown.span_s)
    sky = SimpleNamespace(clock=clock, tracks=(track_satellite(clock, flown.satellites[0]),))
    return SatellitePower(flown, sky, "TEST-1")


def week(array_w, load_w, duration_s=60.0, **changes) -> Intervals:
    """Intervals of one length with these powers (n,), at 25 degC in full sunlight; changes replace columns."""
    array_w, load_w = np.broadcast_arrays(np.atleast_1d(array_w).astype(float), np.atleast_1d(load_w).astype(float))
    n = len(array_w)
    durations_s = np.broadcast_to(duration_s, n)
    plain = {
        "edges_s": np.concatenate([[0.0], np.cumsum(durations_s)]),
        "array_w": array_w.copy(),
        "draw": Draw(load_w.copy(), load_w.copy(), load_w.copy(), np.zeros(n)),
        "session_w": np.zeros(n),
        "battery_c": np.full(n, 25.0),
        "visible_sun": np.ones(n),
        "attitude": np.zeros(n, dtype=int),
        "attitudes": ("nadir", "slew", "station"),
    }
    return Intervals(**plain | changes)


def run(spacecraft: Spacecraft, intervals: Intervals, soc_pct: float = 90.0, corner: str = "nominal", sessions=()):
    """The battery of a spacecraft through intervals from a start charge."""
    return run_battery(corner_of(satellite(spacecraft, soc_pct), corner), spacecraft, intervals, tuple(sessions))


def session(tx_on_s: float, tx_off_s: float, mode: str = "K"):
    return SimpleNamespace(tx_on_s=tx_on_s, tx_off_s=tx_off_s, mode=mode, satellite="TEST-1")


def policy(**changes) -> Policy:
    return Policy.model_validate({"soc_floor_pct": 60.0, "soc_end_pct": 60.0} | changes)


@st.composite
def rising_curves(draw):
    """Open-circuit tables of any allowed shape: two to eight rows, 2 to 4.5 V."""
    inner = sorted(draw(st.sets(st.integers(1, 99), max_size=6)))
    steps_v = draw(st.lists(st.floats(0.001, 0.3), min_size=len(inner) + 1, max_size=len(inner) + 1))
    volts = 2.5 + np.concatenate([[0.0], np.cumsum(steps_v)])
    return tuple((float(soc), float(volt)) for soc, volt in zip([0, *inner, 100], volts, strict=True))

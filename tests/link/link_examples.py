"""An invented mode, station and mission to change one key of at a time."""

from datetime import UTC, datetime

from planner.mission.elements import ElementSet
from planner.mission.models import Mission, Policy, Recorder, Satellite, Spacecraft, StartState
from planner.mission.power import Battery, Panel
from planner.mission.station import GroundAntenna, Receiver, Station
from planner.mission.transmitter import Parabola, Transmitter


def make_transmitter(**changes) -> Transmitter:
    table = {
        "mode": "K",
        "frequency_mhz": 26_000.0,
        "rf_power_w": 1.0,
        "antenna": Parabola(kind="parabola", diameter_m=0.1, efficiency=0.6),
        "symbol_rate_mbaud": 20.0,
        "roll_off": 0.25,
        "modcods": ("QPSK 1/2",),
        "implementation_loss_db": 1.0,
        "dc_power_w": 12.0,
    }
    return Transmitter(**table | changes)


def make_station(**changes) -> Station:
    table = {
        "name": "Reed Bank",
        "latitude_deg": 52.0,
        "longitude_deg": 5.0,
        "altitude_m": 20.0,
        "min_elevation_deg": 5.0,
        "antenna": GroundAntenna(diameter_m=3.0, efficiency=0.6),
        "receiver": (Receiver(bands=("S", "X", "K"), noise_temperature_k=150.0, feed_loss_db=0.3),),
    }
    return Station(**table | changes)


def make_mission(transmitters, stations, **policy) -> Mission:
    craft = Spacecraft(
        transmitter=tuple(transmitters),
        battery=Battery(
            cells_series=2,
            cells_parallel=1,
            cell_capacity_ah=2.5,
            cell_resistance_mohm=15.0,
            cell_max_discharge_a=5.0,
            cell_max_charge_a=1.0,
        ),
        panel=(Panel(name="top", normal=(0.0, 0.0, -1.0), cell_area_m2=0.06),),
        recorder=Recorder(capacity_mbit=1e5),
    )
    elements = ElementSet(
        name="TESTBED",
        catalog_number="99001",
        epoch=datetime(2026, 12, 6, 12, tzinfo=UTC),
        mean_motion_rev_day=15.08,
        eccentricity=0.001,
        inclination_deg=97.6,
        ra_of_asc_node_deg=40.0,
        arg_of_pericenter_deg=0.0,
        mean_anomaly_deg=0.0,
    )
    return Mission(
        name="a day of tests",
        start=datetime(2026, 12, 7, tzinfo=UTC),
        days=1.0,
        satellites=(
            Satellite(name="TESTBED", elements=elements, spacecraft=craft, start_state=StartState(soc_pct=90.0)),
        ),
        stations=tuple(stations),
        policy=Policy(soc_floor_pct=60.0, soc_end_pct=80.0, **policy),
    )

"""Small missions out of the demo, and their weeks as files."""

from datetime import timedelta
from pathlib import Path

from planner.export.contacts import battery_csv, contacts_csv, passes_csv, recorder_csv
from planner.export.folder import write_set


def smaller(mission, days: float, *stations: str, modes=(), policy=None, start_state=None):
    """The mission for fewer days over some stations, in some modes (all, if none is named), with changes.

    Commands are aboard throughout and no daily contact is asked, unless the changes say so.
    """
    chosen = tuple(station for station in mission.stations if station.name in stations)
    free = {"upload_lead_h": None, "daily_contact_modes": (), "cost_mbit": 0.0}
    changed = mission.with_changes(policy=free | (policy or {}), start_state=start_state)
    return with_craft(
        changed.model_copy(update={"days": days, "stations": chosen}),
        lambda craft: {
            "transmitter": tuple(
                mode.model_copy(update={} if not modes else {"together_with": ()})
                for mode in craft.transmitter
                if not modes or mode.mode in modes
            )
        },
    )


def with_craft(mission, changes):
    """The mission with each spacecraft changed: `changes` gives the update for one."""
    satellites = tuple(
        satellite.model_copy(
            update={"spacecraft": satellite.spacecraft.model_copy(update=changes(satellite.spacecraft))}
        )
        for satellite in mission.satellites
    )
    return mission.model_copy(update={"satellites": satellites})


def with_station(mission, name: str, **changes):
    """The mission with one station changed."""
    stations = tuple(s.model_copy(update=changes) if s.name == name else s for s in mission.stations)
    return mission.model_copy(update={"stations": stations})


def a_twin(mission, behind_min: float = 40.0):
    """The mission with a second satellite on the same orbit, some minutes behind."""
    first = mission.satellites[0]
    behind_deg = behind_min / 1440 * first.elements.mean_motion_rev_day * 360
    elements = first.elements.model_copy(
        update={
            "name": "MARSHLIGHT-2",
            "catalog_number": "90002",
            "mean_anomaly_deg": (first.elements.mean_anomaly_deg - behind_deg) % 360,
            "epoch": first.elements.epoch + timedelta(seconds=1),
        }
    )
    second = first.model_copy(update={"name": "MARSHLIGHT-2", "elements": elements})
    return mission.model_copy(update={"satellites": (first, second)})


def write_tables(plan, folder: Path) -> Path:
    """The plan's tables and summary; no calendar and no picture."""
    files = {
        "contacts.csv": contacts_csv(plan.contacts),
        "passes.csv": passes_csv(plan.passes),
        "battery.csv": battery_csv(plan.battery),
        "recorder.csv": recorder_csv(plan.recorder),
    }
    write_set(folder, files, plan.summary)
    return folder

"""Corners: how good or bad a day is assumed to be."""

from dataclasses import dataclass
from typing import Literal, get_args

from planner.mission.models import Satellite
from planner.power.battery import Cell, describe_cell

CornerName = Literal["nominal", "pessimistic"]


@dataclass(frozen=True)
class Corner:
    """One assumption about everything that ages or drifts. Factors multiply the nominal description."""

    name: str
    cell: Cell
    start_soc_pct: float
    battery_colder_k: float
    panel_factor: tuple[float, ...]
    load_factor: float
    transmitter_factor: float


def corner_of(satellite: Satellite, name: CornerName) -> Corner:
    """The named corner of a satellite.

    Nominal is the description as it stands. Pessimistic takes the lower of the two healths, a grown resistance, a
    colder battery, panels at their end of life, loads and transmitters up, and a start charge low by its stated error.
    No start charge is above what the derated upper voltage lets the charger reach, whatever telemetry calls full.

    Raises ValueError for another name.
    """
    if name not in get_args(CornerName):
        raise ValueError(f"corner must be one of {', '.join(get_args(CornerName))}, got {name!r}")
    craft, start, worse = satellite.spacecraft, satellite.start_state, satellite.spacecraft.pessimistic
    if name == "nominal":
        cell = describe_cell(craft.battery, health=craft.battery.health)
        start_soc_pct = min(start.soc_pct, cell.full_soc_pct)
        return Corner(name, cell, start_soc_pct, 0.0, (1.0,) * len(craft.panel), 1.0, 1.0)
    cell = describe_cell(
        craft.battery, health=min(craft.battery.health, worse.health), resistance_factor=worse.resistance_factor
    )
    return Corner(
        name=name,
        cell=cell,
        start_soc_pct=min(max(0.0, start.soc_pct - start.soc_error_pct), cell.full_soc_pct),
        battery_colder_k=worse.battery_colder_k,
        panel_factor=tuple(
            worse.array_factor * (panel.end_of_life_factor if worse.array_end_of_life else 1.0) for panel in craft.panel
        ),
        load_factor=worse.load_factor,
        transmitter_factor=worse.transmitter_factor,
    )

"""What the operator changes by hand, and the mission that follows from it."""

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from planner.errors import InputError
from planner.mission.models import Mission, Satellite, Spacecraft
from planner.mission.text import faults_of


@dataclass(frozen=True)
class Changes:
    """Changed keys of the policy and of the start state, and what is switched off."""

    policy: dict[str, float] = field(default_factory=dict)
    start_state: dict[str, float] = field(default_factory=dict)
    stations_off: frozenset[str] = frozenset()
    modes_off: frozenset[str] = frozenset()

    def with_value(self, table: str, key: str, value: float) -> "Changes":
        """With one key of `policy` or `start_state` changed."""
        return replace(self, **{table: getattr(self, table) | {key: value}})

    def applied_to(self, mission: Mission) -> Mission:
        """The changed mission.

        Raises
        ------
        InputError : the rule that a changed value breaks
        """
        tables = {"policy": self.policy, "start_state": self.start_state}
        try:
            mission = mission.with_changes(**tables)
        except ValidationError as error:
            values = self.policy | self.start_state
            named = [fault.removeprefix(".: ") for fault in faults_of(Path(), error, values)]
            raise InputError(*named) from None
        return _without_modes(_without_stations(mission, self.stations_off), self.modes_off)


def _without_stations(mission: Mission, off: frozenset[str]) -> Mission:
    on = tuple(station for station in mission.stations if station.name not in off)
    if not on:
        raise InputError("at least one station must stay on, got none")
    return mission.model_copy(update={"stations": on})


def _without_modes(mission: Mission, off: frozenset[str]) -> Mission:
    if not off:
        return mission
    satellites = tuple(_with_modes_off(satellite, off) for satellite in mission.satellites)
    daily = tuple(mode for mode in mission.policy.daily_contact_modes if mode not in off)
    policy = mission.policy.model_copy(update={"daily_contact_modes": daily})
    return mission.model_copy(update={"satellites": satellites, "policy": policy})


def _with_modes_off(satellite: Satellite, off: frozenset[str]) -> Satellite:
    craft: Spacecraft = satellite.spacecraft
    on = tuple(transmitter for transmitter in craft.transmitter if transmitter.mode not in off)
    if not on:
        raise InputError(f"at least one mode of {satellite.name} must stay on, got none")
    on = tuple(
        transmitter.model_copy(update={"together_with": _less(transmitter.together_with, off)}) for transmitter in on
    )
    return satellite.model_copy(update={"spacecraft": craft.model_copy(update={"transmitter": on})})


def _less(names: tuple[str, ...], off: frozenset[str]) -> Any:
    return tuple(name for name in names if name not in off)

"""Names the user gives, looked up; an unknown one is told with the nearest known."""

import itertools
from collections.abc import Mapping
from contextlib import contextmanager
from typing import TypeVar

from planner.errors import InputError
from planner.mission.models import Mission, Satellite
from planner.mission.station import Station
from planner.mission.text import nearest
from planner.mission.transmitter import Transmitter

Thing = TypeVar("Thing")
MOST_SHOWN = 6


def look_up(kind: str, name: str, known: Mapping[str, Thing], where: str = "") -> Thing:
    """The thing of that name; InputError with the nearest known name, else with all of them."""
    if name in known:
        return known[name]
    shown = [*itertools.islice(known, MOST_SHOWN), *(["…"] if len(known) > MOST_SHOWN else [])]
    hint = nearest(name, known) or f"; known: {', '.join(shown)}"
    raise InputError(f"{kind} {name!r} is not known{where}{hint}")


@contextmanager
def told_at(place: str):
    """Put `place` before every fault told inside."""
    try:
        yield
    except InputError as error:
        raise InputError(*(f"{place}: {fault}" for fault in error.faults)) from None


def named_satellite(mission: Mission, name: str | None) -> Satellite:
    """The satellite of that name; without a name the mission's only one."""
    known = {satellite.name: satellite for satellite in mission.satellites}
    if name is None:
        if len(known) > 1:
            raise InputError(f"satellite must be named where the mission has several, known: {', '.join(known)}")
        return mission.satellites[0]
    return look_up("satellite", name, known)


def named_station(mission: Mission, name: str) -> Station:
    """The station of that name."""
    return look_up("station", name, {station.name: station for station in mission.stations})


def named_mode(satellite: Satellite, mode: str) -> Transmitter:
    """The satellite's transmitter setting of that name."""
    known = {transmitter.mode: transmitter for transmitter in satellite.spacecraft.transmitter}
    return look_up("mode", mode, known, f" on {satellite.name}")

"""Other missions made from one: shorter, with another station, with a larger battery or array."""

from planner.mission.models import Mission, Spacecraft


def shorter(mission: Mission, days: float) -> Mission:
    """The first days of the mission's span."""
    return mission.model_copy(update={"days": min(float(days), mission.days)})


def with_station(mission: Mission, name: str, *, like: str, latitude_deg: float, longitude_deg: float) -> Mission:
    """With one more station: equipped as the one named `like`, always open, level horizon, at another place.

    Raises
    ------
    KeyError : no station is called as `like`
    ValidationError : a place that is none
    """
    model = mission.station(like)
    place = {"name": name, "latitude_deg": latitude_deg, "longitude_deg": longitude_deg, "horizon": (), "hours": {}}
    station = type(model).model_validate(model.model_dump() | place)
    return mission.model_copy(update={"stations": (*mission.stations, station)})


def without_station(mission: Mission, name: str) -> Mission:
    """Without one of its stations."""
    return mission.model_copy(update={"stations": tuple(s for s in mission.stations if s.name != name)})


def larger_battery(mission: Mission, factor: float) -> Mission:
    """Every cell with `factor` times its capacity; currents and resistance as they were."""

    def larger(craft: Spacecraft) -> dict:
        capacity_ah = craft.battery.cell_capacity_ah * factor
        return {"battery": craft.battery.model_copy(update={"cell_capacity_ah": capacity_ah})}

    return _with_spacecraft(mission, larger)


def larger_array(mission: Mission, factor: float) -> Mission:
    """Every panel with `factor` times its cell area."""

    def larger(craft: Spacecraft) -> dict:
        areas = [panel.cell_area_m2 * factor for panel in craft.panel]
        pairs = zip(craft.panel, areas, strict=True)
        return {"panel": tuple(panel.model_copy(update={"cell_area_m2": area}) for panel, area in pairs)}

    return _with_spacecraft(mission, larger)


def _with_spacecraft(mission: Mission, change) -> Mission:
    satellites = tuple(
        satellite.model_copy(
            update={"spacecraft": satellite.spacecraft.model_copy(update=change(satellite.spacecraft))}
        )
        for satellite in mission.satellites
    )
    return mission.model_copy(update={"satellites": satellites})

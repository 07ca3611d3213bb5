"""What in a mission's files is allowed, and yet likely a slip or soon a surprise."""

from collections.abc import Iterator
from datetime import UTC

from planner.link.polarisation import polarisation_loss_db
from planner.mission.models import Mission, Satellite
from planner.mission.transmitter import Transmitter
from planner.power.battery import describe_cell

FAR_OFF_KM = 1.0  # a tenth of a degree, overhead in low orbit


def input_cautions(mission: Mission) -> list[str]:
    """One sentence for each; satellites that share a spacecraft are warned of once."""
    every = [caution for satellite in mission.satellites for caution in _cautions(mission, satellite)]
    return list(dict.fromkeys(every))


def _cautions(mission: Mission, satellite: Satellite) -> Iterator[str]:
    elements, until = satellite.elements, satellite.start_state.commands_aboard_until
    if elements.newer_epoch is not None:
        yield (
            f"{satellite.name}: elements of {_iso(elements.epoch)} are used; those of {_iso(elements.newer_epoch)} in"
            " the same file are newer than the start: leave only them in the file to plan with them."
        )
    off_km = getattr(elements, "interpolation_error_km", 0.0)
    if off_km > FAR_OFF_KM:
        yield (
            f"{satellite.name}: the ephemeris' states are so far apart that positions between them may be off by"
            f" {off_km:.1f} km: take one with a smaller step."
        )
    if mission.policy.upload_lead_h is not None and until is not None and until <= mission.start:
        yield (
            f"{satellite.name}: start_state.commands_aboard_until = {_iso(until)} is not after the start: no contact"
            " can be commanded, not even the first that could carry commands (policy.upload_lead_h), but what a re-plan"
            " finds aboard in the contacts of --from."
        )
    yield from _fractions(mission, satellite)
    for transmitter in satellite.spacecraft.transmitter:
        if not any(_hears(station, transmitter) for station in mission.stations):
            yield (
                f"{satellite.name}: mode {transmitter.mode!r} is never used: no station hears {transmitter.band} band"
                f" in a polarisation that goes with {transmitter.polarisation}."
            )
    battery = satellite.spacecraft.battery
    full_pct = describe_cell(battery, health=battery.health).full_soc_pct
    if full_pct < mission.policy.soc_end_pct - 0.05:
        yield (
            f"battery.cell_max_v = {battery.cell_max_v:g} ends the charge of this {battery.chemistry} cell at"
            f" {full_pct:.1f} %, below policy.soc_end_pct = {mission.policy.soc_end_pct:g}."
        )


def _fractions(mission: Mission, satellite: Satellite) -> Iterator[str]:
    """Per cents that look like shares: a floor of 0.65 % is none."""
    stated = {
        "policy.soc_floor_pct": mission.policy.soc_floor_pct,
        "policy.soc_end_pct": mission.policy.soc_end_pct,
        "start_state.soc_pct": satellite.start_state.soc_pct,
    }
    for key, value in stated.items():
        if 0 < value <= 1:
            yield f"{key} = {value:g} means {value:g} %: was {100 * value:g} meant?"


def _hears(station, transmitter: Transmitter) -> bool:
    sent, antenna = (transmitter.polarisation, transmitter.axial_ratio_db), station.antenna
    loss_db = polarisation_loss_db(*sent, antenna.polarisations, antenna.axial_ratio_db)
    return station.receiver_for(transmitter.band) is not None and loss_db is not None


def _iso(moment) -> str:
    return f"{moment.astimezone(UTC):%Y-%m-%dT%H:%M:%SZ}"

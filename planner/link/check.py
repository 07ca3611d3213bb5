"""What in a mission's modes the link cannot work with, all told at once, before any pass is known."""

from planner.errors import InputError
from planner.link.atmosphere import FREQUENCY_GHZ
from planner.link.coding import modcods_of
from planner.link.geometry import session_law, steady
from planner.mission.models import Mission, Satellite
from planner.mission.transmitter import Transmitter


def check_modes(mission: Mission) -> None:
    """Every mode's MODCODs, frequency and attitude against what the link can compute; loads no map.

    Raises
    ------
    InputError : with one line for each fault
    """
    faults: dict[str, None] = {}  # in the order found, once each: satellites may share a spacecraft
    for satellite in mission.satellites:
        for transmitter in satellite.spacecraft.transmitter:
            faults |= dict.fromkeys(_faults(satellite, transmitter))
    if faults:
        raise InputError(*faults)


def _faults(satellite: Satellite, transmitter: Transmitter) -> list[str]:
    faults: list[str] = []
    for check in (
        lambda: modcods_of(transmitter),
        lambda: steady(session_law(satellite, transmitter), transmitter),
    ):
        try:
            check()
        except InputError as error:
            faults.extend(error.faults)
    if transmitter.frequency_mhz > FREQUENCY_GHZ[1] * 1e3:
        faults.append(
            f"mode {transmitter.mode!r}: frequency_mhz must not be above {FREQUENCY_GHZ[1] * 1e3:g} MHz, the end of"
            f" ITU-R P.618-13's rain model, got {transmitter.frequency_mhz:g}"
        )
    return faults

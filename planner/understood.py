"""The command that tells what was understood of a mission, so that a slip of the pen shows before a week is planned."""

from datetime import UTC
from pathlib import Path

import numpy as np

from planner import printing
from planner.export.contacts import plain_number
from planner.mission.elements import which_set
from planner.mission.models import Mission, Satellite
from planner.mission.pointing import Law
from planner.mission.station import Hours, Station
from planner.units import DAY_S, EARTH_GM_KM3_S2, EARTH_RADIUS_KM, HOUR_S, SOLAR_CONSTANT_W_M2

DONE = 0


def check(mission: Mission) -> int:
    """Print what was understood, and what it warns of."""
    from planner.schedule.cautions import input_cautions

    printing.say(f"{mission.name}: {mission.days:g} days from {mission.start.astimezone(UTC):%Y-%m-%dT%H:%M:%SZ}")
    printing.say("")
    printing.table(
        [("station", "left"), ("latitude", "right"), ("longitude", "right"), ("altitude", "right"), ("above", "right"),
         ("dish", "right"), ("hears", "left"), ("open (UTC)", "left")],
        [(s.name, f"{s.latitude_deg:.2f} deg", f"{s.longitude_deg:.2f} deg", f"{s.altitude_m:g} m",
          f"{s.min_elevation_deg:g} deg", f"{s.antenna.diameter_m:g} m", _hears(s), _hours(s.hours))
         for s in mission.stations],
    )  # fmt: skip
    for satellite in mission.satellites:
        _say_satellite(mission, satellite)
    printing.say("")
    printing.table([("policy", "left"), ("", "left")], [(key, _plain(value)) for key, value in mission.policy])
    printing.say("")
    printing.table([("file read, from the mission's folder", "left"), ("SHA-256", "left"), ("", "left")],
                   [(name, digest[:16] + "…", _whereabouts(name)) for name, digest in mission.inputs])  # fmt: skip
    for caution in input_cautions(mission):
        printing.say(f"caution: {caution}")
    printing.say(f"{len(mission.inputs)} files read, no fault found.")
    return DONE


def _whereabouts(name: str) -> str:
    """Told where a file lies outside the mission's folder, so that it is not forgotten when the folder is copied."""
    return "outside that folder" if Path(name).is_absolute() or ".." in Path(name).parts else ""


def _hours(hours: Hours) -> str:
    opened = ", ".join(f"{a:%H:%M}-{b:%H:%M}" for a, b in hours.open) or "always"
    days = "" if len(hours.days) == 7 else " " + " ".join(hours.days)
    closed = len(hours.maintenance)
    return opened + days + (f", closed {'once' if closed == 1 else f'{closed} times'}" if closed else "")


def _hears(station: Station) -> str:
    """Bands, each receiver with its amplifier's noise or its stated G/T."""
    noise = (
        (r, f"{r.gt_dbk:g} dB/K" if r.gt_dbk is not None else f"{r.noise_temperature_k:g} K") for r in station.receiver
    )
    return ", ".join(f"{' '.join(receiver.bands)} {text}" for receiver, text in noise)


def _law(law: Law) -> str:
    if law.law == "tumbling":
        return law.law
    return f"{list(law.axis)} to {law.law}, {list(law.second_axis)} towards {law.second_target}"


def _plain(value) -> str:
    """A policy's value in plain words."""
    if isinstance(value, Hours):
        return _hours(value)
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, tuple):
        return ", ".join(value) or "none"
    return "none" if value is None else plain_number(value)


def _say_satellite(mission: Mission, satellite: Satellite) -> None:
    start, stored = satellite.start_state, plain_number(satellite.start_state.stored_mbit)
    printing.say("")
    printing.say(f"{satellite.name}: {which_set(satellite.elements, mission.start)}")
    printing.table([("", "left"), ("", "left")], [
        ("orbit", _orbit(satellite)),
        ("idle attitude", _law(satellite.spacecraft.pointing.idle)),
        ("in session", _law(satellite.spacecraft.pointing.session)),
        ("battery", _battery(satellite)),
        ("panels", _panels(satellite)),
        ("loads", ", ".join(f"{load.name} {load.power_w:g} W" for load in satellite.spacecraft.load) or "none"),
        ("recorder", _recorder(satellite)),
        ("at the start", f"charge {start.soc_pct:g} % ± {start.soc_error_pct:g}, {stored} Mbit stored"),
    ])  # fmt: skip
    printing.table(
        [("mode", "left"), ("carrier", "right"), ("band", "left"), ("RF", "right"), ("DC", "right"),
         ("symbols", "right"), ("MODCODs", "left"), ("antenna", "left"), ("commands up", "left")],
        [(t.mode, f"{plain_number(t.frequency_mhz)} MHz", t.band, f"{t.rf_power_w:g} W", f"{t.dc_power_w:g} W",
          f"{plain_number(t.symbol_rate_mbaud)} Mbaud", f"{len(t.modcods)}, {t.modcod_choice}", t.antenna.kind,
          "yes" if t.uplink else "no") for t in satellite.spacecraft.transmitter],
    )  # fmt: skip


def _orbit(satellite: Satellite) -> str:
    """Heights of Kepler's ellipse with that mean motion, over the equator's radius."""
    elements = satellite.elements
    rate_rad_s = elements.mean_motion_rev_day * 2 * np.pi / DAY_S
    axis_km = (EARTH_GM_KM3_S2 / rate_rad_s**2) ** (1 / 3)
    low_km, high_km = (axis_km * (1 + sign * elements.eccentricity) - EARTH_RADIUS_KM for sign in (-1, 1))
    return (
        f"{low_km:.0f} to {high_km:.0f} km high, inclination {elements.inclination_deg:.2f} deg, a revolution in"
        f" {DAY_S / 60 / elements.mean_motion_rev_day:.2f} min"
    )


def _battery(satellite: Satellite) -> str:
    from planner.power.battery import describe_cell

    battery = satellite.spacecraft.battery
    cell, cells = describe_cell(battery, health=battery.health), battery.cells_series * battery.cells_parallel
    return (
        f"{battery.cells_series}S{battery.cells_parallel}P {battery.chemistry}"
        f" {battery.cells_parallel * battery.cell_capacity_ah:g} Ah,"
        f" {battery.cells_series * float(cell.open_circuit_v(cell.capacity_c / 2)):.1f} V half full,"
        f" {cells * float(cell.stored_j[-1]) / HOUR_S:.1f} Wh at health {battery.health:g};"
        f" {battery.cell_min_v:g} to {battery.cell_max_v:g} V and {battery.cell_resistance_mohm:g} mohm a cell"
    )


def _panels(satellite: Satellite) -> str:
    from planner.power.array import panel_power_w

    panels, array = satellite.spacecraft.panel, satellite.spacecraft.array
    facing, flux_w_m2 = np.ones(1), np.full(1, SOLAR_CONSTANT_W_M2)
    new_w = np.array([panel_power_w(panel, facing, flux_w_m2)[0] for panel in panels])
    old_w = new_w * [panel.end_of_life_factor for panel in panels]
    to_bus = array.converter_efficiency * array.tracking_efficiency
    return (
        f"{len(panels)}, {to_bus * new_w.sum():.1f} W to the bus if all face the Sun, {to_bus * old_w.sum():.1f} W at"
        f" end of life"
    )


def _recorder(satellite: Satellite) -> str:
    recorder = satellite.spacecraft.recorder
    sources = ", ".join(f"{source.name} {source.rate_mbps:g} Mbit/s" for source in recorder.source) or "nothing"
    capacity, reserve = plain_number(recorder.capacity_mbit), plain_number(recorder.reserve_mbit)
    return f"{capacity} Mbit, {reserve} of them held back; filled by {sources}"

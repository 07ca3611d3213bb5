"""The command that tells what was understood of a mission, so that a slip of the pen shows before a week is planned."""

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from planner import printing
from planner.export.contacts import plain_number
from planner.mission.elements import which_set
from planner.mission.models import ElementAging, Mission, Recorder, Satellite, Source, Spacecraft
from planner.mission.pointing import Law, Pointing
from planner.mission.power import Load, Spread
from planner.mission.station import Hours, Station
from planner.printing import counted
from planner.units import DAY_S, EARTH_GM_KM3_S2, EARTH_RADIUS_KM, HOUR_S, SOLAR_CONSTANT_W_M2

DONE = 0


def check(mission: Mission) -> int:
    """Print what was understood, and what it warns of."""
    from planner.schedule.cautions import input_cautions

    printing.say(
        f"{mission.name}: {mission.days:g} {'day' if mission.days == 1 else 'days'} from {_iso(mission.start)}"
    )
    printing.say("")
    printing.table(
        [("station", "left"), ("latitude", "right"), ("longitude", "right"), ("altitude", "right"), ("above", "right"),
         ("dish", "right"), ("hears", "left"), ("open (UTC)", "left")],
        [(s.name, *_place(s), f"{s.altitude_m:g} m",
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
    printing.say(f"{counted(len(mission.inputs), 'file')} read, no fault found.")
    return DONE


def _whereabouts(name: str) -> str:
    """Told where a file lies outside the mission's folder, so that it is not forgotten when the folder is copied."""
    return "outside that folder" if Path(name).is_absolute() or ".." in Path(name).parts else ""


def _iso(moment: datetime) -> str:
    return f"{moment.astimezone(UTC):%Y-%m-%dT%H:%M:%SZ}"


def _place(station: Station) -> tuple[str, str]:
    """Latitude and longitude with their sides of the Earth, which a wrong sign turns round."""
    latitude_deg, longitude_deg = station.latitude_deg, (station.longitude_deg + 180) % 360 - 180
    return (
        f"{abs(latitude_deg):.2f} deg {'N' if latitude_deg >= 0 else 'S'}",
        f"{abs(longitude_deg):.2f} deg {'E' if longitude_deg >= 0 else 'W'}",
    )


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
    craft = satellite.spacecraft
    printing.say("")
    printing.say(f"{satellite.name}: {which_set(satellite.elements, mission.start)}")
    printing.table([("", "left"), ("", "left")], [
        ("orbit", _orbit(satellite)),
        ("idle attitude", _law(craft.pointing.idle)),
        ("in session", _law(craft.pointing.session)),
        ("slew", _slew(craft.pointing)),
        ("battery", _battery(satellite)),
        ("panels", _panels(satellite)),
        *_lines("loads", [_load(load) for load in craft.load] or ["none"]),
        *_lines("recorder", _recorder(craft.recorder)),
        ("at the start", _start(mission, satellite)),
        *_lines("pessimistic", _pessimistic(satellite)),
        ("spread", _spread(craft.spread)),
        ("aging", _aging(craft.aging)),
    ])  # fmt: skip
    _say_modes(craft)


def _say_modes(craft: Spacecraft) -> None:
    """In two tables: what is sent, and how it is coded."""
    printing.say("")
    printing.table(
        [("mode", "left"), ("carrier", "right"), ("band", "left"), ("polarisation", "left"), ("RF", "right"),
         ("DC", "right"), ("antenna", "left"), ("commands up", "left")],
        [(t.mode, f"{plain_number(t.frequency_mhz)} MHz", t.band, t.polarisation, f"{t.rf_power_w:g} W",
          f"{t.dc_power_w:g} W", t.antenna.kind, "yes" if t.uplink else "no") for t in craft.transmitter],
    )  # fmt: skip
    printing.say("")
    printing.table(
        [("mode", "left"), ("symbols", "right"), ("MODCODs", "left"), ("implementation loss", "right"),
         ("acquisition", "right")],
        [(t.mode, f"{plain_number(t.symbol_rate_mbaud)} Mbaud", f"{len(t.modcods)}, {t.modcod_choice}",
          f"{t.implementation_loss_db:g} dB", f"{t.acquisition_s:g} s") for t in craft.transmitter],
    )  # fmt: skip


def _lines(key: str, texts: Sequence[str]) -> list[tuple[str, str]]:
    """Rows of a table, the key before the first alone."""
    return [("" if number else key, text) for number, text in enumerate(texts)]


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


def _slew(pointing: Pointing) -> str:
    held = f"; none in {_windows(pointing.no_slew_windows)}" if pointing.no_slew_windows else ""
    return (
        f"{pointing.slew_rate_deg_s:g} deg/s, {pointing.settle_s:g} s to settle,"
        f" {pointing.slew_power_w:g} W more while it turns{held}"
    )


def _windows(windows: tuple[tuple[datetime, datetime], ...]) -> str:
    """How many, and from when."""
    first = _iso(min(begin for begin, _ in windows))
    return f"{counted(len(windows), 'window')}, {'' if len(windows) == 1 else 'the first '}from {first}"


def _when(what: Load | Source) -> str:
    """When it runs, with its duty where it is not on all that time."""
    when = _windows(what.windows) if what.when == "windows" else what.when
    return when + (f", duty {what.duty:g}" if what.duty < 1 else "")


def _load(load: Load) -> str:
    thermostat = "" if load.on_below_c is None else f", while the battery is below {load.on_below_c:g} °C"
    return f"{load.name} {load.power_w:g} W: {_when(load)}{thermostat}"


def _recorder(recorder: Recorder) -> list[str]:
    capacity, reserve = plain_number(recorder.capacity_mbit), plain_number(recorder.reserve_mbit)
    sources = [f"filled by {source.name} {source.rate_mbps:g} Mbit/s: {_when(source)}" for source in recorder.source]
    return [f"{capacity} Mbit, {reserve} of them held back", *(sources or ["filled by nothing"])]


def _start(mission: Mission, satellite: Satellite) -> str:
    start = satellite.start_state
    until = start.commands_aboard_until or mission.start + timedelta(days=1)
    aboard = "always aboard" if mission.policy.upload_lead_h is None else f"aboard until {_iso(until)}"
    stored = plain_number(start.stored_mbit)
    return f"charge {start.soc_pct:g} % ± {start.soc_error_pct:g}, {stored} Mbit stored, commands {aboard}"


def _pessimistic(satellite: Satellite) -> list[str]:
    """What the corner that every limit is held to assumes."""
    from planner.power.corners import corner_of

    corner, craft = corner_of(satellite, "pessimistic"), satellite.spacecraft
    worse = craft.pessimistic
    health, old = min(craft.battery.health, worse.health), "at end of life, " if worse.array_end_of_life else ""
    return [
        f"charge {corner.start_soc_pct:.1f} % at the start; battery at health {health:g}, {corner.battery_colder_k:g} K"
        f" colder, resistance x {worse.resistance_factor:g}",
        f"panels {old}x {worse.array_factor:g}; loads x {corner.load_factor:g};"
        f" transmitters x {corner.transmitter_factor:g}",
    ]


def _spread(spread: Spread) -> str:
    return (
        f"one sigma: capacity {spread.capacity_pct:g} %, resistance {spread.resistance_pct:g} %, array"
        f" {spread.array_pct:g} %, loads {spread.load_pct:g} %, transmitters {spread.transmitter_pct:g} %;"
        f" {spread.samples} weeks"
    )


def _aging(aging: ElementAging) -> str:
    return (
        f"one sigma along the track: {aging.in_track_at_epoch_km:g} km at epoch, + {aging.in_track_km_per_day:g}"
        f" km/day, + {aging.in_track_km_per_day2:g} km/day²"
    )

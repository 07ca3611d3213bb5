"""One budget, line by line, each line with its source: what the `link` command prints."""

import math
from dataclasses import asdict, dataclass

import numpy as np

from planner.errors import InputError
from planner.link.atmosphere import FREQUENCY_GHZ, UNAVAILABILITY_PCT
from planner.link.budget import Lines, asked_unavailability_pct, budget_at
from planner.link.choice import FADING_PCT, share_of_year
from planner.link.coding import Modcod, ebn0_db_of, find_modcod, information_rate_mbps, modcods_of
from planner.link.flux import CHECK_YOUR_LICENCE, flux_limit
from planner.link.geometry import Geometry, circular_geometry, mean_radius_km, sampled_geometry
from planner.link.names import look_up, named_mode, named_satellite, named_station
from planner.link.noise import receiver_temperature_k
from planner.mission.models import Mission, Satellite
from planner.mission.station import Station
from planner.mission.transmitter import Transmitter
from planner.sky import Sky, observe
from planner.units import EARTH_RADIUS_KM, decibel_of_power


@dataclass(frozen=True)
class Line:
    """One row of the page. `value` is None where there is nothing to state."""

    item: str
    value: float | None
    unit: str
    source: str


@dataclass(frozen=True)
class Budget:
    """A downlink budget at one moment, at one availability; fields as the keys of the `link` command's JSON."""

    satellite: str
    station: str
    mode: str
    modcod: str
    elevation_deg: float
    availability_pct: float
    slant_range_km: float
    eirp_dbw: float
    free_space_loss_db: float
    atmospheric_loss_db: float
    system_temperature_k: float
    gt_dbk: float
    cn0_dbhz: float
    ebn0_db: float
    esn0_db: float
    required_db: float
    margin_db: float
    flux_dbw_m2: float
    flux_limit_dbw_m2: float | None
    flux_bandwidth_hz: float
    lines: tuple[Line, ...]
    notes: tuple[str, ...]

    def as_dict(self) -> dict:
        """Plain numbers, text, lists and None, ready for JSON."""
        return asdict(self) | {"lines": [asdict(line) for line in self.lines], "notes": list(self.notes)}

    def rows(self) -> list[tuple[str, str, str, str]]:
        """The lines as text: item, value, unit, source."""
        return [
            (line.item, "none" if line.value is None else f"{line.value:.2f}", line.unit, line.source)
            for line in self.lines
        ]

    def __str__(self) -> str:
        rows = self.rows()
        widths = [max(len(row[k]) for row in rows) for k in range(3)]
        page = [f"{i:<{widths[0]}}  {v:>{widths[1]}}  {u:<{widths[2]}}  {s}".rstrip() for i, v, u, s in rows]
        head = (
            f"{self.satellite} to {self.station}, {self.mode}, {self.modcod}, {self.availability_pct:g} % of the year"
        )
        return "\n".join([head, "", *page, *([""] if self.notes else []), *self.notes])


def link_budget(
    mission: Mission,
    station: str,
    mode: str,
    *,
    elevation_deg: float | None = None,
    pass_id: str | None = None,
    satellite: str | None = None,
    modcod: str | None = None,
    availability_pct: float | None = None,
    sky: Sky | None = None,
) -> Budget:
    """One line-by-line budget, at an elevation or at the highest moment of a pass.

    Parameters
    ----------
    station, mode, satellite, modcod : names; `satellite` may be left out where there is one, or a pass tells it.
        Without `modcod` the fastest that keeps the policy's margin is taken, or else the most robust
    elevation_deg : float [deg], 0 to 90: on a circular orbit at the satellite's mean height
    pass_id : one of `find_passes`' ids: at TCA
    availability_pct : float [% of the year], 50 to 99.999; the policy's when left out
    sky : what `observe(mission)` made, to spare making it again for a pass

    Raises
    ------
    InputError : an unknown name, both or neither of elevation and pass, a value out of range, a station that cannot
        hear the mode, an antenna without the pattern it needs, a frequency beyond the models' 55 GHz
    """
    if (elevation_deg is None) == (pass_id is None):
        given = "neither" if pass_id is None else f"{elevation_deg!r} and {pass_id!r}"
        raise InputError(f"give either elevation_deg or pass_id, got {given}")
    policy = mission.policy
    availability_pct = _in_range("availability_pct", availability_pct, policy.availability_pct)
    place = named_station(mission, station)
    if pass_id is None:
        elevation_deg = _in_range("elevation_deg", elevation_deg, None)
        craft = named_satellite(mission, satellite)
        transmitter = named_mode(craft, mode)
        geometry = circular_geometry(craft, transmitter, elevation_deg, policy.elements_refresh_days)
        height_km = mean_radius_km(craft) - EARTH_RADIUS_KM
        where = f"circular orbit at the mean height of {height_km:.0f} km, not a pass"
    else:
        sky = sky or observe(mission)
        craft, row = _named_pass(mission, sky, pass_id, satellite, station)
        transmitter = named_mode(craft, mode)
        geometry = _at_tca(sky, row, craft, transmitter, place, policy.elements_refresh_days)
        where = f"pass {pass_id} at TCA, {sky.clock.iso(float(sky.passes.tca_s[row]))}"
    lines = budget_at(transmitter, place, geometry, (asked_unavailability_pct(availability_pct),), FADING_PCT)
    chosen = _chosen(transmitter, modcod, float(lines.esn0_db[0, 0]), policy.link_margin_db)
    return _page(mission, craft, place, transmitter, chosen, availability_pct, geometry, lines, where)


RANGES = {
    "elevation_deg": (0.0, 90.0),
    "availability_pct": (100 - UNAVAILABILITY_PCT[1], 100 - UNAVAILABILITY_PCT[0]),
}


def _in_range(name: str, value: float | None, default: float | None) -> float:
    value = default if value is None else value
    low, high = RANGES[name]
    if not isinstance(value, int | float | np.number) or not low <= value <= high:
        raise InputError(f"{name} must be {low:g} to {high:g}, got {value}")
    return float(value)


def _named_pass(mission: Mission, sky: Sky, pass_id: str, satellite: str | None, station: str) -> tuple[Satellite, int]:
    """The pass's satellite and its row in `sky.passes`; it must be of the satellite and station named."""
    row = look_up("pass", pass_id, {name: k for k, name in enumerate(sky.passes.pass_id)})
    for kind, asked, has in (
        ("satellite", satellite, str(sky.passes.satellite[row])),
        ("station", station, str(sky.passes.station[row])),
    ):
        if asked is not None and asked != has:
            raise InputError(f"pass {pass_id!r} is of {kind} {has!r}, got {kind} {asked!r}")
    return named_satellite(mission, str(sky.passes.satellite[row])), row


def _at_tca(sky: Sky, row: int, craft, transmitter, place, element_age_days: float) -> Geometry:
    own = sky.samples.of(row)
    tca = own.start + int(np.argmin(np.abs(sky.samples.time_s[own] - sky.passes.tca_s[row])))
    return sampled_geometry(sky, craft, transmitter, place, np.array([tca]), element_age_days)


def _chosen(transmitter: Transmitter, name: str | None, esn0_db: float, margin_db: float) -> Modcod:
    if name is not None:
        return find_modcod(name, transmitter)
    rows = modcods_of(transmitter)
    least_db = transmitter.implementation_loss_db + margin_db
    return next((row for row in reversed(rows) if esn0_db >= row.required_esn0_db + least_db), rows[0])


def _page(mission, craft, place, transmitter, modcod, availability_pct, geometry, lines, where) -> Budget:
    value = {name: _number(array) for name, array in vars(lines).items() if name != "attenuation"}
    esn0_db = value["esn0_db"]
    ebn0_db = float(ebn0_db_of(esn0_db, modcod))
    margin_db = esn0_db - transmitter.implementation_loss_db - modcod.required_esn0_db
    limit = value["flux_limit_dbw_m2"] if math.isfinite(value["flux_limit_dbw_m2"]) else None
    table = [
        *_path_lines(transmitter, geometry, lines, where),
        *_receive_lines(transmitter, place, lines),
        *_code_lines(mission, transmitter, modcod, esn0_db, ebn0_db, margin_db),
        ("margin not below zero", 100 * _share(transmitter, modcod, lines), "% of year", "P.618-13 at 14 percentiles"),
        *_beside_lines(transmitter, value, limit),
    ]
    return Budget(
        satellite=craft.name,
        station=place.name,
        mode=transmitter.mode,
        modcod=modcod.name,
        elevation_deg=_number(geometry.elevation_deg),
        availability_pct=availability_pct,
        slant_range_km=_number(geometry.slant_range_km),
        atmospheric_loss_db=_number(lines.attenuation.total_db),
        ebn0_db=ebn0_db,
        required_db=modcod.required_esn0_db,
        margin_db=margin_db,
        flux_limit_dbw_m2=limit,
        lines=tuple(
            Line(item, None if array is None else _number(array), unit, source) for item, array, unit, source in table
        ),
        notes=_notes(mission, transmitter, margin_db, value, limit),
        **{name: value[name] for name in SHARED},
    )


SHARED = (
    "eirp_dbw", "free_space_loss_db", "system_temperature_k", "gt_dbk", "cn0_dbhz", "esn0_db", "flux_dbw_m2",
    "flux_bandwidth_hz",
)  # fmt: skip


def _number(array) -> float:
    """The first number of an array or the scalar, as a plain float."""
    return float(np.asarray(array).reshape(-1)[0])


def _share(transmitter: Transmitter, modcod: Modcod, lines: Lines) -> float:
    """Share of the year with Es/N0 at the required value and implementation loss, or above."""
    need_db = modcod.required_esn0_db + transmitter.implementation_loss_db
    return float(share_of_year(lines.esn0_db[1:] - need_db, FADING_PCT)[0])


def _path_lines(transmitter: Transmitter, geometry: Geometry, lines: Lines, where: str) -> list[tuple]:
    air = lines.attenuation
    below = " (at 1 GHz, an upper bound)" if transmitter.frequency_mhz < FREQUENCY_GHZ[0] * 1e3 else ""
    kind = transmitter.antenna.kind
    return [
        ("frequency", transmitter.frequency_mhz, "MHz", "mission file"),
        ("elevation", geometry.elevation_deg, "deg", where),
        ("slant range", geometry.slant_range_km, "km", where),
        ("RF power", lines.rf_power_dbw, "dBW", "mission file"),
        ("line loss", lines.line_loss_db, "dB", "mission file"),
        ("angle off the antenna's axis", geometry.off_axis_deg, "deg", "attitude law in session"),
        ("transmit antenna gain", lines.transmit_gain_dbi, "dBi", f"{kind}, at that angle"),
        ("EIRP", lines.eirp_dbw, "dBW", "power less line loss plus gain"),
        ("transmit pointing loss", lines.transmit_pointing_loss_db, "dB", "pointing_error_deg, square to that angle"),
        ("polarisation mismatch", lines.polarisation_loss_db, "dB", "axial ratios, ellipses crossed (textbook)"),
        ("free-space loss", lines.free_space_loss_db, "dB", "20 log10(4 pi d / lambda), ITU-R P.525"),
        ("gas", air.gas_db, "dB", f"ITU-R P.676-12{below}"),
        ("cloud", air.cloud_db, "dB", f"ITU-R P.840{below}"),
        ("rain", air.rain_db, "dB", f"ITU-R P.618-13, P.837-7, P.838-3, P.839-4{below}"),
        ("scintillation", air.scintillation_db, "dB", f"ITU-R P.618-13 section 2.4{below}"),
        ("atmospheric loss", air.total_db, "dB", "gas + sqrt((rain + cloud)^2 + scintillation^2), P.618-13"),
    ]


def _receive_lines(transmitter: Transmitter, place: Station, lines: Lines) -> list[tuple]:
    receiver = place.receiver_for(transmitter.band)
    assert receiver is not None  # a station that does not hear the band was refused
    stated = receiver.gt_dbk is not None
    parts = [] if stated else [
        ("ground spillover", receiver.ground_spillover_k, "K", "station file"),
        ("receiver temperature", receiver_temperature_k(receiver), "K", "Friis' cascade, at the antenna's flange"),
    ]  # fmt: skip
    aim = "pointing_error_deg" + (", autotrack" if place.antenna.autotrack else " and age of the elements")
    system = "the stated G/T's, plus what sky and Sun add" if stated else "sum, at the antenna's flange"
    return [
        ("receive antenna gain", lines.receive_gain_dbi, "dBi", "eta (pi D / lambda)^2, at the antenna's flange"),
        ("receive pointing loss", lines.receive_pointing_loss_db, "dB", aim),
        ("sky temperature", lines.sky_temperature_k, "K", "ITU-R P.618-13 section 3, Tm 275 K; rain's noise included"),
        ("Sun in the beam", lines.sun_temperature_k, "K", "quiet Sun, share of the reception on its disc"),
        *parts,
        ("system temperature", lines.system_temperature_k, "K", system),
        ("G/T", lines.gt_dbk, "dB/K", "gain less system temperature"),
        ("C/N0", lines.cn0_dbhz, "dBHz", "EIRP less losses plus G/T less Boltzmann's constant"),
    ]


def _code_lines(mission, transmitter: Transmitter, modcod: Modcod, esn0_db, ebn0_db, margin_db) -> list[tuple]:
    rate_kbps = 1e3 * information_rate_mbps(transmitter, modcod.bits_per_symbol)
    return [
        ("symbol rate", decibel_of_power(transmitter.symbol_rate_mbaud * 1e6), "dBBd", "mission file"),
        ("Es/N0", esn0_db, "dB", "C/N0 less symbol rate"),
        ("Eb/N0", ebn0_db, "dB", "per information bit of the code"),
        ("implementation loss", transmitter.implementation_loss_db, "dB", "mission file"),
        ("required Es/N0", modcod.required_esn0_db, "dB", f"{modcod.name}: {modcod.source}"),
        ("required Eb/N0", modcod.required_ebn0_db, "dB", "the same, per information bit of the code"),
        ("margin", margin_db, "dB", "Es/N0 less implementation loss less required"),
        ("margin asked for", mission.policy.link_margin_db, "dB", "policy.link_margin_db"),
        ("user rate", rate_kbps, "kbit/s", "after coding, framing, overheads and reserve"),
    ]


def _beside_lines(transmitter: Transmitter, value: dict, limit: float | None) -> list[tuple]:
    row = flux_limit(transmitter.frequency_mhz)
    wide = row.bandwidth_hz >= 1e6
    bandwidth = f"dB(W/m2) in {row.bandwidth_hz / (1e6 if wide else 1e3):g} {'MHz' if wide else 'kHz'}"
    source = "no row held for this band" if limit is None else f"ITU RR Table 21-4 ({row.read}); {CHECK_YOUR_LICENCE}"
    occupied_khz = 1e3 * transmitter.symbol_rate_mbaud * (1 + transmitter.roll_off)
    return [
        ("Doppler shift", value["doppler_khz"], "kHz", "first order in v/c, positive on approach"),
        ("occupied bandwidth", occupied_khz, "kHz", "symbol rate x (1 + roll-off)"),
        ("power flux-density", value["flux_dbw_m2"], bandwidth, "at the ground, clear path, no pointing loss"),
        ("flux-density limit", limit, bandwidth, source),
    ]


def _notes(mission, transmitter: Transmitter, margin_db: float, value: dict, limit: float | None) -> tuple[str, ...]:
    notes = []
    if margin_db < mission.policy.link_margin_db:
        notes.append(
            f"The margin is {margin_db:.1f} dB where the policy asks for {mission.policy.link_margin_db:.1f} dB."
        )
    if limit is not None and value["flux_dbw_m2"] > limit:
        excess_db = value["flux_dbw_m2"] - limit
        notes.append(f"CAUTION: the flux density is {excess_db:.1f} dB above its limit; {CHECK_YOUR_LICENCE}.")
    if limit is None:
        notes.append(f"No flux-density limit is held for {transmitter.frequency_mhz:g} MHz; {CHECK_YOUR_LICENCE}.")
    if value["sun_temperature_k"] > value["system_temperature_k"] / 10:
        notes.append(f"CAUTION: the Sun in the beam adds {value['sun_temperature_k']:.0f} K.")
    return tuple(notes)

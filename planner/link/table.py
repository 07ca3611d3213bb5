"""What every second of a satellite's passes is worth to one mode, for the whole week at once."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from planner.link.budget import Lines, asked_unavailability_pct, budget_at, cannot_hear
from planner.link.choice import FADING_PCT, fastest_row, share_of_year, variable_rows, worthwhile_rows
from planner.link.coding import Modcod, information_rate_mbps, modcods_of
from planner.link.flux import flux_limit
from planner.link.geometry import Geometry, sampled_geometry
from planner.link.names import named_mode, named_satellite
from planner.mission.models import Mission, Policy
from planner.mission.transmitter import Transmitter
from planner.sky import Sky

NEVER_HEARD_DB = -1000.0  # Es/N0 where the station cannot hear the mode
COLUMNS = (
    "elevation_deg", "off_axis_deg", "attenuation_db", "system_temperature_k", "gt_dbk", "cn0_dbhz", "esn0_db",
    "doppler_khz", "flux_dbw_m2", "flux_limit_dbw_m2",
)  # fmt: skip


@dataclass(frozen=True, eq=False)
class LinkOption:
    """One way to send: what it needs and brings at every sample (n,).

    modcod : index into the table's `modcods`, -1 where not usable.   usable : the margin asked for is there, the
    mount can follow, the station hears the mode (and the flux is within its limit where the policy enforces it).
    margin_db : against required value and implementation loss, of the row sent; where a variable mode sends none, of
    its slowest.
    rate_mbps : user information, 0 where not usable.   expected_rate_mbps : its mean over the year's fading, the
    MODCOD staying as planned, because the commands are aboard in advance.
    """

    label: str
    modcod: np.ndarray
    margin_db: np.ndarray
    usable: np.ndarray
    rate_mbps: np.ndarray
    expected_rate_mbps: np.ndarray


@dataclass(frozen=True, eq=False)
class LinkTable:
    """Arrays (n,) over the samples of one satellite's passes; `sample_index` points into `sky.samples`.

    `pass_rows` (m,) points into `sky.passes`; pass k owns offsets[k]:offsets[k + 1]. `reasons` (m,) says why a pass
    cannot be used in this mode, empty where it can. `trackable` (n,) bool: the mount can follow. Columns are nan where
    the station cannot hear the mode.
    """

    satellite: str
    mode: str
    modcods: tuple[Modcod, ...]
    sample_index: np.ndarray
    pass_rows: np.ndarray
    offsets: np.ndarray
    time_s: np.ndarray
    elevation_deg: np.ndarray
    off_axis_deg: np.ndarray
    attenuation_db: np.ndarray
    system_temperature_k: np.ndarray
    gt_dbk: np.ndarray
    cn0_dbhz: np.ndarray
    esn0_db: np.ndarray
    doppler_khz: np.ndarray
    flux_dbw_m2: np.ndarray
    flux_limit_dbw_m2: np.ndarray
    trackable: np.ndarray
    flux_bandwidth_hz: float
    options: tuple[LinkOption, ...]
    reasons: tuple[str, ...]

    @cached_property
    def names(self) -> tuple[str, ...]:
        return tuple(row.name for row in self.modcods)


def link_table(mission: Mission, sky: Sky, satellite_name: str, mode: str) -> LinkTable:
    """Margin, rate and expected rate of one satellite's mode along all its passes.

    Parameters
    ----------
    mission, sky : the mission and what `planner.sky.observe` made of it
    satellite_name, mode : names in the mission

    Raises
    ------
    InputError : an unknown satellite, mode or MODCOD; an antenna without the pattern it needs; a frequency outside
        the models' range
    """
    satellite = named_satellite(mission, satellite_name)
    transmitter = named_mode(satellite, mode)
    modcods = modcods_of(transmitter)
    pass_rows = np.flatnonzero(np.asarray(sky.passes.satellite) == satellite_name)
    sample_index, offsets = _own_samples(sky.samples, pass_rows)
    stations = np.asarray(sky.passes.station)[pass_rows]
    columns, fading_esn0_db = _evaluate(mission, sky, satellite, transmitter, sample_index, offsets, stations)
    trackable = sky.samples.trackable[sample_index]
    allowed = trackable & (columns["esn0_db"] > NEVER_HEARD_DB)
    if mission.policy.enforce_flux_limit:
        allowed = allowed & (columns["flux_dbw_m2"] <= columns["flux_limit_dbw_m2"])
    time_s = sky.samples.time_s[sample_index]
    options = _options(
        mission.policy, transmitter, modcods, columns["esn0_db"], fading_esn0_db, time_s, offsets, allowed
    )
    slowest_margin_db = columns["esn0_db"] - modcods[0].required_esn0_db - transmitter.implementation_loss_db
    unheard = {name: cannot_hear(transmitter, mission.station(name)) for name in set(stations)}
    reasons = [
        unheard[station] or _reason(mission.policy, own, columns, trackable, allowed, slowest_margin_db, options)
        for station, own in zip(stations, map(slice, offsets[:-1], offsets[1:]), strict=True)
    ]
    return LinkTable(
        satellite=satellite_name,
        mode=mode,
        modcods=modcods,
        sample_index=sample_index,
        pass_rows=pass_rows,
        offsets=offsets,
        time_s=time_s,
        trackable=trackable,
        flux_bandwidth_hz=flux_limit(transmitter.frequency_mhz).bandwidth_hz,
        options=options,
        reasons=tuple(reasons),
        **columns,
    )


def _own_samples(samples, pass_rows) -> tuple[np.ndarray, np.ndarray]:
    """Indices into `samples` of those passes, one after another, and where each pass begins among them."""
    counts = np.diff(samples.offsets)[pass_rows]
    offsets = np.concatenate([[0], np.cumsum(counts)])
    index = np.arange(offsets[-1]) + np.repeat(samples.offsets[:-1][pass_rows] - offsets[:-1], counts)
    return index, offsets


def _evaluate(mission, sky, satellite, transmitter, sample_index, offsets, stations):
    """The budget station by station: columns (n,) of the table, and Es/N0 (k, n) over the fading distribution."""
    count, policy = len(sample_index), mission.policy
    columns = {name: np.full(count, np.nan) for name in COLUMNS}
    columns["elevation_deg"] = sky.samples.elevation_deg[sample_index]
    columns["esn0_db"][:] = NEVER_HEARD_DB
    fading_esn0_db = np.full((len(FADING_PCT), count), NEVER_HEARD_DB)
    station_of_sample = np.repeat(stations, np.diff(offsets))
    asked = (asked_unavailability_pct(policy.availability_pct),)
    for name in np.unique(stations):
        station, mine = mission.station(name), np.flatnonzero(station_of_sample == name)
        if cannot_hear(transmitter, station):
            continue
        geometry = sampled_geometry(
            sky, satellite, transmitter, station, sample_index[mine], policy.elements_refresh_days
        )
        lines = budget_at(transmitter, station, geometry, asked, FADING_PCT)
        for column, values in _columns_of(lines, geometry).items():
            columns[column][mine] = values
        fading_esn0_db[:, mine] = lines.esn0_db[1:]
    return columns, fading_esn0_db


def _columns_of(lines: Lines, geometry: Geometry) -> dict[str, np.ndarray]:
    """The table's columns at the availability asked for, the first of the percentiles."""
    return {
        "elevation_deg": geometry.elevation_deg,
        "off_axis_deg": geometry.off_axis_deg,
        "attenuation_db": lines.attenuation.total_db[0],
        "system_temperature_k": lines.system_temperature_k[0],
        "gt_dbk": lines.gt_dbk[0],
        "cn0_dbhz": lines.cn0_dbhz[0],
        "esn0_db": lines.esn0_db[0],
        "doppler_khz": lines.doppler_khz,
        "flux_dbw_m2": lines.flux_dbw_m2,
        "flux_limit_dbw_m2": lines.flux_limit_dbw_m2,
    }


def _options(
    policy: Policy, transmitter: Transmitter, modcods, esn0_db, fading_esn0_db, time_s, offsets, allowed
) -> tuple[LinkOption, ...]:
    """The ways to send: one, or for "best for the pass" one for each row worth having in some pass."""
    least_db = np.array([row.required_esn0_db for row in modcods]) + transmitter.implementation_loss_db
    rate_mbps = information_rate_mbps(transmitter, [row.bits_per_symbol for row in modcods])

    def option(label: str, rows, fallback: int) -> LinkOption:
        usable = rows >= 0
        need_db = least_db[np.where(usable, rows, fallback)]
        rate = np.where(usable, rate_mbps[rows], 0.0)
        share = share_of_year(fading_esn0_db - need_db, FADING_PCT)
        return LinkOption(label, rows, esn0_db - need_db, usable, rate, rate * share)

    asked_db = least_db + policy.link_margin_db
    if transmitter.modcod_choice == "variable":
        rows = variable_rows(
            esn0_db,
            time_s,
            offsets,
            asked_db,
            allowed,
            hysteresis_db=transmitter.hysteresis_db,
            shortest_dwell_s=transmitter.shortest_dwell_s,
        )
        return (option("variable", rows, 0),)
    usable = worthwhile_rows((fastest_row(esn0_db, asked_db, allowed) >= np.arange(len(modcods))[:, None]), offsets)
    kept = [k for k in range(len(modcods)) if usable[k].any()] or [0]
    return tuple(option(modcods[k].name, np.where(usable[k], k, -1), k) for k in kept)


def _reason(policy: Policy, own: slice, columns, trackable, allowed, slowest_margin_db, options) -> str:
    """Why nothing can be sent in a pass's `own` samples; empty where something can."""
    if any(option.usable[own].any() for option in options):
        return ""
    if not trackable[own].any():
        return "the station's mount is too slow for the whole pass"
    if not allowed[own].any():
        excess_db = np.min((columns["flux_dbw_m2"] - columns["flux_limit_dbw_m2"])[own])
        return f"power flux-density is above its limit throughout, by {excess_db:.1f} dB or more"
    best = np.argmax(np.where(allowed[own], slowest_margin_db[own], -np.inf))
    return (
        f"link margin reaches {slowest_margin_db[own][best]:.2f} dB at {columns['elevation_deg'][own][best]:.0f} deg,"
        f" {policy.link_margin_db:g} dB asked for"
    )

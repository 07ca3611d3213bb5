"""Pointing tables: where the dish looks and what frequency arrives, moment by moment, for one contact each."""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import numpy as np
import pandas as pd

from planner.errors import InputError
from planner.export.contacts import distinct, file_name, neutral, plain_number, table_csv, utc_text
from planner.export.refraction import refraction_deg
from planner.link.antenna import ground_dish, half_power_beam_deg
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.sky import Sky, aging
from planner.sky.samples import doppler_hz
from planner.sky.sites import look, station_position_km

NARROW_BEAM_MHZ = 18_000.0  # from K band up (IEEE Std 521, from memory) old elements put the satellite outside the beam
AFTER_A_SEPARATOR = re.compile(r"([,;]\s*|\t)(?=[=+\-@])")  # what a spreadsheet would run, in the middle of a line
MOST_TOLD = 20
MOST_LOOKS = 20_000  # in search of north, about one a second
FARTHEST = datetime(2100, 1, 1, tzinfo=UTC)
CAUTIONS = (
    "planning aid: the station's safety rules and licensed practice come first",
    "the antenna moves: keep clear of it and of its beam, and check its limits before it is driven",
)


@dataclass(frozen=True)
class Aim:
    """A contact, its pass, and until when the elements serve to point at it (None: the dish follows the signal)."""

    session: Session
    row: int
    useful_until: datetime | None

    def is_stale(self, sky: Sky) -> bool:
        return self.useful_until is not None and sky.clock.datetime(self.session.tx_off_s) > self.useful_until


def pointing_files(mission: Mission, sky: Sky, sessions, **options) -> dict[str, bytes]:
    """All of `pointing_tables`, by file name; its options."""
    return dict(pointing_tables(mission, sky, sessions, **options))


def pointing_tables(
    mission: Mission,
    sky: Sky,
    sessions,
    *,
    step_s: float = 1.0,
    refracted: bool = True,
    force: bool = False,
    issue: str = "",
) -> Iterator[tuple[str, bytes]]:
    """(file name, content) of a pointing table (CSV under a header of `#` lines) for every session.

    Faults are told at the call; the tables are made as they are asked for.

    Parameters
    ----------
    sessions : Session objects; each must be on a pass of `sky`
    step_s : [s] between rows; rows stand on whole steps of UTC, and at AOS and LOS
    refracted : elevations lifted by the troposphere (ITU-R P.834), else geometric
    force : write tables although the elements are too old for the beam
    issue : of the schedule that the sessions are from, for the header; see `schedule_issue`

    Raises
    ------
    InputError : a session on no known pass; a step outside 0.01 s to 600 s; elements too old to point a K-band (or
        higher) dish, told contact by contact with the time up to which they serve
    """
    if not 0.01 <= step_s <= 600:
        raise InputError(f"step_s must be from 0.01 s to 600 s, got {step_s:g}")
    aims = [_aim(mission, sky, session) for session in sessions]
    stale = list(too_old(mission, sky, sessions).values())
    if stale and not force:
        more = [f"and {len(stale) - MOST_TOLD} more contacts"] if len(stale) > MOST_TOLD else []
        raise InputError(*stale[:MOST_TOLD], *more)
    names = distinct(file_name("pointing", aim.session.pass_id, aim.session.mode) for aim in aims)
    header = [f"schedule issue: {issue}"] if issue else []
    return (
        (f"{name}.csv", _table(mission, sky, aim, header, step_s=step_s, refracted=refracted))
        for name, aim in zip(names, aims, strict=True)
    )


def too_old(mission: Mission, sky: Sky, sessions) -> dict[Session, str]:
    """The sessions whose elements are too old to point a K-band (or higher) dish by, and why."""
    found = ((session, _staleness(mission, sky, _aim(mission, sky, session))) for session in sessions)
    return {session: fault for session, fault in found if fault}


def useful_until(mission: Mission, sky: Sky, session: Session) -> datetime | None:
    """The latest time at which today's elements keep the satellite in the dish's half-power beam on this pass.

    None for a dish that follows the signal.
    """
    return _aim(mission, sky, session).useful_until


def _aim(mission: Mission, sky: Sky, session: Session) -> Aim:
    found = np.flatnonzero(sky.passes.pass_id == session.pass_id)
    if not len(found):
        raise InputError(f"{session.pass_id}: must be a pass in the span of the mission")
    row, station = int(found[0]), mission.station(session.station)
    if station.antenna.autotrack:
        return Aim(session, row, None)
    satellite = mission.satellite(session.satellite)
    samples = sky.samples.of(row)
    age_days = aging.oldest_age_days(
        satellite.spacecraft.aging,
        half_power_beam_deg(ground_dish(station.antenna), satellite.spacecraft.mode(session.mode).frequency_mhz * 1e6),
        sky.samples.position_km[samples],
        sky.samples.velocity_km_s[samples],
        station_position_km(station),
    )
    epoch = satellite.elements.epoch
    farthest_days = (FARTHEST - epoch) / timedelta(days=1)
    return Aim(session, row, epoch + timedelta(days=min(age_days, farthest_days)))


def _staleness(mission: Mission, sky: Sky, aim: Aim) -> str | None:
    satellite, session = mission.satellite(aim.session.satellite), aim.session
    wide = satellite.spacecraft.mode(session.mode).frequency_mhz < NARROW_BEAM_MHZ
    if wide or aim.useful_until is None or not aim.is_stale(sky):
        return None
    return (
        f"{session.pass_id} {session.mode}: elements of epoch {_iso(satellite.elements.epoch)} point this dish until"
        f" {_iso(aim.useful_until)}, the contact ends {sky.clock.iso(session.tx_off_s)}; take newer elements, or force"
    )


def _table(mission: Mission, sky: Sky, aim: Aim, header: list[str], *, step_s: float, refracted: bool) -> bytes:
    session = aim.session
    station, satellite = mission.station(session.station), mission.satellite(session.satellite)
    time_s = _moments(sky, aim.row, step_s)
    position_km, velocity_km_s = sky.track(session.satellite).at(time_s)
    view = look(position_km, velocity_km_s, station)
    lift_deg = refraction_deg(view.elevation_deg, station.altitude_m / 1000) if refracted else np.zeros(len(time_s))
    frequencies_mhz = sorted({mode.frequency_mhz for mode in satellite.spacecraft.transmitter})
    columns = {
        "time_utc": sky.clock.iso(time_s),
        "azimuth_deg": view.azimuth_deg,
        "elevation_deg": view.elevation_deg + lift_deg,
        "refraction_deg": lift_deg,
        "range_km": view.range_km,
        "range_rate_km_s": view.range_rate_km_s,
        **{
            f"doppler_at_{plain_number(mhz)}_mhz_hz": doppler_hz(view.range_rate_km_s, mhz) for mhz in frequencies_mhz
        },
    }  # fmt: skip
    header = [
        *_header(mission, sky, aim, step_s=step_s, refracted=refracted),
        *_north(mission, sky, aim),
        *header,
    ]
    return "".join(f"# {line}\n" for line in header).encode() + table_csv(pd.DataFrame(columns))


def _moments(sky: Sky, row: int, step_s: float) -> np.ndarray:
    """AOS, whole steps of UTC between, LOS [s after the start]."""
    aos_s, los_s, offset_s = sky.passes.aos_s[row], sky.passes.los_s[row], sky.clock.seconds_of_first_day
    first, last = np.ceil((aos_s + offset_s) / step_s), np.floor((los_s + offset_s) / step_s)
    return np.unique(np.concatenate([[aos_s], np.arange(first, last + 1) * step_s - offset_s, [los_s]]))


def _north(mission: Mission, sky: Sky, aim: Aim) -> list[str]:
    """When the azimuth passes from 360 to 0 or back, for mounts whose cables do not turn without end."""
    aos_s, los_s = sky.passes.aos_s[aim.row], sky.passes.los_s[aim.row]
    time_s = np.linspace(aos_s, los_s, int(np.clip(los_s - aos_s, 2, MOST_LOOKS)))
    state = sky.track(aim.session.satellite).at(time_s)
    azimuth_deg = look(*state, mission.station(aim.session.station)).azimuth_deg
    return [
        f"azimuth crosses north {'over east, 360 to 0' if azimuth_deg[k] > 180.0 else 'over west, 0 to 360'}, at"
        f" {sky.clock.iso(time_s[k])[:19]}Z"
        for k in np.flatnonzero(np.abs(np.diff(azimuth_deg)) > 180.0)
    ]


def _header(mission: Mission, sky: Sky, aim: Aim, *, step_s: float, refracted: bool) -> list[str]:
    session, satellite = aim.session, mission.satellite(aim.session.satellite)
    mode = satellite.spacecraft.mode(session.mode)
    angles = (
        "elevation lifted by refraction (ITU-R P.834); take off refraction_deg for the geometric angle"
        if refracted
        else "geometric, no refraction"
    )
    until = "no limit, the dish follows the signal" if aim.useful_until is None else _iso(aim.useful_until)
    stale = ["ELEMENTS TOO OLD for this beam, written all the same since it was asked for"] if aim.is_stale(sky) else []
    lines = [
        f"pointing of {neutral(session.station)} at {neutral(session.satellite)}, pass {session.pass_id}",
        f"mode: {session.mode}, {plain_number(mode.frequency_mhz)} MHz, {mode.polarisation}",
        f"transmitter on: {sky.clock.iso(session.tx_on_s)}, off: {sky.clock.iso(session.tx_off_s)}",
        f"element epoch: {_iso(satellite.elements.epoch)}, useful until: {until}",
        *stale,
        f"angles: {angles}; azimuth from true north over east; no light time",
        "doppler: received less sent frequency, first order; range rate positive as the satellite goes away",
        f"step: {step_s:g} s",
        *(f"caution: {caution}" for caution in CAUTIONS),
    ]
    return [_harmless(" ".join(line.splitlines())) for line in lines]


def _harmless(line: str) -> str:
    """A header line that no spreadsheet runs: it is no CSV, so a name's own commas would begin a cell."""
    return AFTER_A_SEPARATOR.sub(r"\1'", line)


def _iso(moment: datetime) -> str:
    return str(utc_text([moment])[0])

"""Pass cards: one A4 page per contact for the person at the station, as PDF and as HTML."""

import base64
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import pandas as pd

from planner.charts.skytrack import skytrack_figure
from planner.errors import InputError
from planner.export.card_page import card_figure
from planner.export.commands import carried_by
from planner.export.contacts import (
    as_written,
    azimuth_text,
    clock_text,
    distinct,
    file_name,
    plain_number,
    schedule_issue,
    utc_text,
)
from planner.export.html import card_html
from planner.export.pointing import useful_until
from planner.export.render import pdf_bytes, png_bytes
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.sky import Sky
from planner.sky.aging import timing_error_s
from planner.sky.samples import doppler_hz
from planner.sky.sites import Look, look

SIGMAS = 2.0  # of timing error that a station waits for before it searches
CAUTIONS = (
    "Planning aid. The flight rules, the transmitter's licence and its flux limits, and licensed practice come first.",
    "The antenna moves by remote control: nobody at or in front of it; keep to the station's exposure limits.",
)
NO_BREAK = "\u00a0"
PICTURE_IN, PICTURE_DPI = (3.1, 3.5), 220  # of the sky on the page for a browser, as large as it is printed
Rows = tuple[tuple[str, str], ...]
Moments = tuple[tuple[str, str, str, str], ...]


@dataclass(frozen=True)
class Card:
    """What a card says, in words.

    `times` are (moment, time, azimuth, elevation), `radio` (label, text) rows, `steps` and `cautions` lines;
    `reference` says which pass it is and in which issue of the schedule; `carried` are the contacts whose commands go
    up in this one.
    """

    title: str
    subtitle: str
    reference: str
    times: Moments
    radio: Rows
    search_after: str
    steps: tuple[str, ...]
    cautions: tuple[str, ...]
    footer: str
    carried: tuple[str, ...]
    session: Session


def card_files(
    mission: Mission, sky: Sky, contacts: pd.DataFrame, issue: str | None = None
) -> Iterator[tuple[str, bytes]]:
    """(file name, content) of a PDF and an HTML card for every contact, made as they are asked for.

    Parameters
    ----------
    contacts : DataFrame with the columns of contacts.csv
    issue : which schedule they are, the table's own `schedule_issue` when None

    Raises
    ------
    InputError : a contact on no pass of `sky`
    """
    issue, shown = issue or schedule_issue(contacts), as_written(contacts)
    names = distinct(file_name("card", *key) for key in zip(shown["pass_id"], shown["mode"], strict=True))
    row: Any  # its columns are attributes
    for name, row in zip(names, shown.itertuples(), strict=True):
        card = make_card(mission, sky, row, issue, carried_by(shown, row))
        yield f"{name}.pdf", pdf_bytes([card_figure(card, mission, sky)], f"{card.title}, {card.subtitle}")
        sky_dome = skytrack_figure(mission, sky, row.pass_id, session=card.session, size_in=PICTURE_IN, titled=False)
        picture = base64.b64encode(png_bytes(sky_dome, dpi=PICTURE_DPI)).decode()
        yield f"{name}.html", card_html(card, picture).encode()


def make_card(mission: Mission, sky: Sky, row, issue: str = "", carried: Sequence[str] = ()) -> Card:
    """The words of one card.

    `row` is a row of the contacts' table as a named tuple, `issue` names the schedule, `carried` are from `carried_by`.
    """
    session = _session(mission, sky, row)
    on = mission.start + timedelta(seconds=session.tx_on_s)
    epoch = mission.satellite(session.satellite).elements.epoch
    until = useful_until(mission, sky, session)
    wait_s, late_s = _patience_s(mission, sky, session)
    search = clock_text(on + timedelta(seconds=wait_s))
    return Card(
        title=f"{session.satellite} over {session.station}",
        subtitle=f"{on:%A %d %B %Y}, {session.mode}",
        reference=f"Pass {session.pass_id}" + (f", schedule issue {issue}" if issue else ""),
        times=_times(mission, sky, row, session),
        radio=(*_radio(mission, sky, row, session), *_preparation(row, epoch, until)),
        search_after=f"No lock {wait_s:.0f} s after the transmitter comes on, at {search}?",
        steps=_steps(mission, sky, row, session, wait_s, late_s),
        cautions=(*_own_cautions(sky, row, session, until), *CAUTIONS),
        footer="All times UTC, to the nearest second. Azimuths from true north over east; elevations geometric, without"
        " refraction. Margin, data and battery as planned.",
        carried=tuple(carried),
        session=session,
    )


def outdated_contacts(mission: Mission, sky: Sky, contacts: pd.DataFrame) -> frozenset[str]:
    """Ids of the contacts by whose end the present elements no longer point the dish."""
    sessions = {str(row.contact_id): _session(mission, sky, row) for row in contacts.itertuples()}
    return frozenset(
        name for name, session in sessions.items() if _outlived(sky, session, useful_until(mission, sky, session))
    )


def _outlived(sky: Sky, session: Session, until: datetime | None) -> bool:
    return until is not None and sky.clock.datetime(session.tx_off_s) > until


def _own_cautions(sky: Sky, row, session: Session, until: datetime | None) -> list[str]:
    """What this contact's row warns of, and elements that will be too old by then."""
    said = [] if pd.isna(row.cautions) or not row.cautions else str(row.cautions).split("; ")
    if until is not None and _outlived(sky, session, until):
        said.append(f"Take newer elements before this pass: the present ones point this dish only until {_iso(until)}.")
    return said


def _session(mission: Mission, sky: Sky, row) -> Session:
    if row.pass_id not in set(sky.passes.pass_id):
        raise InputError(f"{row.pass_id}: must be a pass in the span of the mission")
    on_s, off_s = (
        (datetime.fromisoformat(str(text)) - mission.start).total_seconds()
        for text in utc_text([row.tx_on_utc, row.tx_off_utc])
    )
    return Session(on_s, off_s, row.satellite, row.station, row.mode, row.pass_id)


def _times(mission: Mission, sky: Sky, row, session: Session) -> Moments:
    """What happens when, with the direction the dish looks in."""
    passes = sky.passes
    k = int(np.flatnonzero(passes.pass_id == row.pass_id)[0])
    warm = datetime.fromisoformat(str(utc_text([row.power_on_utc])[0]))
    stated = {  # digits of the contacts' table, so that whatever is made from it tells the same
        "AOS, rises": {"azimuth_deg": row.aos_azimuth_deg},
        "TCA, highest": {"elevation_deg": row.max_elevation_deg},
        "LOS, sets": {"azimuth_deg": row.los_azimuth_deg},
    }
    moments = [
        ("Transmitter warms up", sky.clock.seconds(warm)),
        ("AOS, rises", passes.aos_s[k]),
        ("Transmitter on", session.tx_on_s),
        ("TCA, highest", passes.tca_s[k]),
        ("Transmitter off", session.tx_off_s),
        ("LOS, sets", passes.los_s[k]),
    ]

    def direction(label: str, time_s: float) -> tuple[str, str]:
        """Azimuth and elevation; nothing while the satellite is down."""
        if not passes.aos_s[k] <= time_s <= passes.los_s[k]:
            return "", ""
        seen = _look(mission, sky, session, time_s)
        told = {"azimuth_deg": seen.azimuth_deg[0], "elevation_deg": seen.elevation_deg[0]} | stated.get(label, {})
        return f"{azimuth_text(float(told['azimuth_deg']), 1)}°", f"{told['elevation_deg']:.1f}°"

    return tuple(
        (label, clock_text(sky.clock.datetime(time_s)), *direction(label, time_s))
        for label, time_s in sorted(moments, key=lambda moment: moment[1])
    )


def _look(mission: Mission, sky: Sky, session: Session, time_s: float) -> Look:
    """What the dish of a session sees at a moment; arrays (1,)."""
    return look(*sky.track(session.satellite).at(np.array([time_s])), mission.station(session.station))


def _radio(mission: Mission, sky: Sky, row, session: Session) -> Rows:
    coding = ",  ".join(_coding(segment) for segment in str(row.modcods).split())
    return (
        ("Frequency sent", f"{plain_number(row.frequency_mhz)} MHz"),
        ("Doppler", _doppler_text(mission, sky, session)),
        ("Polarisation, rate", f"{row.polarisation}, {plain_number(row.symbol_rate_mbaud)} Mbaud"),
        ("MODCOD from", coding),
        (
            "Expected margin",
            f"{row.min_margin_db:.2f} dB or more at {mission.policy.availability_pct:g} % availability",
        ),
        ("Data", f"{row.volume_mbit:,.0f} Mbit at that availability, {row.expected_volume_mbit:,.0f} Mbit on average"),
        ("Battery", f"{row.soc_start_pct:.1f} % before, {row.soc_end_pct:.1f} % after, at the worst"),
    )


def _preparation(row, epoch: datetime, until: datetime | None) -> Rows:
    """What must be done before: elements, and the contact that carries the commands up."""
    serve = "the dish follows the signal" if until is None else f"they point this dish until {_iso(until)}"
    carrier = getattr(row, "commands_from", None)
    commands = (
        ()
        if carrier is None
        else (("Its own commands", f"go up in contact {carrier}" if carrier else "aboard at the start of the span"),)
    )
    return (("Element epoch", f"{_iso(epoch)}; {serve}"), *commands)


def _coding(segment: str) -> str:
    """`8PSK_3/4@2026-…T01:01:40.000Z` as `8PSK 3/4 01:01:40`, held together by no-break spaces."""
    name, _, since = segment.rpartition("@")
    if not name:
        return segment
    try:
        return f"{name.replace('_', NO_BREAK)}{NO_BREAK}{clock_text(since)}"
    except (ValueError, TypeError):
        return segment


def _modcod_at(row, moment: datetime) -> str:
    """The one on air at a moment, of the segments `NAME@SINCE` in their order."""
    segments = [segment.rpartition("@") for segment in str(row.modcods).split()]
    begun = [name for name, _, since in segments if name and datetime.fromisoformat(since) <= moment]
    return begun[-1].replace("_", NO_BREAK) if begun else "MODCOD as above"


def _doppler_khz(mission: Mission, sky: Sky, session: Session, time_s: float) -> float:
    seen = _look(mission, sky, session, time_s)
    mode = mission.satellite(session.satellite).spacecraft.mode(session.mode)
    return float(doppler_hz(seen.range_rate_km_s[0], mode.frequency_mhz)) / 1000


def _doppler_text(mission: Mission, sky: Sky, session: Session) -> str:
    on, off = (_doppler_khz(mission, sky, session, time_s) for time_s in (session.tx_on_s, session.tx_off_s))
    return f"{on:+.1f} to {off:+.1f} kHz while on air, received less sent"


def _patience_s(mission: Mission, sky: Sky, session: Session) -> tuple[float, float]:
    """How long to wait for lock, and how much the satellite may be early or late on fresh elements, both [s]."""
    late_s = _late_s(mission, sky, session, mission.policy.elements_refresh_days)
    mode = mission.satellite(session.satellite).spacecraft.mode(session.mode)
    return float(np.ceil(mode.acquisition_s + late_s)), late_s


def _late_s(mission: Mission, sky: Sky, session: Session, age_days: float) -> float:
    """By how much the satellite may be early or late on elements of that age."""
    states = sky.track(session.satellite).at(np.array([session.tx_on_s]))
    aging = mission.satellite(session.satellite).spacecraft.aging
    return SIGMAS * float(timing_error_s(aging, age_days, *states)[0])


def _steps(mission: Mission, sky: Sky, row, session: Session, wait_s: float, late_s: float) -> tuple[str, ...]:
    khz = _doppler_khz(mission, sky, session, session.tx_on_s + wait_s)
    mode = mission.satellite(session.satellite).spacecraft.mode(session.mode)
    age_days = mission.policy.elements_refresh_days
    off = clock_text(sky.clock.datetime(session.tx_off_s))
    epoch = mission.satellite(session.satellite).elements.epoch
    own_days = abs((sky.clock.datetime(session.tx_on_s) - epoch) / timedelta(days=1))
    own_late_s = _late_s(mission, sky, session, own_days)
    modcod = _modcod_at(row, sky.clock.datetime(session.tx_on_s + wait_s))
    return (
        f"Receiver: {mode.frequency_mhz * 1000 + khz:,.1f} kHz now ({khz:+.1f} kHz Doppler), {mode.polarisation},"
        f" {plain_number(mode.symbol_rate_mbaud)} Mbaud, {modcod}.",
        "Antenna: compare azimuth and elevation with the pointing table; refraction on or off as the table says.",
        f"Time: search along the track, {late_s:.1f} s either way (two sigma) with elements {age_days:g} d old,"
        f" {own_late_s:.1f} s with those of the epoch above ({own_days:.1f} d).",
        "Elements: take the newest set and make the pointing table anew if the epoch above is older than that.",
        f"Still nothing: keep on the track until {off}, when the satellite switches off by itself; then tell"
        " the flight team, so that this contact's data are planned again.",
    )


def _iso(moment: datetime) -> str:
    return f"{moment.astimezone(UTC):%Y-%m-%d %H:%M:%S}"

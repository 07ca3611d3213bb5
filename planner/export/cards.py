"""Pass cards: one A4 page per contact for the person at the station, as PDF and as HTML."""

import base64
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import pandas as pd

from planner.charts.skytrack import skytrack_figure
from planner.errors import InputError
from planner.export.card_page import card_figure
from planner.export.contacts import file_name, utc_text
from planner.export.html import card_html
from planner.export.pointing import useful_until
from planner.export.render import pdf_bytes, png_bytes
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.sky import Sky
from planner.sky.aging import timing_error_s
from planner.sky.samples import doppler_hz

SIGMAS = 2.0  # of timing error that a station waits for before it searches
CAUTIONS = (
    "Planning aid. The flight rules, the transmitter's licence and its flux limits, and licensed practice come first.",
    "The antenna moves by remote control: nobody at or in front of it; keep to the station's exposure limits.",
)
NO_BREAK = "\u00a0"
Rows = tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class Card:
    """What a card says, in words; `times` and `radio` are (label, text) rows, `steps` and `cautions` lines."""

    title: str
    subtitle: str
    times: Rows
    radio: Rows
    search_after: str
    steps: tuple[str, ...]
    cautions: tuple[str, ...]
    footer: str
    session: Session


def card_files(mission: Mission, sky: Sky, contacts: pd.DataFrame) -> Iterator[tuple[str, bytes]]:
    """(file name, content) of a PDF and an HTML card for every contact, one by one.

    Parameters
    ----------
    contacts : DataFrame with the columns of contacts.csv

    Raises
    ------
    InputError : a contact on no pass of `sky`
    """
    row: Any  # its columns are attributes
    for row in contacts.itertuples():
        card = make_card(mission, sky, row)
        name = file_name("card", row.pass_id, row.mode)
        yield f"{name}.pdf", pdf_bytes([card_figure(card, mission, sky)], f"{card.title}, {card.subtitle}")
        picture = png_bytes(skytrack_figure(mission, sky, row.pass_id, session=card.session), dpi=90)
        yield f"{name}.html", card_html(card, base64.b64encode(picture).decode()).encode()


def make_card(mission: Mission, sky: Sky, row) -> Card:
    """The words of one card; `row` is a row of the contacts' table as a named tuple."""
    session = _session(mission, sky, row)
    on = mission.start + timedelta(seconds=session.tx_on_s)
    epoch = mission.satellite(session.satellite).elements.epoch
    until = useful_until(mission, sky, session)
    serve = "the dish follows the signal" if until is None else f"these point this dish until {_iso(until)}"
    wait_s, late_s = _patience_s(mission, sky, session)
    return Card(
        title=f"{session.satellite} over {session.station}",
        subtitle=f"{on:%A %d %B %Y}, {session.mode}, pass {session.pass_id}",
        times=_times(sky, row, session),
        radio=_radio(mission, sky, row, session),
        search_after=f"No lock {wait_s:.0f} s after the transmitter comes on, at {_clock(on, wait_s)}?",
        steps=_steps(mission, sky, session, wait_s, late_s),
        cautions=(*_own_cautions(sky, row, session, until), *CAUTIONS),
        footer=f"Made from elements of epoch {_iso(epoch)}; {serve}. Elevations are geometric. All times UTC.",
        session=session,
    )


def _own_cautions(sky: Sky, row, session: Session, until: datetime | None) -> list[str]:
    """What this contact's row warns of, and elements that will be too old by then."""
    said = [] if pd.isna(row.cautions) or not row.cautions else str(row.cautions).split("; ")
    if until is not None and sky.clock.datetime(session.tx_off_s) > until:
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


def _times(sky: Sky, row, session: Session) -> Rows:
    """What happens when, with the direction the dish looks in."""
    passes = sky.passes
    k = int(np.flatnonzero(passes.pass_id == row.pass_id)[0])
    warm = datetime.fromisoformat(str(utc_text([row.power_on_utc])[0]))
    moments = [
        ("Transmitter warms up", sky.clock.seconds(warm)),
        ("AOS, rises", passes.aos_s[k]),
        ("Transmitter on", session.tx_on_s),
        ("Highest", passes.tca_s[k]),
        ("Transmitter off", session.tx_off_s),
        ("LOS, sets", passes.los_s[k]),
    ]
    return tuple(
        (label, f"{_clock(sky.clock.datetime(time_s))}   {_direction(sky, k, time_s)}".rstrip())
        for label, time_s in sorted(moments, key=lambda moment: moment[1])
    )


def _direction(sky: Sky, row: int, time_s: float) -> str:
    """Azimuth and elevation; nothing while the satellite is down."""
    own = sky.samples.of(row)
    if not sky.passes.aos_s[row] <= time_s <= sky.passes.los_s[row]:
        return ""
    azimuth = np.interp(time_s, sky.samples.time_s[own], np.unwrap(sky.samples.azimuth_deg[own], period=360.0)) % 360
    return f"az {azimuth:5.1f}°  el {np.interp(time_s, sky.samples.time_s[own], sky.samples.elevation_deg[own]):4.1f}°"


def _radio(mission: Mission, sky: Sky, row, session: Session) -> Rows:
    coding = "  ".join(_coding(segment) for segment in str(row.modcods).split())
    return (
        ("Frequency", f"{row.frequency_mhz:g} MHz sent, Doppler {_doppler_text(mission, sky, session)}"),
        ("Polarisation, rate", f"{row.polarisation}, {row.symbol_rate_mbaud:g} Mbaud"),
        ("MODCOD from", coding),
        (
            "Expected margin",
            f"{row.min_margin_db:.1f} dB or more at {mission.policy.availability_pct:g} % availability",
        ),
        ("Data", f"{row.volume_mbit:,.0f} Mbit at that availability, {row.expected_volume_mbit:,.0f} Mbit on average"),
        ("Battery", f"{row.soc_start_pct:.1f} % before, {row.soc_end_pct:.1f} % after, at the worst"),
    )


def _coding(segment: str) -> str:
    """`8PSK_3/4@2026-…T01:01:40.000Z` as `8PSK 3/4 01:01:40`, held together by no-break spaces."""
    name, _, since = segment.rpartition("@")
    return f"{name.replace('_', NO_BREAK)}{NO_BREAK}{since[11:19]}".strip() if name else segment


def _doppler_khz(mission: Mission, sky: Sky, session: Session, time_s: float) -> float:
    own = sky.samples.of(int(np.flatnonzero(sky.passes.pass_id == session.pass_id)[0]))
    rate_km_s = np.interp(time_s, sky.samples.time_s[own], sky.samples.range_rate_km_s[own])
    mode = mission.satellite(session.satellite).spacecraft.mode(session.mode)
    return float(doppler_hz(rate_km_s, mode.frequency_mhz)) / 1000


def _doppler_text(mission: Mission, sky: Sky, session: Session) -> str:
    on, off = (_doppler_khz(mission, sky, session, time_s) for time_s in (session.tx_on_s, session.tx_off_s))
    return f"{on:+.1f} to {off:+.1f} kHz"


def _patience_s(mission: Mission, sky: Sky, session: Session) -> tuple[float, float]:
    """How long to wait for lock, and how much the satellite may be early or late, both [s]."""
    satellite = mission.satellite(session.satellite)
    states = sky.track(session.satellite).at(np.array([session.tx_on_s]))
    age_days = mission.policy.elements_refresh_days
    late_s = SIGMAS * float(timing_error_s(satellite.spacecraft.aging, age_days, *states)[0])
    return float(np.ceil(satellite.spacecraft.mode(session.mode).acquisition_s + late_s)), late_s


def _steps(mission: Mission, sky: Sky, session: Session, wait_s: float, late_s: float) -> tuple[str, ...]:
    khz = _doppler_khz(mission, sky, session, session.tx_on_s + wait_s)
    mode = mission.satellite(session.satellite).spacecraft.mode(session.mode)
    age_days = mission.policy.elements_refresh_days
    off = sky.clock.datetime(session.tx_off_s)
    return (
        f"Receiver: {mode.frequency_mhz * 1000 + khz:,.1f} kHz now ({khz:+.1f} kHz Doppler), {mode.polarisation},"
        f" {mode.symbol_rate_mbaud:g} Mbaud, first MODCOD as above.",
        "Antenna: compare azimuth and elevation with the pointing table; refraction on or off as the table says.",
        f"Time: with elements {age_days:g} d old the satellite may be {late_s:.1f} s early or late; search along the"
        f" track, {late_s:.1f} s either way.",
        "Elements: take the newest set and make the pointing table anew if the epoch below is older than that.",
        f"Still nothing: keep on the track until {_clock(off)}, when the satellite switches off by itself; then tell"
        " the flight team, so that this contact's data are planned again.",
    )


def _clock(moment: datetime, later_s: float = 0.0) -> str:
    return f"{moment.astimezone(UTC) + timedelta(seconds=later_s + 0.5):%H:%M:%S}"


def _iso(moment: datetime) -> str:
    return f"{moment.astimezone(UTC):%Y-%m-%d %H:%M:%S}"

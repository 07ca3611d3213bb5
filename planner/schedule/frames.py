"""What a set of sessions means, as the public tables: contacts, passes, battery, recorder."""

from collections import Counter
from collections.abc import Sequence

import numpy as np
import pandas as pd

from planner.link.antenna import ground_dish, half_power_beam_deg
from planner.mission.contacts import Session
from planner.mission.names import slug
from planner.schedule.checks import needs_upload, upload_contact
from planner.schedule.flown import Flown
from planner.sky import aging
from planner.sky.samples import doppler_hz
from planner.sky.sites import look, station_position_km
from planner.units import DAY_S

NEAR_S = 30.0  # a session that ends this near to where the mount is too slow ends because of it
CONTACT_COLUMNS = (
    "contact_id", "pass_id", "satellite", "station", "mode", "aos_utc", "tx_on_utc", "tx_off_utc", "los_utc",
    "duration_s", "aos_azimuth_deg", "los_azimuth_deg", "max_elevation_deg", "min_margin_db", "volume_mbit",
    "energy_wh", "soc_start_pct", "soc_min_pct", "soc_end_pct", "max_doppler_khz", "cautions", "power_on_utc",
    "frequency_mhz", "symbol_rate_mbaud", "polarisation", "modcods", "expected_volume_mbit",
    "elements_newer_than_utc", "commands_from",
)  # fmt: skip


def contact_id(session: Session) -> str:
    """Names a contact for good: the pass and the mode."""
    return f"{session.pass_id}.{slug(session.mode)}"


def contacts_frame(flown: Flown, sessions: Sequence[Session] | None = None) -> pd.DataFrame:
    """One row a contact (of these sessions, or of all), in their order."""
    carried = Counter(upload_contact(flown, session) for session in flown.sessions if needs_upload(flown, session))
    rows = [
        _contact(flown, session, carried[session]) for session in (flown.sessions if sessions is None else sessions)
    ]
    return pd.DataFrame(rows, columns=list(CONTACT_COLUMNS))


def _contact(flown: Flown, session: Session, carries: int) -> dict:
    """One row; the session `carries` the commands of so many others up."""
    week, iso = flown.week, flown.week.sky.clock.iso
    passes, row = week.sky.passes, week.row_of[session.pass_id]
    transmitter = week.mission.satellite(session.satellite).spacecraft.mode(session.mode)
    profile = flown.coding[session]
    span = session.tx_on_s, session.tx_off_s
    offered = profile.volume_mbit(*span)
    volume = flown.volume_mbit[session]
    share = volume / offered if offered > 0 else 0.0
    return {
        "contact_id": contact_id(session),
        "pass_id": session.pass_id,
        "satellite": session.satellite,
        "station": session.station,
        "mode": session.mode,
        "aos_utc": iso(passes.aos_s[row]),
        "tx_on_utc": iso(session.tx_on_s),
        "tx_off_utc": iso(session.tx_off_s),
        "los_utc": iso(passes.los_s[row]),
        "duration_s": session.duration_s,
        "aos_azimuth_deg": passes.aos_azimuth_deg[row],
        "los_azimuth_deg": passes.los_azimuth_deg[row],
        "max_elevation_deg": passes.max_elevation_deg[row],
        "min_margin_db": profile.lowest_margin_db(*span),
        "volume_mbit": volume,
        **_energy(flown, session),
        "max_doppler_khz": _max_doppler_khz(flown, session, row),
        "cautions": "; ".join(
            [
                *cautions(flown, session, row),
                *([f"carries up the commands of {carries} contact{'s' * (carries > 1)}"] if carries else []),
            ]
        ),
        "power_on_utc": iso(session.tx_on_s - transmitter.warmup_s),
        "frequency_mhz": transmitter.frequency_mhz,
        "symbol_rate_mbaud": transmitter.symbol_rate_mbaud,
        "polarisation": transmitter.polarisation,
        "modcods": " ".join(f"{name.replace(' ', '_')}@{iso(since_s)}" for name, since_s in profile.segments(*span)),
        "expected_volume_mbit": profile.expected_volume_mbit(*span) * share,
        "elements_newer_than_utc": _oldest_epoch(flown, session, row),
        "commands_from": _commands_from(flown, session),
    }


def _max_doppler_khz(flown: Flown, session: Session, row: int) -> float:
    """Largest Doppler while on air, exact at both ends, where a straight line between samples lies below it."""
    week, span = flown.week, (session.tx_on_s, session.tx_off_s)
    transmitter = week.mission.satellite(session.satellite).spacecraft.mode(session.mode)
    ends = look(*week.sky.track(session.satellite).at(np.array(span)), week.mission.station(session.station))
    ends_khz = doppler_hz(ends.range_rate_km_s, transmitter.frequency_mhz) / 1e3
    return float(np.max(np.abs([*ends_khz, *week.along(row, session.mode, "doppler_khz", *span)])))


def _energy(flown: Flown, session: Session) -> dict:
    """Pessimistic charge before, lowest until the next session, after; and what the session's own loads draw."""
    series, power = flown.worst[session.satellite], flown.week.powers[session.satellite]
    draw = power.session_draw(session, "pessimistic")
    later = [s.tx_on_s for s in flown.of(session.satellite) if s.tx_on_s > session.tx_off_s]
    begin_s = float(draw.edges_s[0])
    until_s = later[0] if later else flown.week.mission.span_s
    return {
        "energy_wh": draw.own_wh,
        "soc_start_pct": float(series.soc_at_pct(begin_s)),
        "soc_min_pct": series.lowest(begin_s, until_s)[1],
        "soc_end_pct": float(series.soc_at_pct(draw.edges_s[-1])),
    }


def cautions(flown: Flown, session: Session, row: int) -> list[str]:
    """What an operator should know before flying this session."""
    week, span = flown.week, (session.tx_on_s, session.tx_off_s)
    said = []
    excess_db = week.along(row, session.mode, "flux_dbw_m2", *span) - week.along(
        row, session.mode, "flux_limit_dbw_m2", *span
    )
    if np.nanmax(excess_db, initial=-np.inf) > 0:
        said.append(
            f"flux {np.nanmax(excess_db):.2f} dB above the RR 21-4 limit"
            " (check the current Radio Regulations and your licence)"
        )
    samples = week.sky.samples.of(row)
    time_s, sun_deg = week.sky.samples.time_s[samples], week.sky.samples.sun_separation_deg[samples]
    on_air = (time_s >= span[0]) & (time_s <= span[1])
    beam_deg = _ground_beam_deg(flown, session)
    if np.any(sun_deg[on_air] < beam_deg):
        said.append(f"Sun within {np.min(sun_deg[on_air]):.1f} deg of the dish axis")
    lost = time_s[~week.sky.samples.trackable[samples]]
    if len(lost) and lost[0] <= span[1] + NEAR_S and lost[-1] >= span[0] - NEAR_S:
        begin, end = (week.sky.clock.iso(float(moment_s))[11:19] for moment_s in (lost[0], lost[-1]))
        when = f"at {begin}" if begin == end else f"from {begin} to {end}"
        said.append(f"mount too slow {when}, near the zenith")
    if week.sky.passes.truncated[row]:
        said.append(f"pass cut by the span's {week.sky.passes.truncated[row]}")
    return said


def _ground_beam_deg(flown: Flown, session: Session) -> float:
    transmitter = flown.week.mission.satellite(session.satellite).spacecraft.mode(session.mode)
    dish = ground_dish(flown.week.mission.station(session.station).antenna)
    return half_power_beam_deg(dish, transmitter.frequency_mhz * 1e6)


def _oldest_epoch(flown: Flown, session: Session, row: int) -> str:
    """The oldest element epoch with which the dish keeps the satellite inside its half-power beam.

    Never older than the policy allows; a dish that follows the signal asks for no more than that.
    """
    week = flown.week
    oldest_days = week.mission.policy.elements_max_age_days
    if week.mission.station(session.station).antenna.autotrack:
        return week.sky.clock.iso(session.tx_on_s - oldest_days * DAY_S)
    samples = week.sky.samples
    inside = samples.of(row)
    age_days = aging.oldest_age_days(
        week.mission.satellite(session.satellite).spacecraft.aging,
        _ground_beam_deg(flown, session),
        samples.position_km[inside],
        samples.velocity_km_s[inside],
        station_position_km(week.mission.station(session.station)),
    )
    return week.sky.clock.iso(session.tx_on_s - min(age_days, oldest_days) * DAY_S)


def _commands_from(flown: Flown, session: Session) -> str:
    """The contact that carries this one's commands up; empty when they are aboard before the span."""
    if not needs_upload(flown, session):
        return ""
    carrier = upload_contact(flown, session)
    return "" if carrier is None else contact_id(carrier)


def battery_frame(flown: Flown) -> pd.DataFrame:
    """Rows hold until the next row; nominal beside pessimistic, on the edges of both."""
    parts = []
    for satellite, worst in flown.worst.items():
        series = flown.nominal[satellite]
        at = np.clip(np.searchsorted(worst.time_s, series.time_s, side="right") - 1, 0, len(worst.time_s) - 1)
        columns = {
            "satellite": satellite,
            "time_utc": flown.week.sky.clock.iso(series.time_s),
            "soc_pct": series.soc_pct,
            "soc_worst_pct": worst.soc_at_pct(series.time_s),
            "cell_v": series.cell_v,
            "worst_cell_v": worst.cell_v[at],
        }
        columns |= {
            name: getattr(series, name)
            for name in ("bus_v", "cell_a", "battery_c", "array_w", "load_w", "loss_w", "spill_w")
        }
        columns |= {"sunlit": np.where(series.sunlit, "yes", "no"), "attitude": series.attitude}
        parts.append(pd.DataFrame(columns))
    return pd.concat(parts, ignore_index=True)


def recorder_frame(flown: Flown) -> pd.DataFrame:
    """Stored data, and what was produced, delivered and lost since the start."""
    parts = [
        pd.DataFrame(
            {
                "satellite": satellite,
                "time_utc": flown.week.sky.clock.iso(series.time_s),
                **{
                    name: getattr(series, name)
                    for name in ("stored_mbit", "produced_mbit", "delivered_mbit", "lost_mbit")
                },
            }
        )
        for satellite, series in flown.recorder.items()
    ]
    return pd.concat(parts, ignore_index=True)

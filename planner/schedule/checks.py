"""Every rule that a set of sessions must keep, checked on times alone: the gate for a plan, the whole of an audit."""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from planner.mission.contacts import Session
from planner.power.limits import Breach
from planner.schedule.flown import Flown
from planner.schedule.uplinks import SAME_MOMENT_S, carrier_of, ends_after_first_commands
from planner.schedule.windows import turning_s
from planner.units import DAY_S, HOUR_S


@dataclass(frozen=True)
class Fault:
    """A rule that is broken: by which session (None: by the week), when, and by how much; `text` says it whole."""

    rule: str
    session: Session | None
    time_s: float
    value: float
    bound: float
    unit: str
    text: str
    satellite: str = ""  # whose battery, where it is one's


def find_faults(flown: Flown) -> list[Fault]:
    """All faults, in order of time."""
    faults = [*_single(flown), *_pairs(flown), *_policy(flown), *_battery(flown)]
    return sorted(faults, key=lambda fault: fault.time_s)


def _single(flown: Flown) -> Iterator[Fault]:
    """What is wrong with a session on its own."""
    for session in flown.sessions:
        row = flown.week.row_of.get(session.pass_id)
        if row is None:
            text = f"no pass has the id {session.pass_id!r} in this span"
            yield Fault("pass", session, session.tx_on_s, np.nan, np.nan, "", text)
        elif (row, session.mode) not in flown.week.place_of or flown.week.sky.passes.station[row] != session.station:
            text = f"pass {session.pass_id} is not one of {session.satellite} over {session.station}"
            yield Fault("pass", session, session.tx_on_s, np.nan, np.nan, "", text)
        else:
            outside = list(_inside_pass(flown, session, row))
            yield from outside
            yield from _on_air(flown, session, asks_margin=not outside)


def _inside_pass(flown: Flown, session: Session, row: int) -> Iterator[Fault]:
    passes, iso = flown.week.sky.passes, flown.week.sky.clock.iso
    aos_s, los_s = float(passes.aos_s[row]), float(passes.los_s[row])
    if session.tx_on_s < aos_s - SAME_MOMENT_S:
        early_s = aos_s - session.tx_on_s
        text = f"tx_on_utc {iso(session.tx_on_s)} is {early_s:.1f} s before AOS {iso(aos_s)}"
        yield Fault("inside the pass", session, session.tx_on_s, session.tx_on_s - aos_s, 0.0, "s", text)
    if session.tx_off_s > los_s + SAME_MOMENT_S:
        late_s = session.tx_off_s - los_s
        text = f"tx_off_utc {iso(session.tx_off_s)} is {late_s:.1f} s after LOS {iso(los_s)}"
        yield Fault("inside the pass", session, session.tx_off_s, late_s, 0.0, "s", text)


def _on_air(flown: Flown, session: Session, asks_margin: bool) -> Iterator[Fault]:
    """Length, margin (where the whole session lies in the pass), opening hours and shifts of a session on a pass."""
    policy = flown.week.mission.policy
    if session.duration_s < policy.min_session_s - SAME_MOMENT_S:
        text = f"{session.duration_s:.1f} s on air, the policy asks {policy.min_session_s:g} s"
        yield Fault("shortest session", session, session.tx_on_s, session.duration_s, policy.min_session_s, "s", text)
    profile = flown.coding[session]
    if asks_margin and not _covered(profile.windows_s(), session):
        lowest_db = profile.lowest_margin_db(session.tx_on_s, session.tx_off_s)
        text = f"the link is not usable all through the transmission: {_unusable(flown, session, lowest_db)}"
        yield Fault("link margin", session, session.tx_on_s, lowest_db, policy.link_margin_db, "dB", text)
    if not _covered(flown.week.open_s[session.station], session):
        text = f"{session.station} is closed during the transmission"
        yield Fault("opening hours", session, session.tx_on_s, np.nan, np.nan, "", text)
    if not _covered(flown.week.shifts_s, session):
        text = "it lies outside the operators' shifts (policy.shifts)"
        yield Fault("operators' shifts", session, session.tx_on_s, np.nan, np.nan, "", text)
    satellite = flown.week.mission.satellite(session.satellite)
    if not _covered(turning_s(flown.week, satellite, satellite.spacecraft.mode(session.mode)), session):
        text = "it turns the satellite while the payload keeps the idle attitude (pointing.no_slew_windows)"
        yield Fault("no slew", session, session.tx_on_s, np.nan, np.nan, "", text)
    yield from _commands(flown, session)


def _unusable(flown: Flown, session: Session, lowest_db: float) -> str:
    """Why nothing can be sent at some moment of a session inside its pass."""

    def along(column: str) -> np.ndarray:
        row = flown.week.row_of[session.pass_id]
        return flown.week.along(row, session.mode, column, session.tx_on_s, session.tx_off_s)

    policy, found = flown.week.mission.policy, []
    if not along("trackable").all():
        found.append(f"the mount of {session.station} is too slow")
    excess_db = np.max(along("flux_dbw_m2") - along("flux_limit_dbw_m2"))
    if policy.enforce_flux_limit and excess_db > 0:
        found.append(f"power flux-density is above its enforced limit by up to {excess_db:.2f} dB")
    if lowest_db < policy.link_margin_db or not found:
        found.append(f"lowest margin {lowest_db:.2f} dB, the policy asks {policy.link_margin_db:g} dB")
    return "; ".join(found)


def _covered(windows: list[tuple[float, float]], session: Session) -> bool:
    return any(a - SAME_MOMENT_S <= session.tx_on_s and session.tx_off_s <= b + SAME_MOMENT_S for a, b in windows)


def upload_contact(flown: Flown, session: Session) -> Session | None:
    """The latest contact that could carry a session's commands up in time (or did, where they are aboard)."""
    since_s = -np.inf if session in flown.aboard.sessions else flown.aboard.since_s
    return carrier_of(flown.week.mission, flown.of(session.satellite), session, since_s)


def needs_upload(flown: Flown, session: Session) -> bool:
    """Whether the session ends after what was commanded before the span, or is new to what is aboard."""
    if flown.week.mission.policy.upload_lead_h is None:
        return False
    is_new = flown.aboard.since_s > -np.inf and session not in flown.aboard.sessions
    return is_new or ends_after_first_commands(flown.week.mission, session)


def _commands(flown: Flown, session: Session) -> Iterator[Fault]:
    lead_h, reach_h = flown.week.mission.policy.upload_lead_h, flown.week.mission.policy.upload_reach_h
    if lead_h is None or session in flown.aboard.sessions or not needs_upload(flown, session):
        return
    if upload_contact(flown, session) is None:
        since_s = flown.aboard.since_s
        since = f" and after {flown.week.sky.clock.iso(since_s)}" if since_s > -np.inf else ""
        text = f"no contact with uplink between {reach_h:g} h and {lead_h:g} h before it{since} can carry its commands"
        yield Fault("commands aboard", session, session.tx_on_s, np.nan, lead_h, "h", text)


def _pairs(flown: Flown) -> Iterator[Fault]:
    """Sessions too close to one another, on one satellite or on one station."""
    mission = flown.week.mission
    for name in [satellite.name for satellite in mission.satellites]:
        yield from _too_much_per_orbit(flown, name)
        busy_s = _busy_s(flown, name)
        for first, second in combinations(flown.of(name), 2):
            craft = mission.satellite(name).spacecraft
            if first.pass_id != second.pass_id or not craft.may_overlap(first.mode, second.mode):
                turning_s = busy_s[first][1] + busy_s[second][0]
                yield from _too_close(flown, first, second, f"satellite {name}", turning_s)
    for name in [station.name for station in mission.stations]:
        there = [session for session in flown.sessions if session.station == name]
        for first, second in combinations(there, 2):
            if first.satellite != second.satellite:
                yield from _too_close(flown, first, second, f"station {name}", 0.0)


def _too_close(flown: Flown, first: Session, second: Session, what: str, busy_s: float) -> Iterator[Fault]:
    """`busy_s` from the first's tx_off to the second's tx_on, or the policy's turnaround before its warm-up."""
    warmup_s = flown.week.mission.satellite(second.satellite).spacecraft.mode(second.mode).warmup_s
    pause_s = second.tx_on_s - warmup_s - first.tx_off_s
    least_s = max(flown.week.mission.policy.turnaround_s, busy_s - warmup_s)
    if pause_s < least_s - SAME_MOMENT_S:
        text = (
            f"{what}: {pause_s:.1f} s from tx_off of {first.pass_id} ({first.mode}) to power_on of {second.pass_id}"
            f" ({second.mode}), {least_s:.1f} s needed"
        )
        yield Fault("turnaround", second, second.tx_on_s, pause_s, least_s, "s", text)


def _busy_s(flown: Flown, satellite: str) -> dict[Session, tuple[float, float]]:
    """How long one satellite is busy before each session's tx_on, and after its tx_off."""
    own = flown.of(satellite)
    draws = flown.week.powers[satellite].session_draws(own) if own else []
    return {s: (s.tx_on_s - d.edges_s[0], d.edges_s[-1] - s.tx_off_s) for s, d in zip(own, draws, strict=True)}


def _too_much_per_orbit(flown: Flown, satellite: str) -> Iterator[Fault]:
    """Seconds on air of one mode from each of its starts to a revolution later."""
    orbit_s = flown.week.sky.track(satellite).period_s
    for session in flown.of(satellite):
        most_s = flown.week.mission.satellite(satellite).spacecraft.mode(session.mode).most_on_per_orbit_s
        if most_s is None:
            continue
        until_s = session.tx_on_s + orbit_s
        same = [s for s in flown.of(satellite) if s.mode == session.mode and session.tx_on_s <= s.tx_on_s < until_s]
        on_air_s = sum(min(s.tx_off_s, until_s) - s.tx_on_s for s in same)
        if on_air_s > most_s + SAME_MOMENT_S:
            text = f"{on_air_s:.1f} s of {session.mode} on air within one revolution, {most_s:g} s allowed"
            yield Fault("on air per orbit", session, session.tx_on_s, on_air_s, most_s, "s", text)


def _policy(flown: Flown) -> Iterator[Fault]:
    """Rules that speak of the week's contacts together."""
    mission, policy, iso = flown.week.mission, flown.week.mission.policy, flown.week.sky.clock.iso
    midnight_s = flown.week.sky.clock.midnight_s(np.arange(int(np.ceil(mission.days)) + 2))
    for satellite in mission.satellites:
        own = flown.of(satellite.name)
        for begin_s in midnight_s.tolist():
            today = [s for s in own if begin_s <= s.tx_on_s < begin_s + DAY_S]
            whole = begin_s >= 0 and begin_s + DAY_S <= mission.span_s
            most = policy.max_sessions_per_day
            if most is not None and len(today) > most:
                text = f"{satellite.name}: {len(today)} sessions on {iso(begin_s)[:10]}, the policy allows {most}"
                yield Fault("sessions a day", None, begin_s, len(today), most, "", text)
            if whole and policy.daily_contact_modes and not any(s.mode in policy.daily_contact_modes for s in today):
                modes = ", ".join(policy.daily_contact_modes)
                text = f"{satellite.name}: no contact in {modes} on {iso(begin_s)[:10]}, the policy asks one a day"
                yield Fault("daily contact", None, begin_s, 0, 1, "", text)
        if policy.longest_gap_h is not None:
            yield from _gaps(flown, satellite.name, own, policy.longest_gap_h * HOUR_S)
    if policy.cost_budget is not None and (cost := cost_of(flown)) > policy.cost_budget + 1e-6:
        text = f"station cost {cost:.2f} is above the budget {policy.cost_budget:g}"
        yield Fault("station budget", None, mission.span_s, cost, policy.cost_budget, "", text)


def _gaps(flown: Flown, satellite: str, own: tuple[Session, ...], longest_s: float) -> Iterator[Fault]:
    iso = flown.week.sky.clock.iso
    ends = [0.0, *(s.tx_off_s for s in own)]
    begins = [*(s.tx_on_s for s in own), flown.week.mission.span_s]
    for end_s, begin_s in zip(ends, begins, strict=True):
        if begin_s - end_s > longest_s + SAME_MOMENT_S:
            gap_h = (begin_s - end_s) / HOUR_S
            text = (
                f"{satellite}: {gap_h:.2f} h without contact from {iso(end_s)},"
                f" the policy allows {longest_s / HOUR_S:g} h"
            )
            yield Fault("longest gap", None, end_s, gap_h, longest_s / HOUR_S, "h", text)


def cost_of(flown: Flown) -> float:
    """Station cost of all sessions."""
    costs = [(flown.week.mission.station(s.station).cost, s) for s in flown.sessions]
    return float(sum(cost.per_pass + cost.per_minute * s.duration_s / 60 for cost, s in costs))


def _battery(flown: Flown) -> Iterator[Fault]:
    """Limits of battery and bus."""
    for satellite in flown.week.powers:
        for breach in flown.breaches(satellite):
            yield Fault(
                breach.limit,
                None if breach.limit == "floor risk" else session_at(flown, satellite, breach.time_s),
                breach.time_s,
                breach.value,
                breach.bound,
                breach.unit,
                breach_text(flown, satellite, breach),
                satellite,
            )


def breach_text(flown: Flown, satellite: str, breach: Breach) -> str:
    """A battery limit's breach as one sentence."""
    if breach.limit == "floor risk":
        asked = f"{breach.bound:g} % allowed by policy.floor_risk_pct"
        return f"{satellite}: floor risk: up to {breach.value:.2f} % of weeks fall below floor or end charge, {asked}"
    size = f"{breach.value:.2f} {breach.unit} against the limit {breach.bound:.2f} {breach.unit}"
    return f"{satellite}: {breach.limit}: {size} from {flown.week.sky.clock.iso(breach.time_s)}"


def session_at(flown: Flown, satellite: str, time_s: float) -> Session | None:
    """The session on air, warming up or cooling down at a moment."""
    for session in flown.of(satellite):
        transmitter = flown.week.mission.satellite(satellite).spacecraft.mode(session.mode)
        if session.tx_on_s - transmitter.warmup_s - 1 <= time_s <= session.tx_off_s + transmitter.cooldown_s + 1:
            return session
    return None

"""From every pass and mode to candidates, or to the reason why there is none."""

from dataclasses import dataclass, replace

import numpy as np

from planner.data.volume import Profile
from planner.mission.models import Satellite
from planner.mission.transmitter import Transmitter
from planner.schedule.energy import CORNER, Conversion, energy_states, idle_changes_s, least, likely, session_cost
from planner.schedule.hours import intersect
from planner.schedule.problem import Problem
from planner.schedule.sessions import Candidate
from planner.schedule.states import SatelliteStates
from planner.schedule.week import Week
from planner.schedule.wishes import Wishes
from planner.sky.passes import Passes

DAY_S = 86_400.0


@dataclass(frozen=True)
class Refusal:
    """Why one mode cannot fly on one pass at all."""

    row: int
    mode: str
    verdict: str  # "unusable" or "dropped"
    reason: str


def find_candidates(
    week: Week, wishes: Wishes, only: tuple[int, str] | None = None
) -> tuple[list[Candidate], list[Refusal]]:
    """Every usable window of every pass and mode (or of `only` one row and mode); a refusal for each without one."""
    found: list[Candidate] = []
    refused: list[Refusal] = []
    frozen = {(session.pass_id, session.mode): session for session in wishes.frozen}
    for satellite in week.mission.satellites:
        for transmitter in satellite.spacecraft.transmitter:
            for row in week.links[satellite.name, transmitter.mode].pass_rows.tolist():
                if only not in (None, (row, transmitter.mode)):
                    continue
                pass_id = week.sky.passes.pass_id[row]
                session = frozen.get((pass_id, transmitter.mode))
                verdict, windows = _windows(week, wishes, satellite, transmitter, row, session)
                if windows:
                    found += [_candidate(week, transmitter, row, *window, frozen=session) for window in windows]
                else:
                    refused.append(Refusal(row, transmitter.mode, *verdict))
    return found, refused


def pose(week: Week, wishes: Wishes) -> tuple[Problem, list[Refusal]]:
    """The optimiser's problem, costs of sessions and states of satellites filled in."""
    found, refused = find_candidates(week, wishes)
    found = _with_bonus(week, wishes, found)
    states, priced = [], []
    for satellite in week.mission.satellites:
        own = [candidate for candidate in found if candidate.satellite == satellite.name]
        power = week.powers[satellite.name]
        conversions = likely(power, week.mission.policy), least(power)
        priced += _priced(week, own, conversions)
        states.append(_states(week, satellite, own, conversions))
    midnight_s = week.sky.clock.midnight_s(np.arange(1, int(np.ceil(week.mission.days)) + 2))
    return (
        Problem(
            candidates=tuple(priced),
            states=tuple(states),
            stations={station.name: station for station in week.mission.stations},
            policy=week.mission.policy,
            span_s=week.mission.span_s,
            midnight_s=midnight_s[(midnight_s > 0) & (midnight_s < week.mission.span_s)],
            commands_until_s={s.name: commands_until_s(week, s) for s in week.mission.satellites},
            overlapping={
                (satellite.name, a.mode): frozenset(
                    b.mode for b in satellite.spacecraft.transmitter if satellite.spacecraft.may_overlap(a.mode, b.mode)
                )
                for satellite in week.mission.satellites
                for a in satellite.spacecraft.transmitter
            },
            keep=wishes.keep | {(session.pass_id, session.mode) for session in wishes.frozen},
            frozen=wishes.frozen,
        ),
        refused,
    )


def _with_bonus(week: Week, wishes: Wishes, found: list[Candidate]) -> list[Candidate]:
    """A previous plan's sessions share policy.replan_loss_pct of their volume as a bonus for staying: so no more than
    that share can be lost to change fewer of them."""
    before = {(c.pass_id, c.mode): c for c in found if (c.pass_id, c.mode) in wishes.previous}
    if not before:
        return found
    volume_mbit = sum(candidate.most_mbit for candidate in before.values())
    bonus_mbit = week.mission.policy.replan_loss_pct / 100 * volume_mbit / len(wishes.previous)
    return [replace(c, bonus_mbit=bonus_mbit) if (c.pass_id, c.mode) in before else c for c in found]


def commands_until_s(week: Week, satellite: Satellite) -> float:
    """Until when commands are aboard at the start."""
    until = satellite.start_state.commands_aboard_until
    return DAY_S if until is None else (until - week.mission.start).total_seconds()


def _windows(week, wishes, satellite, transmitter, row, frozen):
    """((verdict, reason), [(profile, opens_s, closes_s)]) of one pass and mode."""
    policy, passes = week.mission.policy, week.sky.passes
    station = passes.station[row]
    table, place = week.place_of[row, transmitter.mode]
    profiles = week.profiles(row, transmitter.mode)
    if frozen is not None:
        best = max(profiles, key=lambda p: p.volume_mbit(frozen.tx_on_s, frozen.tx_off_s))
        return ("", ""), [(best, frozen.tx_on_s, frozen.tx_off_s)]
    if passes.pass_id[row] in wishes.drop:
        return ("dropped", "dropped by hand"), []
    if table.reasons[place]:
        return ("unusable", table.reasons[place]), []
    usable = [(p, *window) for p in profiles for window in p.windows_s()]
    if not usable:
        return ("unusable", _below_margin(week, passes, row, transmitter, profiles)), []
    earliest_s = max(wishes.freeze_until_s, 0.0) + _lead_s(satellite, transmitter)
    whole = [(earliest_s, week.mission.span_s)]
    opened = [(p, *w) for p, a, b in usable for w in intersect([(a, b)], week.open_s[station])]
    if not opened:
        return ("unusable", f"{station} is closed"), []
    free = [(p, *w) for p, a, b in opened for w in intersect([(a, b)], whole)]
    long_enough = [(p, a, b) for p, a, b in free if b - a >= policy.min_session_s]
    if not long_enough:
        longest_s = max((b - a for _, a, b in free), default=0.0)
        return ("unusable", f"too short: {longest_s:.0f} s usable, the policy asks {policy.min_session_s:.0f} s"), []
    return ("unusable", "acquisition takes the whole window"), [w for w in long_enough if w[0].volume_mbit(*w[1:]) > 0]


def _below_margin(week: Week, passes: Passes, row: int, transmitter: Transmitter, profiles: list[Profile]) -> str:
    best_db = max(float(np.max(profile.margin_db, initial=-np.inf)) for profile in profiles)
    return (
        f"below margin all along: {best_db:.1f} dB at the best moment, {week.mission.policy.link_margin_db:g} dB asked"
        f" (highest elevation {passes.max_elevation_deg[row]:.1f} deg)"
    )


def _lead_s(satellite: Satellite, transmitter: Transmitter) -> float:
    """The longest the satellite can be busy before transmission: warm-up, or half a turn to the session's attitude."""
    return max(transmitter.warmup_s, _longest_slew_s(satellite, transmitter))


def _longest_slew_s(satellite: Satellite, transmitter: Transmitter) -> float:
    pointing = satellite.spacecraft.pointing
    if (transmitter.session_law or pointing.session) == pointing.idle:
        return 0.0
    return 180.0 / pointing.slew_rate_deg_s + pointing.settle_s


def _candidate(week: Week, transmitter: Transmitter, row: int, profile, opens_s, closes_s, *, frozen) -> Candidate:
    passes, policy = week.sky.passes, week.mission.policy
    return Candidate(
        row=row,
        pass_id=passes.pass_id[row],
        satellite=passes.satellite[row],
        station=passes.station[row],
        transmitter=transmitter,
        profile=profile,
        opens_s=opens_s,
        closes_s=closes_s,
        shortest_s=closes_s - opens_s if frozen is not None else policy.min_session_s,
        lead_s=transmitter.warmup_s,
        tail_s=transmitter.cooldown_s,
        carries_commands=transmitter.uplink and week.mission.station(passes.station[row]).uplink,
    )


def _priced(week: Week, own: list[Candidate], conversions: tuple[Conversion, Conversion]) -> list[Candidate]:
    """The candidates with what they cost, from the battery's own account of a session over the whole window."""
    if not own:
        return []
    power = week.powers[own[0].satellite]
    draws = power.session_draws([c.session(c.opens_s, c.closes_s) for c in own], CORNER)
    priced = []
    for candidate, draw in zip(own, draws, strict=True):
        before_s, after_s = candidate.opens_s - draw.edges_s[0], draw.edges_s[-1] - candidate.closes_s
        likely_cost, least_cost = (session_cost(power, draw, conversion) for conversion in conversions)
        priced.append(
            replace(candidate, lead_s=float(before_s), tail_s=float(after_s), likely=likely_cost, least=least_cost)
        )
    return priced


def _states(week: Week, satellite: Satellite, own: list[Candidate], conversions) -> SatelliteStates:
    power, span_s = week.powers[satellite.name], week.mission.span_s
    # the charge turns where the Sun comes and goes and where sessions end: there it is lowest or highest
    last_s: dict[int, float] = {}
    for candidate in own:
        last_s[candidate.row] = max(candidate.closes_s, last_s.get(candidate.row, 0.0))
    events_s = np.unique(np.concatenate([[0.0, span_s], list(last_s.values()), idle_changes_s(power, conversions[0])]))
    produced_mbit = np.zeros(len(events_s) - 1)
    for edges_s, rate_mbps in week.produced[satellite.name]:
        sum_mbit = np.concatenate([[0.0], np.cumsum(rate_mbps * np.diff(edges_s))])
        produced_mbit += np.diff(np.interp(events_s, edges_s, sum_mbit))
    likely_states, least_states = (
        energy_states(power, week.mission.policy, conversion, events_s) for conversion in conversions
    )
    return SatelliteStates(
        satellite=satellite.name,
        events_s=events_s,
        likely=likely_states,
        least=least_states,
        produced_mbit=produced_mbit,
        stored_mbit=satellite.start_state.stored_mbit,
        room_mbit=satellite.spacecraft.recorder.usable_mbit,
    )

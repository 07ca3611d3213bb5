"""From every pass and mode to candidates, or to the reason why there is none."""

import logging
from collections import Counter
from dataclasses import dataclass, replace

import numpy as np

from planner.mission.models import Satellite
from planner.mission.transmitter import Transmitter
from planner.power.balance import SatellitePower
from planner.schedule.energy import (
    Conversion,
    depth_floor_pct,
    energy_states,
    idle_changes_s,
    least,
    likely,
    session_cost,
)
from planner.schedule.problem import Problem
from planner.schedule.sessions import Candidate
from planner.schedule.states import SatelliteStates
from planner.schedule.uplinks import commands_until_s
from planner.schedule.week import Week
from planner.schedule.windows import usable_windows
from planner.schedule.wishes import Wishes

PLACES = 7  # in a window, at which a session's turn and warm-up are priced
AT_ONCE = 200  # windows, so that memory holds the courses of all their sessions

_log = logging.getLogger(__name__)


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
    _tell_choice(found, refused)
    before = {(session.pass_id, session.mode) for session in wishes.previous}
    found = [replace(c, stays=True) if (c.pass_id, c.mode) in before else c for c in found]
    states, priced = [], []
    for satellite in week.mission.satellites:
        own = [candidate for candidate in found if candidate.satellite == satellite.name]
        power = week.powers[satellite.name]
        conversions = likely(power, week.mission.policy), least(power, week.mission.policy)
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
            commands_until_s={s.name: commands_until_s(week.mission, s) for s in week.mission.satellites},
            overlapping={
                (satellite.name, a.mode): frozenset(
                    b.mode for b in satellite.spacecraft.transmitter if satellite.spacecraft.may_overlap(a.mode, b.mode)
                )
                for satellite in week.mission.satellites
                for a in satellite.spacecraft.transmitter
            },
            orbit_s={track.satellite: track.period_s for track in week.sky.tracks},
            keep=wishes.keep | {(session.pass_id, session.mode) for session in wishes.frozen},
            frozen=wishes.frozen,
            aboard=wishes.aboard,
            previous=wishes.previous,
        ),
        refused,
    )


def _tell_choice(found: list[Candidate], refused: list[Refusal]) -> None:
    """What there is to choose from, mode by mode."""
    usable = Counter(candidate.mode for candidate in found)
    out = Counter((refusal.mode, refusal.verdict) for refusal in refused)
    for mode in sorted({*usable, *(mode for mode, _ in out)}):
        rest = "".join(f", {out[mode, verdict]} passes {verdict}" for verdict in ("unusable", "dropped"))
        _log.info("%s: %d windows to choose from%s", mode, usable[mode], rest)


def _windows(week: Week, wishes: Wishes, satellite: Satellite, transmitter: Transmitter, row: int, frozen):
    """((verdict, reason), [(profile, opens_s, closes_s)]) of one pass and mode."""
    if frozen is not None:
        profiles = week.profiles(row, transmitter.mode)
        best = max(profiles, key=lambda p: p.volume_mbit(frozen.tx_on_s, frozen.tx_off_s))
        return ("", ""), [(best, frozen.tx_on_s, frozen.tx_off_s)]
    if week.sky.passes.pass_id[row] in wishes.drop:
        return ("dropped", "dropped by hand"), []
    earliest_s = max(wishes.freeze_until_s, 0.0)
    reason, windows = usable_windows(week, satellite, transmitter, row, earliest_s)
    return ("unusable", reason), windows


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
    whole = [c.session(c.opens_s, c.closes_s) for c in own]
    batches = [own[k : k + AT_ONCE] for k in range(0, len(own), AT_ONCE)]
    fixed_wh = np.concatenate([_least_fixed_wh(power, batch, conversions[1]) for batch in batches])
    priced = []
    for k, draws in enumerate(zip(*(power.session_draws(whole, way.corner) for way in conversions), strict=True)):
        before_s, after_s = own[k].opens_s - draws[0].edges_s[0], draws[0].edges_s[-1] - own[k].closes_s
        likely_cost, least_cost = (session_cost(power, *one) for one in zip(draws, conversions, strict=True))
        least_cost = replace(least_cost, fixed_wh=min(least_cost.fixed_wh, float(fixed_wh[k])))
        priced.append(
            replace(own[k], lead_s=float(before_s), tail_s=float(after_s), likely=likely_cost, least=least_cost)
        )
    return priced


def _least_fixed_wh(power: SatellitePower, own: list[Candidate], conversion: Conversion) -> np.ndarray:
    """What turning, warm-up and cool-down cost at the least, (candidates,), wherever in its window a session lies.

    They cost what they do before tx_on and after tx_off: each is looked for on its own at some places in the window,
    and half of its largest step from place to place is taken off for what lies between them.
    """
    late_s = [np.linspace(c.opens_s, c.closes_s - c.shortest_s, PLACES) for c in own]
    early_s = [np.linspace(c.opens_s + c.shortest_s, c.closes_s, PLACES) for c in own]
    placed = [c.session(on_s, c.closes_s) for c, starts_s in zip(own, late_s, strict=True) for on_s in starts_s]
    placed += [c.session(c.opens_s, off_s) for c, stops_s in zip(own, early_s, strict=True) for off_s in stops_s]
    draws = power.session_draws(placed, conversion.corner)
    fixed_wh = np.array([session_cost(power, draw, conversion).fixed_wh for draw in draws])
    by_start, by_stop = fixed_wh.reshape(2, len(own), PLACES)
    at_least_wh = [part.min(axis=1) - np.abs(np.diff(part)).max(axis=1) / 2 for part in (by_start, by_stop)]
    return at_least_wh[0] + at_least_wh[1] - by_start[:, 0]  # the whole window's is in both


def _states(week: Week, satellite: Satellite, own: list[Candidate], conversions) -> SatelliteStates:
    power, span_s = week.powers[satellite.name], week.mission.span_s
    # the charge turns where the Sun comes and goes and where sessions end: there it is lowest or highest
    last_s: dict[int, float] = {}
    for candidate in own:
        last_s[candidate.row] = max(candidate.closes_s, last_s.get(candidate.row, 0.0))
    events_s = np.unique(np.concatenate([[0.0, span_s], list(last_s.values()), idle_changes_s(power, conversions[0])]))
    classes = satellite.spacecraft.recorder.classes
    produced_mbit = np.zeros((len(classes), len(events_s) - 1))
    for own_class, (edges_s, rate_mbps) in week.produced[satellite.name]:
        sum_mbit = np.concatenate([[0.0], np.cumsum(rate_mbps * np.diff(edges_s))])
        produced_mbit[own_class] += np.diff(np.interp(events_s, edges_s, sum_mbit))
    stored_mbit = np.zeros(len(classes))
    stored_mbit[-1] = satellite.start_state.stored_mbit
    likely_way, least_way = conversions
    depth_pct = depth_floor_pct(power, likely_way.corner)
    likely_states = energy_states(power, week.mission.policy, likely_way, events_s, depth_pct)
    least_states = energy_states(power, week.mission.policy, least_way, events_s)
    return SatelliteStates(
        satellite=satellite.name,
        events_s=events_s,
        likely=likely_states,
        least=least_states,
        produced_mbit=produced_mbit,
        stored_mbit=stored_mbit,
        room_mbit=satellite.spacecraft.recorder.usable_mbit,
        weights=np.array([data_class.weight for data_class in classes]),
        fading_per_h=np.array([data_class.fading_per_h for data_class in classes]),
    )

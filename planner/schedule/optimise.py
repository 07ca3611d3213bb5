"""The week as a mixed-integer programme, and the relaxation that bounds it.

Each candidate has four variables: flown or not, start after its window opens, length, volume. Stored energy and stored
data are states at events, with spill and overflow. Energy and data as states at event times follow Spangelo and Cutler,
AIAA 2012-4610; continuous start and stop are our own.
"""

from collections import defaultdict
from dataclasses import dataclass, field

import numpy as np

from planner.schedule.crowding import OnAir, crowded, fits, seconds_on_air, share_time, uneven
from planner.schedule.problem import Problem
from planner.schedule.programme import Programme
from planner.schedule.sessions import Candidate
from planner.schedule.states import EnergyStates, SatelliteStates
from planner.units import HOUR_S

# Ties: fewer sessions, then earlier ones. Shares of the largest session's volume, far below the gap asked for.
FEWER_SESSIONS = 1e-5
EARLIER = 1e-7
STAYING = 1e-2  # of the objective, for each contact that stays: well above the solver's gap
NOT_LOST = 1e-6  # Mbit that a Mbit lost to a full recorder costs: enough to avoid it where that is free
SMALL = 0.02  # of the largest volume: below it a session's shape does not matter


@dataclass(frozen=True)
class Variables:
    """Columns of one candidate."""

    flown: int
    start: int
    length: int
    volume: int


@dataclass
class WeekProgramme:
    """A programme and where its parts are."""

    problem: Problem
    programme: Programme = field(default_factory=Programme)
    variables: list[Variables] = field(default_factory=list)

    def sessions(self, values: np.ndarray) -> list[tuple[int, float, float]]:
        """(candidate, tx_on_s, tx_off_s) of what the solution flies."""
        chosen = []
        for i, (candidate, v) in enumerate(zip(self.problem.candidates, self.variables, strict=True)):
            if values[v.flown] > 0.5:
                on_s = candidate.opens_s + values[v.start]
                chosen.append((i, float(on_s), float(on_s + values[v.length])))
        return chosen


def staying_programme(problem: Problem, least_objective: float) -> WeekProgramme:
    """The programme that changes as few of a previous plan's contacts as an objective of at least so much allows."""
    week = plan_programme(problem)
    programme = week.programme
    programme.row([(column, gain) for column, gain in enumerate(programme.gain) if gain], lowest=least_objective)
    for candidate, v in zip(problem.candidates, week.variables, strict=True):
        if candidate.stays:
            programme.gain[v.flown] += STAYING * abs(least_objective)
    return week


def plan_programme(problem: Problem) -> WeekProgramme:
    """The programme whose solution is the plan: likely losses; volume exact for sessions that span a pass's peak."""
    week = WeekProgramme(problem)
    largest = max((c.most_mbit for c in problem.candidates), default=0.0)
    for candidate in problem.candidates:
        cost_mbit = problem.policy.cost_mbit
        cost = problem.stations[candidate.station].cost
        v = _session_variables(
            week,
            candidate,
            flown_gain=-cost.per_pass * cost_mbit
            - largest * (FEWER_SESSIONS + EARLIER * candidate.opens_s / problem.span_s),
            second_gain=-cost.per_minute / 60 * cost_mbit,
        )
        _volume_by_start_and_stop(week.programme, candidate, v)
    on_air = _on_air(week, {index for pair in crowded(problem) for index in pair})
    for states in problem.states:
        _likely_energy(week, states)
        _likely_data(week, states)
    _one_of_each(week)
    _separations(week)
    share_time(problem, week.programme, week.variables, on_air)
    _policy_rows(week)
    return week


def bound_programme(problem: Problem) -> WeekProgramme:
    """A relaxation that holds every plan that is safe under the full physics; its optimum bounds their volume [Mbit].

    Losses are the least possible, a session's volume the most that its length, start and stop could give, and its
    energy is charged where it hurts least.
    """
    week = WeekProgramme(problem)
    for candidate in problem.candidates:
        v = _session_variables(week, candidate)
        _most_volume(week.programme, candidate, v)
    on_air = _on_air(week, set(range(len(problem.candidates))))
    for states in problem.states:
        _least_energy(week, states, on_air)
        _relaxed_data(week, states)
    _one_of_each(week)
    _separations(week)
    share_time(problem, week.programme, week.variables, on_air)
    _policy_rows(week)
    return week


def _session_variables(
    week: WeekProgramme, candidate: Candidate, flown_gain: float = 0.0, second_gain: float = 0.0
) -> Variables:
    programme, window_s, longest_s = week.programme, candidate.window_s, candidate.longest_s
    v = Variables(
        flown=programme.variable(0, 1, gain=flown_gain, whole=True),
        start=programme.variable(0, window_s - candidate.shortest_s),
        length=programme.variable(0, longest_s, gain=second_gain),
        volume=programme.variable(0, candidate.most_mbit, gain=1.0),
    )
    programme.row([(v.length, 1.0), (v.flown, -candidate.shortest_s)], lowest=0.0)
    programme.row([(v.length, 1.0), (v.flown, -longest_s)], highest=0.0)
    programme.row([(v.start, 1.0), (v.length, 1.0), (v.flown, -window_s)], highest=0.0)
    week.variables.append(v)
    return v


def _volume_by_start_and_stop(programme: Programme, candidate: Candidate, v: Variables) -> None:
    """Volume is what lies before the peak plus what lies after it, each concave in start and stop."""
    most = 2 * candidate.most_mbit + 1.0
    before, after = programme.variable(-most, most), programme.variable(-most, most)
    for slope, offset in candidate.before_peak:
        programme.row([(before, 1.0), (v.start, -slope), (v.flown, -offset)], highest=0.0)
    for slope, offset in candidate.after_peak:
        programme.row([(after, 1.0), (v.start, -slope), (v.length, -slope), (v.flown, -offset)], highest=0.0)
    programme.row([(v.volume, 1.0), (before, -1.0), (after, -1.0)], highest=0.0)


def _most_volume(programme: Programme, candidate: Candidate, v: Variables) -> None:
    """Upper bounds on volume that hold wherever the session lies: by its length, and by its start and stop."""
    for slope, offset in candidate.by_duration:
        programme.row([(v.volume, 1.0), (v.length, -slope), (v.flown, -offset)], highest=0.0)
    lost, got = programme.variable(-candidate.most_mbit - 1.0, 0.0), programme.variable(0.0, np.inf)
    for slope, offset in candidate.lost_to_start:
        programme.row([(lost, 1.0), (v.start, -slope), (v.flown, -offset)], highest=0.0)
    for slope, offset in candidate.up_to_stop:
        programme.row([(got, 1.0), (v.start, -slope), (v.length, -slope), (v.flown, -offset)], highest=0.0)
    programme.row([(v.volume, 1.0), (lost, -1.0), (got, -1.0)], highest=0.0)


def _on_air(week: WeekProgramme, among: set[int]) -> dict[int, OnAir]:
    """Seconds on air step by step, for those candidates for which it matters which seconds are used."""
    candidates = week.problem.candidates
    worth_mbit = SMALL * max((candidate.most_mbit for candidate in candidates), default=0.0)
    return {
        i: seconds_on_air(week.programme, candidates[i], week.variables[i])
        for i in sorted(among)
        if candidates[i].most_mbit > worth_mbit and uneven(candidates[i])
    }


def _of_satellite(week: WeekProgramme, satellite: str) -> list[tuple[int, Candidate, Variables]]:
    pairs = zip(week.problem.candidates, week.variables, strict=True)
    return [(i, candidate, v) for i, (candidate, v) in enumerate(pairs) if candidate.satellite == satellite]


def _likely_energy(week: WeekProgramme, states: SatelliteStates) -> None:
    """Stored energy event by event; a session's cost falls evenly over its window."""
    terms: defaultdict[int, list[tuple[int, float]]] = defaultdict(list)
    for _, candidate, v in _of_satellite(week, states.satellite):
        price = list(zip((v.flown, v.start, v.length), candidate.cost_wh, strict=True))
        for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
            terms[interval] += [(column, share * factor) for column, factor in price]
    _energy_chain(week.programme, states.likely, terms, defaultdict(list))


def _energy_chain(programme: Programme, energy: EnergyStates, terms: dict[int, list], active: dict[int, list]) -> None:
    """stored[i + 1] + costs of interval i + spill = stored[i] + gain, spill anything from 0; floors held at events,
    less what is `active` there."""
    before, asked_wh = programme.variable(energy.start_wh, energy.start_wh), energy.asked_wh
    for interval, gain_wh in enumerate(energy.gain_wh.tolist()):
        after = programme.variable(-np.inf, energy.full_wh)
        programme.row([(after, 1.0), (before, -1.0), *terms[interval]], highest=gain_wh)
        programme.row([(after, 1.0), *active[interval + 1]], lowest=asked_wh[interval + 1])
        before = after


def _least_energy(week: WeekProgramme, states: SatelliteStates, on_air: dict[int, OnAir]) -> None:
    """As `_likely_energy`, relaxed: the least cost, charged when the window opens (room for the Sun) but not yet held
    against the floor while the window lasts."""
    programme, terms, active = week.programme, defaultdict(list), defaultdict(list)
    for i, candidate, v in _of_satellite(week, states.satellite):
        cost = programme.variable(-np.inf, np.inf)
        for slope, offset in candidate.least.cheapest_by_duration:
            programme.row([(cost, 1.0), (v.length, -slope), (v.flown, -offset)], lowest=0.0)
        if i in on_air:
            by_step = [(column, -step.cheapest_per_s_wh) for step, column in on_air[i].pairs]
            programme.row([(cost, 1.0), (v.flown, -candidate.least.fixed_wh), *by_step], lowest=0.0)
        first, last = states.around(candidate.opens_s, candidate.closes_s)
        terms[first].append((cost, 1.0))
        for event in range(first + 1, last):
            active[event].append((cost, 1.0))
    _energy_chain(programme, states.least, terms, active)


def _likely_data(week: WeekProgramme, states: SatelliteStates) -> None:
    """Stored data event by event, a session's yield falling evenly over its window.

    One chain for the heaviest class, one for the two heaviest, … one for all: heavier classes are sent first, so each
    chain lives as if there were no lighter class. A session sends at most as much of the heavier ones as of all.
    """
    programme, own = week.programme, _of_satellite(week, states.satellite)
    steps, fading = -np.diff(states.weights, append=0.0), -np.diff(states.fading_per_h, append=0.0)
    sent = {i: v.volume for i, _, v in own}
    for lightest in reversed(range(len(states.weights))):
        if lightest == len(states.weights) - 1:
            for column in sent.values():
                programme.gain[column] = float(steps[lightest])
        else:
            sent = {i: _part_of(programme, column, float(steps[lightest])) for i, column in sent.items()}
        terms = defaultdict(list)
        for i, candidate, _ in own:
            for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
                terms[interval].append((sent[i], share))
        _data_chain(programme, states, lightest, terms, defaultdict(list), float(fading[lightest]))


def _part_of(programme: Programme, whole: int, gain: float) -> int:
    """A column that may not exceed another."""
    part = programme.variable(0, np.inf, gain=gain)
    programme.row([(part, 1.0), (whole, -1.0)], highest=0.0)
    return part


def _relaxed_data(week: WeekProgramme, states: SatelliteStates) -> None:
    """All data, relaxed: the yield is taken when the window closes, and room is not asked for before."""
    terms, active = defaultdict(list), defaultdict(list)
    for _, candidate, v in _of_satellite(week, states.satellite):
        first, last = states.around(candidate.opens_s, candidate.closes_s)
        terms[last - 1].append((v.volume, 1.0))
        for event in range(first + 1, last):
            active[event].append((v.volume, -1.0))
    _data_chain(week.programme, states, len(states.weights) - 1, terms, active, 0.0)


def _data_chain(
    programme: Programme, states: SatelliteStates, lightest: int, terms: dict, active: dict, fading_per_h: float
) -> None:
    """stored[i + 1] = stored[i] + produced - delivered - lost, from empty to full, of the classes down to `lightest`.

    What is stored loses worth by the hour; by Little's law that charges every Mbit with its age.
    """
    start_mbit = float(states.stored_mbit[: lightest + 1].sum())
    before = programme.variable(start_mbit, start_mbit)
    hours = np.diff(states.events_s) / HOUR_S
    hours = (hours + np.append(hours[1:], 0.0)) / 2  # each event stands for half of both intervals beside it
    for interval, produced_mbit in enumerate(states.produced_mbit[: lightest + 1].sum(axis=0).tolist()):
        after = programme.variable(0, np.inf, gain=-fading_per_h * float(hours[interval]))
        lost = programme.variable(0, np.inf, gain=-NOT_LOST * float(states.weights[lightest]))
        chain = [(after, 1.0), (before, -1.0), (lost, 1.0), *terms[interval]]
        programme.row(chain, lowest=produced_mbit, highest=produced_mbit)
        programme.row([(after, 1.0), *active[interval + 1]], highest=states.room_mbit)
        before = after


def _one_of_each(week: WeekProgramme) -> None:
    """One way of flying a pass and mode; what must be kept is flown."""
    problem = week.problem
    for group in problem.of_pass_and_mode():
        candidate = problem.candidates[group[0]]
        kept = (candidate.pass_id, candidate.mode) in problem.keep
        if len(group) > 1 or kept:
            terms = [(week.variables[i].flown, 1.0) for i in group]
            week.programme.row(terms, lowest=1.0 if kept else 0.0, highest=1.0)


def _separations(week: WeekProgramme) -> None:
    """Two sessions that need the same satellite or the same antenna: one, or one after the other."""
    problem, programme = week.problem, week.programme
    for i, j in problem.neighbours():
        a, b = week.variables[i], week.variables[j]
        forward, backward = fits(problem, i, j), fits(problem, j, i)
        if not forward and not backward:
            programme.row([(a.flown, 1.0), (b.flown, 1.0)], highest=1.0)
        elif forward and backward:
            second_first = programme.variable(0, 1, whole=True)
            _after(week, i, j, [(second_first, 1.0)], 0.0)
            _after(week, j, i, [(second_first, -1.0)], 1.0)
        else:
            _after(week, *((i, j) if forward else (j, i)), [], 0.0)


def _after(week: WeekProgramme, i: int, j: int, waiver: list[tuple[int, float]], waived: float) -> None:
    """start_j >= stop_i + apart, unless one is not flown or `waived + waiver` is 1."""
    problem = week.problem
    first, second, a, b = problem.candidates[i], problem.candidates[j], week.variables[i], week.variables[j]
    slack_s = first.closes_s + problem.apart_s(first, second) - second.opens_s  # what must be waived at the most
    terms = [(b.start, 1.0), (a.start, -1.0), (a.length, -1.0)]
    terms += [(a.flown, -slack_s), (b.flown, -slack_s)] + [(column, slack_s * factor) for column, factor in waiver]
    apart_s = first.opens_s + problem.apart_s(first, second) - second.opens_s
    week.programme.row(terms, lowest=apart_s - 2 * slack_s - slack_s * waived)


def _policy_rows(week: WeekProgramme) -> None:
    """Rules that speak of contacts, not of physics."""
    problem, policy, programme = week.problem, week.problem.policy, week.programme
    flown = [(candidate, v) for candidate, v in zip(problem.candidates, week.variables, strict=True)]
    for states in problem.states:
        own = [(candidate, v) for candidate, v in flown if candidate.satellite == states.satellite]
        for begin_s, end_s in problem.days():
            if policy.max_sessions_per_day is not None:
                today = [(v.flown, 1.0) for c, v in own if c.opens_s < end_s and c.closes_s > begin_s]
                programme.row(today, highest=policy.max_sessions_per_day)
        for begin_s, end_s in problem.whole_days() if policy.daily_contact_modes else ():
            daily = problem.within_day(states.satellite, begin_s, end_s)
            programme.row([(week.variables[i].flown, 1.0) for i in daily], lowest=1.0)
        if policy.longest_gap_h is not None:
            _longest_gap(programme, own, policy.longest_gap_h * HOUR_S, problem.span_s)
        _on_air_per_orbit(programme, own, problem.orbit_s[states.satellite])
    if policy.cost_budget is not None:
        terms = []
        for candidate, v in flown:
            cost = problem.stations[candidate.station].cost
            terms += [(v.flown, cost.per_pass), (v.length, cost.per_minute / 60)]
        programme.row(terms, highest=policy.cost_budget)
    for index, (candidate, v) in enumerate(flown):
        if problem.needs_upload(candidate):
            uploads = [(week.variables[i].flown, 1.0) for i in problem.uploads_for(index)]
            programme.row([*uploads, (v.flown, -1.0)], lowest=0.0)


def _on_air_per_orbit(programme: Programme, own: list, orbit_s: float) -> None:
    """From each window on, no more seconds of its mode within a revolution than the transmitter bears."""
    for candidate, _ in own:
        most_s = candidate.transmitter.most_on_per_orbit_s
        if most_s is not None:
            begin_s, end_s = candidate.opens_s, candidate.closes_s + orbit_s
            near = [v for c, v in own if c.mode == candidate.mode and begin_s <= c.opens_s < end_s]
            programme.row([(v.length, 1.0) for v in near], highest=most_s)


def _longest_gap(programme: Programme, own: list, gap_s: float, span_s: float) -> None:
    """Every contact, and the span's start, is followed by another within the gap (or by the span's end)."""
    if gap_s < span_s:
        programme.row([(v.flown, 1.0) for c, v in own if c.closes_s <= gap_s], lowest=1.0)
    for candidate, v in own:
        if candidate.closes_s + gap_s < span_s:
            later = [
                (w.flown, 1.0)
                for c, w in own
                if c.opens_s > candidate.opens_s and c.closes_s <= candidate.opens_s + gap_s
            ]
            programme.row([*later, (v.flown, -1.0)], lowest=0.0)

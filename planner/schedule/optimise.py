"""The week as a mixed-integer programme, and the relaxation that bounds it.

Each candidate has four variables: flown or not, start after its window opens, length, volume. Stored energy and stored
data are states at events, with spill and overflow. Energy and data as states at event times follow Spangelo and Cutler,
AIAA 2012-4610; continuous start and stop are our own.
"""

from collections import defaultdict
from copy import deepcopy
from dataclasses import dataclass, field, replace

import numpy as np

from planner.schedule.crowding import OnAir, crowded, fits, seconds_on_air, share_time
from planner.schedule.problem import DAY_S, HOUR_S, Problem
from planner.schedule.programme import Programme
from planner.schedule.sessions import Candidate
from planner.schedule.states import EnergyStates, SatelliteStates

# Ties: fewer sessions, then earlier ones. Shares of the largest session's volume, far below the gap asked for.
FEWER_SESSIONS = 1e-5
EARLIER = 1e-7


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
    floor_rows: dict[tuple[str, int], int] = field(default_factory=dict)  # (satellite, event) -> row
    gain_rows: dict[tuple[str, int], int] = field(default_factory=dict)  # (satellite, interval) -> row

    def sessions(self, values: np.ndarray) -> list[tuple[int, float, float]]:
        """(candidate, tx_on_s, tx_off_s) of what the solution flies."""
        chosen = []
        for i, (candidate, v) in enumerate(zip(self.problem.candidates, self.variables, strict=True)):
            if values[v.flown] > 0.5:
                on_s = candidate.opens_s + values[v.start]
                chosen.append((i, float(on_s), float(on_s + values[v.length])))
        return chosen

    def raise_floor(self, satellite: str, time_s: float, by_wh: float) -> None:
        """Ask for more stored energy at the events around `time_s`."""
        events_s = next(s.events_s for s in self.problem.states if s.satellite == satellite)
        event = int(np.searchsorted(events_s, time_s))
        for at in {max(event - 1, 1), min(max(event, 1), len(events_s) - 1)}:
            self.programme.tighten_row(self.floor_rows[satellite, at], by_wh)

    def forbid(self, index: int) -> None:
        self.programme.fix(self.variables[index].flown, 0.0)

    def only(self, chosen: set[int]) -> "WeekProgramme":
        """The same programme with every other candidate left out: small, for mending a plan."""
        restricted = replace(self, programme=deepcopy(self.programme))
        for index in set(range(len(self.variables))) - chosen:
            restricted.forbid(index)
        return restricted

    def follow(self, satellite: str, chosen: list[tuple[int, float, float]], stored_wh: np.ndarray) -> None:
        """Correct each interval's gain by what the full physics showed for these sessions.

        stored_wh (n + 1,) : stored energy at the satellite's events, simulated
        """
        states = next(states for states in self.problem.states if states.satellite == satellite)
        cost_wh = np.zeros(len(states.events_s) - 1)
        for index, on_s, off_s in chosen:
            candidate = self.problem.candidates[index]
            if candidate.satellite == satellite:
                flown_wh, start_wh, length_wh = candidate.cost_wh
                price_wh = flown_wh + start_wh * (on_s - candidate.opens_s) + length_wh * (off_s - on_s)
                for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
                    cost_wh[interval] += share * price_wh
        modelled_wh = states.likely.start_wh
        for interval, net_wh in enumerate(states.likely.gain_wh - cost_wh):
            after_wh = min(modelled_wh + net_wh, states.likely.full_wh)
            missed_wh = np.diff(stored_wh)[interval] - (after_wh - modelled_wh)
            self.programme.shift_upper(self.gain_rows[satellite, interval], float(missed_wh))
            modelled_wh = after_wh


def plan_programme(problem: Problem) -> WeekProgramme:
    """The programme whose solution is the plan: likely losses, volume exact for sessions that span their pass's peak."""
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
    for states in problem.states:
        _likely_energy(week, states)
        _likely_data(week, states)
    _one_of_each(week)
    _separations(week)
    shared = sorted({index for pair in crowded(problem) for index in pair})
    on_air = {i: seconds_on_air(week.programme, problem.candidates[i], week.variables[i]) for i in shared}
    share_time(problem, week.programme, week.variables, on_air)
    _policy_rows(week)
    return week


def bound_programme(problem: Problem) -> WeekProgramme:
    """A relaxation that holds every plan that is safe under the full physics; its optimum bounds their volume [Mbit].

    Losses are the least possible, a session's volume the most that its length, start and stop could give, and its energy
    is charged where it hurts least.
    """
    week = WeekProgramme(problem)
    for candidate in problem.candidates:
        v = _session_variables(week, candidate)
        _most_volume(week.programme, candidate, v)
    on_air = {
        i: seconds_on_air(week.programme, candidate, week.variables[i])
        for i, candidate in enumerate(problem.candidates)
    }
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


def _energy_terms(v: Variables, candidate: Candidate, share: float) -> list[tuple[int, float]]:
    flown_wh, start_wh, length_wh = candidate.cost_wh
    return [(v.flown, share * flown_wh), (v.start, share * start_wh), (v.length, share * length_wh)]


def _of_satellite(week: WeekProgramme, satellite: str) -> list[tuple[Candidate, Variables]]:
    pairs = zip(week.problem.candidates, week.variables, strict=True)
    return [(candidate, v) for candidate, v in pairs if candidate.satellite == satellite]


def _likely_energy(week: WeekProgramme, states: SatelliteStates) -> None:
    """Stored energy event by event; a session's cost falls evenly over its window."""
    terms = defaultdict(list)
    for candidate, v in _of_satellite(week, states.satellite):
        for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
            terms[interval] += _energy_terms(v, candidate, share)
    stored, rows = _energy_chain(week.programme, states.likely, terms)
    week.gain_rows |= {(states.satellite, interval): row for interval, row in enumerate(rows)}
    for event, variable in enumerate(stored[1:], start=1):
        last = event == len(states.events_s) - 1
        lowest_wh = states.likely.end_wh if last else states.likely.floor_wh
        week.floor_rows[states.satellite, event] = week.programme.row([(variable, 1.0)], lowest=lowest_wh)


def _energy_chain(programme: Programme, energy: EnergyStates, terms: dict[int, list]) -> tuple[list[int], list[int]]:
    """stored[i + 1] + costs of interval i + spill = stored[i] + gain: spill may be anything from 0. Columns and rows."""
    stored, rows = [programme.variable(energy.start_wh, energy.start_wh)], []
    for interval, gain_wh in enumerate(energy.gain_wh.tolist()):
        stored.append(programme.variable(-np.inf, energy.full_wh))
        rows.append(programme.row([(stored[-1], 1.0), (stored[-2], -1.0), *terms[interval]], highest=gain_wh))
    return stored, rows


def _least_energy(week: WeekProgramme, states: SatelliteStates, on_air: dict[int, OnAir]) -> None:
    """As `_likely_energy`, relaxed: the least cost, charged when the window opens (room for the Sun) but not yet held
    against the floor while the window lasts."""
    programme, terms, active = week.programme, defaultdict(list), defaultdict(list)
    for i, candidate in enumerate(week.problem.candidates):
        if candidate.satellite != states.satellite:
            continue
        v = week.variables[i]
        cost = programme.variable(-np.inf, np.inf)
        for slope, offset in candidate.least.cheapest_by_duration:
            programme.row([(cost, 1.0), (v.length, -slope), (v.flown, -offset)], lowest=0.0)
        pairs = zip(on_air[i].steps, on_air[i].columns, strict=True)
        by_step = [(column, -step.cheapest_per_s_wh) for step, column in pairs]
        programme.row([(cost, 1.0), (v.flown, -candidate.least.fixed_wh), *by_step], lowest=0.0)
        first, last = np.searchsorted(states.events_s, [candidate.opens_s, candidate.closes_s])
        terms[int(first)].append((cost, 1.0))
        for event in range(int(first) + 1, int(last)):
            active[event].append((cost, 1.0))
    stored, _ = _energy_chain(programme, states.least, terms)
    for event, variable in enumerate(stored[1:], start=1):
        programme.row([(variable, 1.0), *active[event]], lowest=states.least.floor_wh)
    programme.row([(stored[-1], 1.0)], lowest=states.least.end_wh)


def _likely_data(week: WeekProgramme, states: SatelliteStates) -> None:
    """Stored data event by event; a session's yield falls evenly over its window."""
    terms = defaultdict(list)
    for candidate, v in _of_satellite(week, states.satellite):
        for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
            terms[interval].append((v.volume, share))
    _data_chain(week.programme, states, terms, defaultdict(list))


def _relaxed_data(week: WeekProgramme, states: SatelliteStates) -> None:
    """As `_likely_data`, relaxed: the yield is taken when the window closes, and room is not asked for before."""
    terms, active = defaultdict(list), defaultdict(list)
    for candidate, v in _of_satellite(week, states.satellite):
        first, last = np.searchsorted(states.events_s, [candidate.opens_s, candidate.closes_s])
        terms[int(last) - 1].append((v.volume, 1.0))
        for event in range(int(first) + 1, int(last)):
            active[event].append((v.volume, -1.0))
    _data_chain(week.programme, states, terms, active)


def _data_chain(programme: Programme, states: SatelliteStates, terms: dict, active: dict) -> None:
    """stored[i + 1] = stored[i] + produced - delivered - lost, from empty to full."""
    before = programme.variable(states.stored_mbit, states.stored_mbit)
    for interval, produced_mbit in enumerate(states.produced_mbit.tolist()):
        after, lost = programme.variable(0, np.inf), programme.variable(0, np.inf)
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
            if policy.daily_contact_modes and end_s - begin_s == DAY_S:
                within = [(c, v) for c, v in own if begin_s <= c.opens_s and c.closes_s <= end_s]
                programme.row([(v.flown, 1.0) for c, v in within if c.mode in policy.daily_contact_modes], lowest=1.0)
        if policy.longest_gap_h is not None:
            _longest_gap(programme, own, policy.longest_gap_h * HOUR_S, problem.span_s)
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

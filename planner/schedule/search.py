"""Solve, re-simulate with the full physics, correct the problem by what that showed, and solve again."""

import logging
import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from planner.errors import NoWeekError
from planner.mission.contacts import Session
from planner.power.balance import SatellitePower
from planner.power.batch import share_of
from planner.schedule.account import worth_mbit
from planner.schedule.cautions import input_cautions
from planner.schedule.checks import Fault, find_faults
from planner.schedule.flown import CHARGE_LIMITS, Flown
from planner.schedule.optimise import WeekProgramme, plan_programme, staying_programme
from planner.schedule.problem import Problem
from planner.schedule.programme import Solution, solve
from planner.schedule.restore import put_back
from planner.schedule.sessions import Candidate
from planner.schedule.states import SatelliteStates
from planner.schedule.week import Progress, Week
from planner.units import DAY_S

SOLVER_GAP = 1e-3  # a plan is held to 0.1 % of its programme's optimum …
RELATIVE_GAP = 8.5e-4  # … of which rounding and mending may take a little
COARSE_GAP = 2.5e-2  # coarse enough to end with the first good heuristic
APPROACHES = 1  # more hardly move the corrections
MOST_FULL_SOLVES, MOST_MENDS = 4, 8
SHORTEST_SOLVE_S = 3.0  # even when the limit is used up: a mending must come to an end
MARGIN_WH = 0.004  # asked for beyond a floor that broke, so that rounding to whole seconds does not break it again

_log = logging.getLogger(__name__)

Chosen = list[tuple[int, float, float]]  # (candidate, tx_on_s, tx_off_s)


class Stopwatch:
    """How long the stages took, and how much of the limit is left."""

    def __init__(self, limit_s: float | None):
        self._limit_s, self._began = limit_s, time.perf_counter()
        self._last = self._began
        self.laps: dict[str, float] = {}

    def lap(self, stage: str) -> None:
        now = time.perf_counter()
        self.laps[stage], self._last = now - self._last, now

    def is_over(self) -> bool:
        """Whether the limit is used up."""
        left_s = self.left_s()
        return left_s is not None and left_s <= SHORTEST_SOLVE_S

    def left_s(self) -> float | None:
        if self._limit_s is None:
            return None
        return max(self._limit_s - (time.perf_counter() - self._began), SHORTEST_SOLVE_S)


@dataclass
class Search:
    """The search for sessions that keep every limit.

    A coarse solution shows first where the real battery departs from the programme's straight lines. `problem` is
    corrected by that and solved to the gap; what still breaks a limit is mended among the chosen sessions alone, each
    time corrected anew; and if mending cost more than the gap allows, the whole is solved again.
    """

    week: Week
    problem: Problem
    stopwatch: Stopwatch
    progress: Progress
    cancelled: Callable[[], bool]
    solutions: int = 0
    broke: str = field(default="")

    def run(self) -> tuple[Flown, Solution]:
        """Sessions without a fault, and their solution with the bound of the programme that they came from.

        When time ran out before a full solution, that bound is the coarse programme's, and the status says so.
        """
        few, coarse_bound = self._approach()
        best = None
        for _ in range(MOST_FULL_SOLVES):
            problem, whole = self.problem, True
            week, full = self._solve(problem, RELATIVE_GAP, must=False)
            if full.values is None:
                if full.status != "time limit":
                    raise NoWeekError(no_solution(self.week, problem, full))
                at_hand = {i for i, c in enumerate(problem.candidates) if candidate_key(c) in few}
                problem, whole = problem.only(at_hand), False
                week, full = self._solve(problem, RELATIVE_GAP)
                full = replace(full, bound=coarse_bound, status="time limit")
            found = self._mended(problem, week, full)
            if found is not None:
                flown, mended, chosen = found
                proved = replace(mended, bound=full.bound, status=full.status)
                if best is None or _preferred(proved, best[1]):
                    best = flown, proved
                if _is_proved(best[1]):
                    break
                if whole:
                    self.problem = self._corrected(self.problem, _in_problem(self.problem, chosen))
            if self.stopwatch.is_over():
                break
        if best is None:
            raise NoWeekError(f"no plan kept every limit in {self.solutions} solutions; the last broke: {self.broke}")
        return self._staying(*best) if any(c.stays for c in self.problem.candidates) else best

    def _staying(self, flown: Flown, solution: Solution) -> tuple[Flown, Solution]:
        """Among this plan's contacts and the previous one's: those that change least for policy.replan_loss_pct, at the
        times they had where that holds every limit too."""
        planned = {(session.pass_id, session.mode) for session in flown.sessions}
        few = {i for i, c in enumerate(self.problem.candidates) if c.stays or (c.pass_id, c.mode) in planned}
        problem = self.problem.only(few)
        least = solution.objective - self.week.mission.policy.replan_loss_pct / 100 * abs(solution.objective)
        week = staying_programme(problem, least)
        self.progress("schedule, changing few contacts")
        stayed = solve(
            week.programme,
            relative_gap=RELATIVE_GAP,
            time_limit_s=self.stopwatch.left_s(),
            cancelled=self.cancelled,
        )
        found = None if stayed.values is None else self._mended(problem, week, stayed)
        objective = solution.objective
        least_mbit = worth_mbit(flown) - (solution.objective - least)
        if found is not None:
            flown = found[0]
            worth = plan_programme(problem).programme.gain
            objective = float(np.dot(worth, stayed.values[: len(worth)])) if found[1] is stayed else found[1].objective
        back = put_back(flown, self._still_open(), lambda f: self._may_stay(f, least_mbit), self.problem.frozen)
        _log.info(
            "%d of %d contacts put back to the times they had",
            len({*back.sessions} - {*flown.sessions}),
            len(back.sessions),
        )
        return back, replace(solution, objective=objective + worth_mbit(back) - worth_mbit(flown))

    def _still_open(self) -> list[Session]:
        """Previous sessions that lie within a window of today: inside the guards at AOS and LOS, hours and all."""
        windows: dict[tuple[str, str], list[Candidate]] = {}
        for c in self.problem.candidates:
            windows.setdefault((c.pass_id, c.mode), []).append(c)
        return [
            s
            for s in self.problem.previous
            if any(c.opens_s <= s.tx_on_s and s.tx_off_s <= c.closes_s for c in windows.get((s.pass_id, s.mode), ()))
        ]

    def _may_stay(self, flown: Flown, least_mbit: float) -> bool:
        """Whether a week with contacts put back is worth enough and keeps every limit; no more once time is up."""
        if self.cancelled():
            raise KeyboardInterrupt
        return (
            not self.stopwatch.is_over() and worth_mbit(flown) >= least_mbit and not self._faults(self.problem, flown)
        )

    def _approach(self) -> tuple[set[tuple], float]:
        """Correct the problem by a coarse solution, and by what becomes of its sessions under the corrected problem.

        Returns the keys of the candidates flown so far, and the bound of the coarse programme.
        """
        week, coarse = self._solve(self.problem, COARSE_GAP)
        assert coarse.values is not None  # without a solution `_solve` raises
        chosen = week.sessions(coarse.values)
        for _ in range(APPROACHES):
            self.problem = self._corrected(self.problem, chosen)
            few = [i for i, *_ in chosen]
            week, solution = self._solve(self.problem.only(set(few)), COARSE_GAP / 10, must=False)
            if solution.values is None:
                return {candidate_key(self.problem.candidates[i]) for i in few}, coarse.bound
            chosen = [(few[i], on_s, off_s) for i, on_s, off_s in week.sessions(solution.values)]
        self.problem = self._corrected(self.problem, chosen)
        return {candidate_key(self.problem.candidates[i]) for i, *_ in chosen}, coarse.bound

    def _mended(self, problem: Problem, week: WeekProgramme, solution: Solution):
        """(flown, solution, what is chosen by candidate key) once no limit breaks; None if that is not reached."""
        for _ in range(MOST_MENDS):
            if solution.values is None:
                return None
            chosen = week.sessions(solution.values)
            flown = self._flown(week.problem, chosen)
            faults = self._faults(problem, flown)
            if not faults:
                _log.info("%d sessions keep every limit in the full physics", len(flown.sessions))
                return flown, solution, {candidate_key(week.problem.candidates[i]): tuple(t) for i, *t in chosen}
            self.broke = faults[0].text
            for fault in faults:
                _log.info("the full physics breaks a limit: %s", fault.text)
            deep = [fault for fault in faults if fault.rule == "depth of discharge"]
            self.problem = self._tightened(self.problem, flown, deep)  # sessions that add Sun may lift a cycle's peak
            small = week.problem.only({i for i, *_ in chosen})
            tighter = self._tightened(self._giving_up(small, faults), flown, faults)
            week, solution = self._solve(tighter, RELATIVE_GAP / 10, must=False)
        return None

    def _faults(self, problem: Problem, flown: Flown) -> list[Fault]:
        """Broken limits; frozen sessions stay as they are, whatever newer elements say of them."""
        return [fault for fault in find_faults(flown) if fault.session not in problem.frozen]

    def _giving_up(self, problem: Problem, faults: list[Fault]) -> Problem:
        """What breaks a limit of its own is given up; a rule of the week that breaks is told."""
        gone = set()
        for fault in faults:
            if fault.rule in (*CHARGE_LIMITS, "floor risk") or _is_sag(fault):
                continue
            if fault.session is None:
                raise NoWeekError(f"no plan keeps this limit: {fault.text}")
            gone.add((fault.session.pass_id, fault.session.mode))
            _log.info("given up: %s on %s", fault.session.mode, fault.session.pass_id)
        self.problem = self.problem.without(gone)
        return problem.without(gone)

    def _solve(self, problem: Problem, gap: float, must: bool = True) -> tuple[WeekProgramme, Solution]:
        self.solutions += 1
        self.progress(f"schedule, solution {self.solutions}")
        week = plan_programme(problem)
        limit_s = self.stopwatch.left_s()
        solution = solve(week.programme, relative_gap=gap, time_limit_s=limit_s, cancelled=self.cancelled)
        _log.info("%s: %s", f"solution {self.solutions}, {len(problem.candidates)} windows", solution)
        if must and solution.values is None:
            raise NoWeekError(no_solution(self.week, problem, solution))
        return week, solution

    def _flown(self, problem: Problem, chosen: Chosen) -> Flown:
        sessions = (on_whole_seconds(problem.candidates[i], on_s, off_s) for i, on_s, off_s in chosen)
        return Flown(self.week, tuple(sorted(sessions)))

    def _corrected(self, problem: Problem, chosen: Chosen) -> Problem:
        """The problem with costs exact at these sessions and gains as the full physics has them."""
        flown = self._flown(problem, chosen)
        candidates = list(problem.candidates)
        for i, on_s, off_s in chosen:
            candidates[i] = replace(candidates[i], near_s=(on_s, off_s))
        nearer = replace(problem, candidates=tuple(candidates))
        states = [self._followed(nearer, states, chosen, flown) for states in problem.states]
        return replace(nearer, states=tuple(states))

    def _followed(self, problem: Problem, states: SatelliteStates, chosen: Chosen, flown: Flown) -> SatelliteStates:
        """Each interval's gain as the simulation showed it, these sessions' modelled cost given back."""
        cost_wh = np.zeros(len(states.events_s) - 1)
        for index, on_s, off_s in chosen:
            candidate = problem.candidates[index]
            if candidate.satellite == states.satellite:
                flown_wh, start_wh, length_wh = candidate.cost_wh
                price_wh = flown_wh + start_wh * (on_s - candidate.opens_s) + length_wh * (off_s - on_s)
                for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
                    cost_wh[interval] += share * price_wh
        series = flown.held[states.satellite]
        stored_wh = np.interp(states.events_s, series.time_s, series.stored_wh)
        modelled_wh = np.minimum(stored_wh[:-1] + states.likely.gain_wh - cost_wh, states.likely.full_wh)
        gain_wh = states.likely.gain_wh + stored_wh[1:] - modelled_wh
        off_wh = np.abs(gain_wh - states.likely.gain_wh).max(initial=0.0)
        _log.info("%s: the programme follows the simulated battery, by up to %.3f Wh", states.satellite, off_wh)
        floor_wh = states.likely.floor_wh + self._risk_wh(flown, states.satellite)
        return replace(states, likely=replace(states.likely, gain_wh=gain_wh, floor_wh=floor_wh))

    def _risk_wh(self, flown: Flown, satellite: str) -> float:
        """How much higher the floors must be for the risk to be as allowed; negative where they may be lower.

        0 where the policy holds the charge to its corner instead of a risk.
        """
        risk_pct = self.week.mission.policy.floor_risk_pct
        if risk_pct is None:
            return 0.0
        short_pct = np.sort(flown.short_pct(satellite))[::-1]
        allowed = 1e-2 * risk_pct
        broken = max((k for k in range(len(short_pct)) if share_of(k, len(short_pct)).high <= allowed), default=0)
        power, corner = self.week.powers[satellite], self.week.mission.policy.charge_corner
        return float(power.stored_wh(100.0, corner) - power.stored_wh(100.0 - short_pct[broken], corner))

    def _tightened(self, problem: Problem, flown: Flown, faults: list[Fault]) -> Problem:
        """More energy asked for around each breach: what was missing, and a margin."""
        tighter = []
        for states in problem.states:
            floor_wh = states.likely.floor_wh.copy()
            series, power = flown.worst[states.satellite], self.week.powers[states.satellite]
            for fault in (fault for fault in faults if fault.satellite == states.satellite):
                if fault.rule == "floor risk":
                    floor_wh += max(self._risk_wh(flown, states.satellite), 0.0) + MARGIN_WH
                elif fault.rule in CHARGE_LIMITS or _is_sag(fault):
                    missing_pct = _missing_pct(fault, series, power)
                    missing_wh = float(power.stored_wh(100.0) - power.stored_wh(100.0 - missing_pct)) + MARGIN_WH
                    event = int(np.searchsorted(states.events_s, _lowest_s(series, fault)))
                    for at in {max(event - 1, 1), min(max(event, 1), len(floor_wh) - 1)}:
                        # a floor was believed to hold; a depth counts from what there was
                        there_wh = float(np.interp(states.events_s[at], series.time_s, series.stored_wh))
                        held_wh = max(floor_wh[at], there_wh) if fault.rule == "depth of discharge" else floor_wh[at]
                        floor_wh[at] = min(held_wh + missing_wh, states.likely.full_wh)
            tighter.append(replace(states, likely=replace(states.likely, floor_wh=floor_wh)))
        return replace(problem, states=tuple(tighter))


def _is_proved(solution: Solution) -> bool:
    return solution.gap_pct <= 100 * SOLVER_GAP


def _preferred(new: Solution, old: Solution) -> bool:
    """Whether a plan is better, or as good within the gap and proved where the other is not."""
    as_good = new.objective >= old.objective - SOLVER_GAP * abs(old.objective)
    return new.objective > old.objective or (as_good and _is_proved(new) and not _is_proved(old))


def _is_sag(fault: Fault) -> bool:
    """The satellite's own loads pull an all but empty battery down: more charge there is the mend."""
    return fault.rule == "cell voltage under load" and fault.session is None


def _missing_pct(fault: Fault, series, power: SatellitePower) -> float:
    """How much more charge is missing where a limit breaks; for a voltage, along the open-circuit curve."""
    if not _is_sag(fault):
        return abs(fault.value - fault.bound)
    soc_pct = np.linspace(0.0, 100.0, 2001)
    cells = power.satellite.spacecraft.battery.cells_series
    rest_v = np.asarray(power.pack_open_circuit_v(soc_pct)) / cells
    now_pct = float(series.soc_at_pct(_lowest_s(series, fault)))
    wanted_v = np.interp(now_pct, soc_pct, rest_v) + fault.bound - fault.value
    return max(float(np.interp(wanted_v, rest_v, soc_pct)) - now_pct, 0.1)


def _lowest_s(series, fault: Fault) -> float:
    """When a breach that begins at the fault's time is deepest."""
    if _is_sag(fault):
        later = np.flatnonzero(series.time_s[:-1] >= fault.time_s - 1e-3)
        return float(series.time_s[later[np.argmin(np.abs(series.lowest_cell_v[later] - fault.value))]])
    if fault.rule == "depth of discharge":
        return series.lowest(fault.time_s, fault.time_s + DAY_S)[0]
    later = np.flatnonzero(series.time_s >= fault.time_s - 1e-3)
    return float(series.time_s[later[np.argmin(np.abs(series.soc_pct[later] - fault.value))]])


def _in_problem(problem: Problem, chosen: dict[tuple, tuple[float, float]]) -> Chosen:
    """What is chosen, by the places of a problem's candidates."""
    keys = [candidate_key(candidate) for candidate in problem.candidates]
    return [(i, *chosen[key]) for i, key in enumerate(keys) if key in chosen]


def candidate_key(candidate: Candidate) -> tuple:
    """What tells candidates apart."""
    return candidate.pass_id, candidate.mode, candidate.profile.label, candidate.opens_s


def on_whole_seconds(candidate: Candidate, on_s: float, off_s: float) -> Session:
    """Start and stop on whole seconds inside the window; frozen sessions (no play at all) stay as they are."""
    if candidate.window_s - candidate.shortest_s < 2.0:
        return candidate.session(candidate.opens_s, candidate.closes_s)
    first, last = np.ceil(candidate.opens_s - 1e-6), np.floor(candidate.closes_s + 1e-6)
    start, stop = float(np.clip(np.round(on_s), first, last)), float(np.clip(np.round(off_s), first, last))
    shortest = float(np.ceil(candidate.shortest_s))
    if stop - start < shortest:
        stop = min(start + shortest, last)
        start = stop - shortest
    return candidate.session(start, stop)


def no_solution(week: Week, problem: Problem, solution: Solution) -> str:
    """Why the programme has no solution, as far as that can be told."""
    if solution.status == "time limit":
        return "no plan was found within the time limit; allow more time"
    if problem.keep:
        kept = ", ".join(f"{pass_id}:{mode}" for pass_id, mode in sorted(problem.keep))
        return f"no week keeps every limit with all that must be kept ({kept})"
    policy = problem.policy
    asked = {
        "policy.daily_contact_modes": policy.daily_contact_modes,
        "policy.longest_gap_h": policy.longest_gap_h,
        "policy.cost_budget": policy.cost_budget,
        "policy.upload_lead_h": policy.upload_lead_h,
    }
    stated = ", ".join(f"{key} = {value!r}" for key, value in asked.items() if value not in (None, ()))
    if not stated:
        return "no week was found: the solver finds no choice, not even an empty one, that keeps every limit"
    said = f"no week meets the policy's required contacts within its limits ({stated})"
    return "\n".join([said, *input_cautions(week.mission)])

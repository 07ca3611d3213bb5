"""Solve, re-simulate with the full physics, correct the problem by what that showed, and solve again."""

import logging
import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from planner.errors import NoWeekError
from planner.mission.contacts import Session
from planner.schedule.account import worth_mbit
from planner.schedule.cautions import input_cautions
from planner.schedule.checks import Fault, find_faults
from planner.schedule.corrections import Chosen, followed, granted, is_sag, tightened
from planner.schedule.flown import CHARGE_LIMITS, Flown
from planner.schedule.optimise import WeekProgramme, plan_programme, staying_programme
from planner.schedule.problem import Problem
from planner.schedule.programme import Solution, solve
from planner.schedule.restore import put_back
from planner.schedule.sessions import Candidate
from planner.schedule.uplinks import powers_on_s
from planner.schedule.week import Progress, Week

SOLVER_GAP = 1e-3  # a plan is held to 0.1 % of its programme's optimum …
RELATIVE_GAP = 8.5e-4  # … of which rounding and mending may take a little
COARSE_GAP = 2.5e-2  # coarse enough to end with the first good heuristic
APPROACHES = 1  # more hardly move the corrections
MOST_FULL_SOLVES, MOST_MENDS = 4, 8
NEXT_TO_NOTHING = 1e-4  # of a week's worth
OVERDONE = 1.5  # by this much more with each mend of an allowed risk
MOST_SETTLING, SETTLED_WH = 8, 0.2  # of the floors that stand for an allowed risk, before the search
SHORTEST_SOLVE_S = 3.0  # even when the limit is used up: a mending must come to an end

_log = logging.getLogger(__name__)


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
        if self.problem.frozen:
            self._take_frozen()
        if self.week.mission.policy.floor_risk_pct is not None:
            self._settle_risk()
        few, coarse_bound = self._approach()
        best = None
        for _ in range(MOST_FULL_SOLVES):
            problem, whole = self.problem, True
            week, full = self._solve(problem, RELATIVE_GAP, must=False)
            if full.values is None:
                if best is not None:
                    break
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
        best = self._staying(*best) if any(c.stays for c in self.problem.candidates) else best
        return self._uplinks_high(*best)

    def _uplinks_high(self, flown: Flown, solution: Solution) -> tuple[Flown, Solution]:
        """Contacts that carry commands up moved to the middle of their pass, where that breaks no limit and costs next
        to nothing: a lock that comes late there loses no commands."""
        windows = {(c.pass_id, c.mode, c.opens_s): c for c in self.problem.candidates if c.carries_commands}
        tca_s = self.week.sky.passes.tca_s
        wished = []
        for session in sorted({*flown.sessions} - {*self.problem.frozen, *self.problem.previous}):
            for c in windows.values():
                inside = c.opens_s <= session.tx_on_s + 1e-6 and session.tx_off_s <= c.closes_s + 1e-6
                if (c.pass_id, c.mode) == (session.pass_id, session.mode) and inside:
                    on_s = np.clip(tca_s[c.row] - session.duration_s / 2, c.opens_s, c.closes_s - session.duration_s)
                    wished.append(on_whole_seconds(c, float(on_s), float(on_s) + session.duration_s))
        least_mbit = worth_mbit(flown) * (1 - NEXT_TO_NOTHING)
        high = put_back(flown, wished, lambda f: self._may_stay(f, least_mbit), self.problem.frozen)
        _log.info("%d contacts with uplink put to the middle of their pass", len({*high.sessions} - {*flown.sessions}))
        return high, replace(solution, objective=solution.objective + worth_mbit(high) - worth_mbit(flown))

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

    def _take_frozen(self) -> None:
        """Correct the problem by the sessions that fly whatever is chosen, which may touch a floor as they are."""
        frozen = set(self.problem.frozen)
        own = [(i, c.opens_s, c.closes_s) for i, c in enumerate(self.problem.candidates)
               if c.session(c.opens_s, c.closes_s) in frozen]  # fmt: skip
        self.problem = self._corrected(self.problem, own)
        self.problem = granted(self.problem, self._flown(self.problem, own))

    def _settle_risk(self) -> None:
        """Correct the problem until the floors that stand for the allowed risk move no more: the deeper weeks go, the
        more they differ."""
        self.problem = self._corrected(self.problem, [])
        for _ in range(MOST_SETTLING):
            before = self.problem
            week, coarse = self._solve(before, COARSE_GAP)
            assert coarse.values is not None  # without a solution `_solve` raises
            self.problem = self._corrected(before, week.sessions(coarse.values))
            pairs = zip(before.states, self.problem.states, strict=True)
            if all(abs((now.likely.risk_wh or 0.0) - (was.likely.risk_wh or 0.0)) < SETTLED_WH for was, now in pairs):
                return

    def _mended(self, problem: Problem, week: WeekProgramme, solution: Solution):
        """(flown, solution, what is chosen by candidate key) once no limit breaks; None if that is not reached, and the
        problem is corrected by what was."""
        by_key: dict[tuple, tuple[float, float]] = {}
        for mend in range(MOST_MENDS):
            if solution.values is None:
                break
            chosen = week.sessions(solution.values)
            flown = self._flown(week.problem, chosen)
            faults = self._faults(problem, flown)
            by_key = {candidate_key(week.problem.candidates[i]): (on_s, off_s) for i, on_s, off_s in chosen}
            if not faults:
                _log.info("%d sessions keep every limit in the full physics", len(flown.sessions))
                return flown, solution, by_key
            self.broke = faults[0].text
            for fault in faults:
                _log.info("the full physics breaks a limit: %s", fault.text)
            deep = [fault for fault in faults if fault.rule == "depth of discharge"]
            self.problem = tightened(self.problem, flown, deep)  # sessions that add Sun may lift a cycle's peak
            small = week.problem.only({i for i, *_ in chosen})
            tighter = tightened(self._giving_up(small, faults), flown, faults, OVERDONE ** (mend + 1))
            week, solution = self._solve(tighter, RELATIVE_GAP / 10, must=False)
        self.problem = self._corrected(self.problem, _in_problem(self.problem, by_key))
        return None

    def _faults(self, problem: Problem, flown: Flown) -> list[Fault]:
        """Broken limits; frozen sessions stay as they are, whatever newer elements say of them. What a battery had to
        give to those that have begun is past; what those to come take of it counts."""
        begun = {s for s in problem.frozen if powers_on_s(self.week.mission, s) < max(problem.aboard.since_s, 0.0)}
        frozen = set(problem.frozen)
        return [f for f in find_faults(flown) if f.session not in (begun if f.satellite else frozen)]

    def _giving_up(self, problem: Problem, faults: list[Fault]) -> Problem:
        """What breaks a limit of its own is given up; a rule of the week that breaks is told."""
        gone = set()
        for fault in faults:
            if fault.rule in (*CHARGE_LIMITS, "floor risk") or is_sag(fault):
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
        return Flown(self.week, tuple(sorted(sessions)), self.problem.aboard)

    def _corrected(self, problem: Problem, chosen: Chosen) -> Problem:
        """The problem with costs exact at these sessions and gains as the full physics has them."""
        flown = self._flown(problem, chosen)
        candidates = list(problem.candidates)
        for i, on_s, off_s in chosen:
            candidates[i] = replace(candidates[i], near_s=(on_s, off_s))
        nearer = replace(problem, candidates=tuple(candidates))
        states = [followed(nearer, states, chosen, flown) for states in problem.states]
        return replace(nearer, states=tuple(states))


def _is_proved(solution: Solution) -> bool:
    return solution.gap_pct <= 100 * SOLVER_GAP


def _preferred(new: Solution, old: Solution) -> bool:
    """Whether a plan is better, or as good within the gap and proved where the other is not."""
    as_good = new.objective >= old.objective - SOLVER_GAP * abs(old.objective)
    return new.objective > old.objective or (as_good and _is_proved(new) and not _is_proved(old))


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

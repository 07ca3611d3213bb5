"""The plan: solve, re-simulate with the full physics, tighten where a limit breaks, and again."""

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planner.errors import NoWeekError
from planner.mission.contacts import Session
from planner.schedule.candidates import Refusal, Wishes, pose
from planner.schedule.checks import Fault, breach_text, find_faults
from planner.schedule.energy import CORNER
from planner.schedule.flown import Flown
from planner.schedule.optimise import WeekProgramme, bound_programme, plan_programme
from planner.schedule.problem import Problem
from planner.schedule.programme import Solution, solve, solve_all
from planner.schedule.sessions import Candidate
from planner.schedule.week import Progress, Week

RELATIVE_GAP = 8e-4  # a little inside the 0.1 % that a plan is held to
MOST_ROUNDS = 12
WHOLE_SECONDS = 1.0  # sessions start and stop on whole seconds
MARGIN_WH = 0.005  # asked for beyond a breach, so that rounding does not bring it back


@dataclass(frozen=True, eq=False)
class Plan:
    """Sessions that keep every limit, the programme's own account of them, and how they were found."""

    flown: Flown
    problem: Problem
    refusals: list[Refusal]
    solution: Solution
    upper_bound_mbit: float
    rounds: int
    seconds: dict[str, float]

    @property
    def gap_pct(self) -> float:
        """Volume against the bound."""
        return max(0.0, 100 * (1 - self.flown.total_mbit / self.upper_bound_mbit)) if self.upper_bound_mbit > 0 else 0.0


def make_plan(
    week: Week,
    wishes: Wishes = Wishes(),
    *,
    time_limit_s: float | None = None,
    progress: Progress = lambda stage: None,
    cancelled: Callable[[], bool] = lambda: False,
) -> Plan:
    """The best week that is safe at the pessimistic corner.

    Raises
    ------
    NoWeekError : no week keeps the limits; tells which and by how much
    KeyboardInterrupt : cancelled or interrupted
    """
    began = time.perf_counter()
    _check_idle(week)
    problem, refusals = pose(week, wishes)
    _check_wishes(problem, refusals, week)
    programme = plan_programme(problem)
    posed = time.perf_counter()
    progress("schedule and its bound")
    solution, bound = solve_all(
        [programme.programme, bound_programme(problem).programme],
        relative_gap=RELATIVE_GAP,
        time_limit_s=time_limit_s,
        cancelled=cancelled,
    )
    solved = time.perf_counter()
    rounds = 1
    while True:
        flown = _flown(week, programme, solution)
        faults = find_faults(flown)
        if not faults:
            break
        if rounds == MOST_ROUNDS:
            raise NoWeekError(f"no plan kept every limit after {rounds} rounds; the last one broke: {faults[0].text}")
        _tighten(programme, flown, faults)
        progress(f"tightened after a check with the full physics, round {rounds + 1}")
        solution = solve(programme.programme, relative_gap=RELATIVE_GAP, time_limit_s=time_limit_s, cancelled=cancelled)
        rounds += 1
    checked = time.perf_counter()
    seconds = {"posing": posed - began, "first solve and bound": solved - posed, "checks and rounds": checked - solved}
    return Plan(flown, problem, refusals, solution, bound.bound, rounds, seconds)


def _check_idle(week: Week) -> None:
    """Without any session the limits must hold, or no week can."""
    idle = Flown(week, ())
    lines = [
        f"even without a session: {breach_text(idle, satellite, breach)}"
        for satellite, series in idle.worst.items()
        for breach in series.breaches(week.mission.policy)
    ]
    if lines:
        raise NoWeekError("\n".join(lines[:10]))


def _check_wishes(problem: Problem, refusals: list[Refusal], week: Week) -> None:
    """What must be kept must be possible on its own."""
    possible = {(c.pass_id, c.mode) for c in problem.candidates}
    why = {(week.sky.passes.pass_id[refusal.row], refusal.mode): refusal.reason for refusal in refusals}
    lines = [
        f"keep {pass_id}:{mode}: {why.get((pass_id, mode), 'no such pass in the span')}"
        for pass_id, mode in sorted(problem.keep - possible)
    ]
    if lines:
        raise NoWeekError("\n".join(lines))


def _flown(week: Week, programme: WeekProgramme, solution: Solution) -> Flown:
    """The solution's sessions on whole seconds."""
    if solution.values is None:
        raise NoWeekError(_no_solution(programme.problem, solution))
    chosen = programme.sessions(solution.values)
    candidates = programme.problem.candidates
    return Flown(week, tuple(sorted(_on_whole_seconds(candidates[i], on_s, off_s) for i, on_s, off_s in chosen)))


def _on_whole_seconds(candidate: Candidate, on_s: float, off_s: float) -> Session:
    """Start and stop rounded inside the window; frozen sessions (no play at all) stay as they are."""
    if candidate.window_s - candidate.shortest_s < 2 * WHOLE_SECONDS:
        return candidate.session(candidate.opens_s, candidate.closes_s)
    first, last = np.ceil(candidate.opens_s - 1e-6), np.floor(candidate.closes_s + 1e-6)
    start = float(np.clip(np.ceil(on_s - 1e-6), first, last))
    stop = float(np.clip(np.floor(off_s + 1e-6), first, last))
    shortest = np.ceil(candidate.shortest_s)
    if stop - start < shortest:
        stop = min(start + shortest, last)
        start = stop - shortest
    return candidate.session(start, stop)


def _no_solution(problem: Problem, solution: Solution) -> str:
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
    return f"no week meets the policy's required contacts within its limits ({stated or solution.status})"


def _tighten(programme: WeekProgramme, flown: Flown, faults: list[Fault]) -> None:
    """Ask for more just where the full physics broke a limit."""
    for fault in faults:
        if fault.rule in ("SoC floor", "end-of-span SoC", "depth of discharge"):
            _raise_floor(programme, flown, fault)
        else:
            _forbid(programme, flown, fault)


def _raise_floor(programme: WeekProgramme, flown: Flown, fault: Fault) -> None:
    satellite = fault.text.split(":")[0]
    series, power = flown.worst[satellite], flown.week.powers[satellite]
    later = series.time_s >= fault.time_s
    lowest_s = float(series.time_s[later][np.argmin(np.abs(series.soc_pct[later] - fault.value))])
    if fault.rule == "depth of discharge":
        lowest_s, short_pct = series.lowest(fault.time_s)[0], fault.value - fault.bound
    else:
        short_pct = fault.bound - fault.value
    short_wh = float(power.stored_wh(100.0, CORNER) - power.stored_wh(100.0 - short_pct, CORNER))
    programme.raise_floor(satellite, lowest_s, short_wh + MARGIN_WH)


def _forbid(programme: WeekProgramme, flown: Flown, fault: Fault) -> None:
    """A session that breaks a limit of the cell or the bus is not flown; others are left to the optimiser."""
    if fault.session is None:
        raise NoWeekError(f"no plan keeps this limit: {fault.text}")
    for index, candidate in enumerate(programme.problem.candidates):
        if (candidate.pass_id, candidate.mode) == (fault.session.pass_id, fault.session.mode):
            programme.forbid(index)

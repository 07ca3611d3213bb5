"""The plan: solve, re-simulate with the full physics, tighten where a limit breaks, and again."""

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from planner.errors import NoWeekError
from planner.mission.contacts import Session
from planner.schedule.candidates import Refusal, Wishes, pose
from planner.schedule.checks import Fault, breach_text, find_faults
from planner.schedule.energy import CORNER
from planner.schedule.flown import Flown
from planner.schedule.optimise import WeekProgramme, bound_programme, plan_programme
from planner.schedule.problem import Problem
from planner.schedule.programme import Solution, Solving, solve
from planner.schedule.sessions import Candidate
from planner.schedule.week import Progress, Week

SOLVER_GAP = 1e-3  # a plan is held to 0.1 % of its programme's optimum …
RELATIVE_GAP = 7e-4  # … of which rounding and mending may take a little
COARSE_GAP = 1e-2
BOUND_GAP = 2e-3
MOST_FULL_SOLVES, MOST_MENDS = 3, 6
SHORTEST_SOLVE_S = 1.0
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

    The bound is solved beside the plan. A first, coarse solution shows how the real battery departs from the
    programme's; the programme is corrected by that and solved to the gap; what still breaks a limit is mended among
    the chosen sessions, and if that costs more than the gap allows, all is solved once more.

    Raises
    ------
    NoWeekError : no week keeps the limits; tells which and by how much
    KeyboardInterrupt : cancelled or interrupted
    """
    clock = _Stopwatch(time_limit_s)
    _check_idle(week)
    problem, refusals = pose(week, wishes)
    _check_wishes(problem, refusals, week)
    programme = plan_programme(problem)
    clock.lap("posing")
    bounding = Solving(bound_programme(problem).programme, relative_gap=BOUND_GAP, time_limit_s=time_limit_s)
    with bounding:
        progress("schedule: first look")
        first = solve(programme.programme, relative_gap=COARSE_GAP, time_limit_s=clock.left_s(), cancelled=cancelled)
        _follow(week, programme, first)
        clock.lap("first look")
        search = _Search(week, programme, clock, progress, cancelled)
        flown, solution = search.run()
        clock.lap("solving and checking")
        progress("schedule: bound")
        bound = bounding.solution(cancelled)
        clock.lap("waiting for the bound")
    return Plan(flown, problem, refusals, solution, bound.bound, search.rounds, clock.laps)


class _Stopwatch:
    """How long the stages took, and how much of the limit is left."""

    def __init__(self, limit_s: float | None):
        self._limit_s, self._began = limit_s, time.perf_counter()
        self._last, self.laps = self._began, {}

    def lap(self, stage: str) -> None:
        now = time.perf_counter()
        self.laps[stage], self._last = now - self._last, now

    def left_s(self) -> float | None:
        if self._limit_s is None:
            return None
        return max(self._limit_s - (time.perf_counter() - self._began), SHORTEST_SOLVE_S)


@dataclass
class _Search:
    """Solve, re-simulate, tighten where a limit breaks, until nothing does."""

    week: Week
    programme: WeekProgramme
    clock: _Stopwatch
    progress: Progress
    cancelled: Callable[[], bool]
    rounds: int = 0

    def run(self) -> tuple[Flown, Solution]:
        """Sessions that keep every limit, and their solution; its bound is that of the last unrestricted programme."""
        best = None
        for _ in range(MOST_FULL_SOLVES):
            full = self._solve(self.programme)
            mended = self._mend(full)
            if mended and (best is None or mended[1].objective > best[1].objective):
                best = mended[0], replace(mended[1], bound=full.bound, status=full.status)
            if best and best[1].gap_pct <= 100 * SOLVER_GAP:
                break
        if best is None:
            raise NoWeekError(f"no plan kept every limit after {self.rounds} solutions; the last one broke: {self.broke}")
        return best

    def _mend(self, solution: Solution) -> tuple[Flown, Solution] | None:
        """The solution made safe by cutting its own sessions, at most MOST_MENDS times; None if that fails."""
        for _ in range(MOST_MENDS):
            flown = _flown(self.week, self.programme, solution)
            faults = find_faults(flown)
            if not faults:
                return flown, solution
            self.broke = faults[0].text
            _tighten(self.programme, flown, faults)
            chosen = {index for index, *_ in self.programme.sessions(solution.values)}
            solution = self._solve(self.programme.only(chosen))
            if solution.values is None:
                return None
        return None

    def _solve(self, programme: WeekProgramme) -> Solution:
        self.rounds += 1
        self.progress(f"schedule: solution {self.rounds}")
        return solve(
            programme.programme, relative_gap=RELATIVE_GAP, time_limit_s=self.clock.left_s(), cancelled=self.cancelled
        )


def _follow(week: Week, programme: WeekProgramme, solution: Solution) -> None:
    """Let the programme's battery follow the simulated one along a first solution."""
    flown = _flown(week, programme, solution)
    chosen = programme.sessions(solution.values)
    for states in programme.problem.states:
        series = flown.worst[states.satellite]
        stored_wh = np.interp(states.events_s, series.time_s, series.stored_wh)
        programme.follow(states.satellite, chosen, stored_wh)


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

"""The plan: solve, re-simulate with the full physics, tighten where a limit breaks, and again."""

import logging
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planner.errors import NoWeekError
from planner.schedule.candidates import Refusal, pose
from planner.schedule.cautions import input_cautions
from planner.schedule.checks import breach_text, find_faults
from planner.schedule.flown import Flown
from planner.schedule.optimise import bound_programme
from planner.schedule.problem import Problem
from planner.schedule.programme import Solution, Solving
from planner.schedule.search import Search, Stopwatch
from planner.schedule.week import Progress, Week
from planner.schedule.wishes import Wishes

BOUND_GAP = 2e-3
_log = logging.getLogger(__name__)


@dataclass(frozen=True, eq=False)
class Plan:
    """Sessions that keep every limit, the programme's own account of them, and how they were found.

    `problem` is as posed, `corrected` as last solved: its costs and gains follow the simulated battery.
    """

    flown: Flown
    problem: Problem
    corrected: Problem
    refusals: list[Refusal]
    solution: Solution
    upper_bound_mbit: float
    solutions: int
    seconds: dict[str, float]

    @property
    def gap_pct(self) -> float:
        """Volume against the bound."""
        return max(0.0, 100 * (1 - self.flown.total_mbit / self.upper_bound_mbit)) if self.upper_bound_mbit > 0 else 0.0


def make_plan(
    week: Week,
    wishes: Wishes,
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
    stopwatch = Stopwatch(time_limit_s)
    _check_idle(week)
    _check_aboard(week, wishes)
    problem, refusals = pose(week, wishes)
    _check_wishes(problem, refusals, week)
    stopwatch.lap("posing")
    relaxed = bound_programme(problem).programme
    with Solving(relaxed, relative_gap=BOUND_GAP, time_limit_s=time_limit_s) as bounding:
        search = Search(week, problem, stopwatch, progress, cancelled)
        flown, solution = search.run()
        stopwatch.lap("solving and checking")
        progress("schedule, upper bound")
        bound = bounding.solution(cancelled)
        _log.info("no week brings more than %.1f Mbit", bound.bound)
        stopwatch.lap("waiting for the bound")
    bound_mbit = min(most_there_is_mbit(problem), bound.bound if np.isfinite(bound.bound) else np.inf)
    bound_mbit = max(flown.total_mbit, bound_mbit)  # the solver's rounding
    return Plan(flown, problem, search.problem, refusals, solution, bound_mbit, search.solutions, stopwatch.laps)


def most_there_is_mbit(problem: Problem) -> float:
    """A bound that needs no solver: all data there are, and all that the windows could send."""
    data = sum(float(states.stored_mbit.sum() + states.produced_mbit.sum()) for states in problem.states)
    sent = [max(problem.candidates[i].most_mbit for i in group) for group in problem.of_pass_and_mode()]
    return min(data, float(sum(sent)))


def _check_idle(week: Week) -> None:
    """Without any session the limits must hold, or no week can."""
    idle = Flown(week, ())
    lines = [
        f"even without a session: {breach_text(idle, satellite, breach)}"
        for satellite in week.powers
        for breach in idle.breaches(satellite)
    ]
    if lines:
        raise NoWeekError("\n".join([*lines[:10], *input_cautions(week.mission)]))


def _check_aboard(week: Week, wishes: Wishes) -> None:
    """With what flies whatever is chosen, and nothing else, no battery may break a limit from the freeze on."""
    flown = Flown(week, wishes.frozen, wishes.aboard)
    begun_s = max(wishes.freeze_until_s, 0.0)
    lines = [
        f"what is aboard already, and flies whatever is planned, breaks a limit: {fault.text}"
        for fault in find_faults(flown)
        if fault.satellite and fault.time_s >= begun_s
    ]
    if lines:
        mend = "cancel contacts by an uplink before them, then plan from a file without these"
        raise NoWeekError("\n".join([*lines[:10], mend]))


def _check_wishes(problem: Problem, refusals: list[Refusal], week: Week) -> None:
    """What must be kept must be possible on its own."""
    possible = {(c.pass_id, c.mode) for c in problem.candidates}
    why = {(week.sky.passes.pass_id[refusal.row], refusal.mode): refusal.reason for refusal in refusals}
    lines = [
        f"keep {pass_id}:{mode}: {why.get((pass_id, mode), 'no such pass in the span')}"
        for pass_id, mode in sorted(problem.keep - possible)
    ]
    lines += _days_without_contact(problem, week)
    if lines:
        raise NoWeekError("\n".join(lines))


def _days_without_contact(problem: Problem, week: Week) -> list[str]:
    """Whole days on which no usable pass of a daily mode lies, so that the policy cannot be met."""
    modes = " or ".join(problem.policy.daily_contact_modes)
    days = problem.whole_days() if problem.policy.daily_contact_modes else []
    date = week.sky.clock.iso
    return [
        f"policy.daily_contact_modes: no usable pass of {states.satellite} in {modes} on {date(begin_s)[:10]}"
        for states in problem.states
        for begin_s, end_s in days
        if not problem.within_day(states.satellite, begin_s, end_s)
    ]

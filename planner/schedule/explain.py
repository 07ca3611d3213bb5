"""What it would cost to fly a pass that was left out."""

from collections.abc import Callable
from dataclasses import dataclass, replace

from planner.schedule.frames import contact_id
from planner.schedule.optimise import plan_programme
from planner.schedule.plan import Plan
from planner.schedule.programme import solve
from planner.schedule.sessions import Candidate

EXPLAIN_GAP = 5e-4


@dataclass(frozen=True)
class IfKept:
    """A left-out pass forced into the plan, the planned contacts free to shrink or give way.

    lost_mbit is an upper bound on the loss: passes that are not in the plan could make up for part of it.
    """

    pass_id: str
    mode: str
    possible: bool
    lost_mbit: float
    give_way: tuple[str, ...]

    @property
    def text(self) -> str:
        if not self.possible:
            return f"{self.mode}: not possible beside what must be flown"
        if not self.give_way:
            return f"{self.mode}: would cost at most {max(self.lost_mbit, 0.0):.0f} Mbit, shortening others"
        return f"{self.mode}: would cost at most {max(self.lost_mbit, 0.0):.0f} Mbit and {', '.join(self.give_way)}"


def explain(plan: Plan, progress: Callable[[str], None], cancelled: Callable[[], bool]) -> dict[str, IfKept]:
    """For every pass left out, what keeping it would cost; by pass id. Takes a solution for each."""
    planned = {(session.pass_id, session.mode) for session in plan.flown.sessions}
    flown_passes = {pass_id for pass_id, _ in planned}
    best: dict[str, Candidate] = {}
    for candidate in plan.corrected.candidates:
        if candidate.pass_id not in flown_passes:
            other = best.get(candidate.pass_id)
            best[candidate.pass_id] = max((c for c in (candidate, other) if c), key=lambda c: c.most_mbit)
    chosen = [c for c in plan.corrected.candidates if (c.pass_id, c.mode) in planned]
    answers = {}
    for number, (pass_id, candidate) in enumerate(sorted(best.items()), start=1):
        progress(f"explaining pass {number} of {len(best)}")
        answers[pass_id] = _if_kept(plan, chosen, candidate, cancelled)
    return answers


def _if_kept(plan: Plan, chosen: list[Candidate], candidate: Candidate, cancelled) -> IfKept:
    wanted = (candidate.pass_id, candidate.mode)
    problem = replace(plan.corrected, candidates=(*chosen, candidate), keep=plan.problem.keep | {wanted})
    week = plan_programme(problem)
    solution = solve(week.programme, relative_gap=EXPLAIN_GAP, cancelled=cancelled)
    if solution.values is None:
        return IfKept(*wanted, possible=False, lost_mbit=float("nan"), give_way=())
    flown = {problem.candidates[i].pass_id + problem.candidates[i].mode for i, *_ in week.sessions(solution.values)}
    gone = [s for s in plan.flown.sessions if s.pass_id + s.mode not in flown]
    lost_mbit = plan.solution.objective - solution.objective
    return IfKept(*wanted, True, lost_mbit, tuple(contact_id(session) for session in gone))

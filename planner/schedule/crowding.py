"""Time that sessions share: on a common grid of steps, no more seconds on air than a step has.

Without these rows the relaxation would let two stations that see the satellite at once both have all of it.
"""

from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from planner.schedule.problem import Problem
from planner.schedule.programme import Programme
from planner.schedule.sessions import Candidate

STEP_S = 30.0
EVEN = 0.05  # rates and prices that vary by less than this share are taken as the same


def fits(problem: Problem, i: int, j: int) -> bool:
    """Whether `j` can follow `i` when both are as short as allowed."""
    first, second = problem.candidates[i], problem.candidates[j]
    soonest_s = first.opens_s + first.shortest_s + problem.apart_s(first, second)
    return soonest_s <= second.closes_s - second.shortest_s


@dataclass(frozen=True)
class Step:
    """Part of a window: its fastest rate and its cheapest price."""

    begin_s: float
    end_s: float
    fastest_mbps: float
    cheapest_per_s_wh: float

    @property
    def seconds(self) -> float:
        return self.end_s - self.begin_s


@dataclass(frozen=True)
class OnAir:
    """Columns of one candidate's seconds on air, step by step."""

    steps: list[Step]
    columns: list[int]

    @property
    def pairs(self) -> list[tuple[Step, int]]:
        return list(zip(self.steps, self.columns, strict=True))


def seconds_on_air(programme: Programme, candidate: Candidate, v) -> OnAir:
    """Add a candidate's seconds on air in each step.

    They add up to its length, each is worth at most the fastest rate, and the share of a step on air rises once at most
    through the window: an unbroken session. (Rows of consecutive ones: the relaxation of one candidate is exact.)
    """
    steps = list(steps_of(candidate))
    columns = [programme.variable(0, step.seconds) for step in steps]
    for step, column in zip(steps, columns, strict=True):
        programme.row([(column, 1.0), (v.flown, -step.seconds)], highest=0.0)
    programme.row([(v.length, 1.0), *((column, -1.0) for column in columns)], lowest=0.0, highest=0.0)
    rates = [(column, -step.fastest_mbps) for step, column in zip(steps, columns, strict=True)]
    programme.row([(v.volume, 1.0), *rates], highest=0.0)
    rises = [programme.variable(0, 1) for _ in steps]
    each = [[(column, 1 / step.seconds)] for step, column in zip(steps, columns, strict=True)]
    for before, share, rise in zip([[], *each], each, rises, strict=False):
        programme.row([*share, *((column, -factor) for column, factor in before), (rise, -1.0)], highest=0.0)
    programme.row([*((rise, 1.0) for rise in rises), (v.flown, -1.0)], highest=0.0)
    return OnAir(steps, columns)


def crowded(problem: Problem) -> list[tuple[int, int]]:
    """Pairs in their only possible order, first to second, that could share time if both are cut short."""
    pairs = list(problem.neighbours())
    return [
        order
        for i, j in pairs
        if fits(problem, i, j) != fits(problem, j, i)
        for order in [(i, j) if fits(problem, i, j) else (j, i)]
    ]


def share_time(problem: Problem, programme: Programme, variables: list, on_air: dict[int, OnAir]) -> None:
    """Limits on what cannot be on air together, among the candidates of `on_air`.

    Valid for every real week: no more seconds on air than a step has; and where two sessions can fly only in one order,
    the first leaves the tail of its window to the second, and the second the head of its window to the first.
    """
    held = defaultdict(list)
    for i, own in on_air.items():
        candidate = problem.candidates[i]
        for step, column in own.pairs:
            for resource in _resources(problem, candidate):
                held[(*resource, int(step.begin_s // STEP_S))].append(column)
    for columns in held.values():
        if len(columns) > 1:
            programme.row([(column, 1.0) for column in columns], highest=STEP_S)
    for i, j in crowded(problem):
        first, second, a, b = problem.candidates[i], problem.candidates[j], variables[i], variables[j]
        apart_s = problem.apart_s(first, second)
        latest_stop_s = second.closes_s - second.shortest_s - apart_s
        earliest_start_s = first.opens_s + first.shortest_s + apart_s
        for step, column in on_air[i].pairs if i in on_air else ():
            if step.end_s > latest_stop_s:
                _yield_time(programme, column, a, b, step.seconds, max(latest_stop_s - step.begin_s, 0.0))
        for step, column in on_air[j].pairs if j in on_air else ():
            if step.begin_s < earliest_start_s:
                _yield_time(programme, column, b, a, step.seconds, max(step.end_s - earliest_start_s, 0.0))
        covered_s = max(first.closes_s, second.closes_s) - min(first.opens_s, second.opens_s)
        terms = [(a.length, 1.0), (b.length, 1.0), (a.flown, apart_s), (b.flown, apart_s)]
        programme.row(terms, highest=covered_s + apart_s)


def _yield_time(programme: Programme, column: int, own, other, seconds: float, left_s: float) -> None:
    """At most `left_s` of a step's seconds when the other session flies too."""
    programme.row([(column, 1.0), (own.flown, -left_s), (other.flown, seconds - left_s)], highest=seconds - left_s)


def steps_of(candidate: Candidate) -> Iterator[Step]:
    """The steps of a candidate's window."""
    time_s, rate = candidate.profile.time_s, candidate.profile.interval_rate_mbps
    cost = candidate.least
    first, last = int(candidate.opens_s // STEP_S), int(np.ceil(candidate.closes_s / STEP_S))
    for step in range(first, last):
        begin_s, end_s = max(step * STEP_S, candidate.opens_s), min((step + 1) * STEP_S, candidate.closes_s)
        inside = (time_s[1:] > begin_s) & (time_s[:-1] < end_s)
        priced = (cost.edges_s[1:] > begin_s) & (cost.edges_s[:-1] < end_s)
        cheapest = cost.per_s_wh[priced].min() if priced.any() else cost.per_s_wh.min()
        yield Step(begin_s, end_s, float(rate[inside].max(initial=0.0)), float(cheapest))


def uneven(candidate: Candidate) -> bool:
    """Whether it matters for volume or price which seconds of the window are used."""
    rates = [step.fastest_mbps for step in steps_of(candidate)]
    prices = candidate.likely.per_s_wh
    return min(rates) < (1 - EVEN) * max(rates) or np.ptp(prices) > EVEN * abs(prices.mean())


def _resources(problem: Problem, candidate: Candidate) -> list[tuple]:
    """What one session at a time may hold: the satellite in this mode, the station's antenna in this mode.

    Modes that fly together are counted apart, which only loosens the limit.
    """
    held: list[tuple] = [("satellite", candidate.satellite, candidate.mode)]
    if len(problem.states) > 1:
        held.append(("station", candidate.station, candidate.mode))
    return held

"""Battery life: charge cycles counted by rainflow, and the share of the cycle life they use."""

import itertools
from dataclasses import dataclass

import numpy as np

from planner.mission.power import Battery
from planner.power import chemistry


@dataclass(frozen=True)
class Cycle:
    """A closed cycle (count 1) or an open half (count 0.5) of the given depth, between two rows of the history."""

    depth: float
    mean: float
    count: float
    begin: int
    end: int


def turning_points(history) -> np.ndarray:
    """Indices at which `history` (n,) turns, its two ends included; of a level stretch the first row."""
    history = np.asarray(history, dtype=float)
    distinct = np.flatnonzero(np.concatenate([[True], np.diff(history) != 0]))
    if len(distinct) < 3:
        return distinct
    rising = np.diff(history[distinct]) > 0
    turns = np.flatnonzero(rising[1:] != rising[:-1]) + 1
    return distinct[np.concatenate([[0], turns, [len(distinct) - 1]])]


def count_cycles(history) -> list[Cycle]:
    """Rainflow count of a history (n,), in its own unit.

    Source: ASTM E1049-85, section 5.4.4 (rainflow counting), rules 1 to 6.
    """
    history = np.asarray(history, dtype=float)
    points: list[int] = []
    cycles: list[Cycle] = []

    def cycle(begin: int, end: int, count: float) -> Cycle:
        low, high = sorted((float(history[begin]), float(history[end])))
        return Cycle(high - low, 0.5 * (low + high), count, begin, end)

    for point in turning_points(history).tolist():
        points.append(point)
        while len(points) >= 3:
            newest = abs(history[points[-1]] - history[points[-2]])
            before = abs(history[points[-2]] - history[points[-3]])
            if newest < before:
                break
            if len(points) == 3:  # the range before holds the starting point: half a cycle
                cycles.append(cycle(points[0], points[1], 0.5))
                del points[0]
            else:
                cycles.append(cycle(points[-3], points[-2], 1.0))
                del points[-3:-1]
    cycles.extend(cycle(begin, end, 0.5) for begin, end in itertools.pairwise(points))
    return cycles


def cycles_to_end_of_life(battery: Battery, depth_pct):
    """Cycles of one depth [%] that use the battery up, by its cycle-life table.

    Straight in the logarithms of both, and carried on beyond the table's ends with the slope of its end pieces.
    """
    table = np.array(battery.cycle_life or chemistry.CYCLE_LIFE[battery.chemistry])
    log_depth, log_cycles = np.log(table).T
    x = np.log(np.maximum(depth_pct, 1e-6))
    piece = np.clip(np.searchsorted(log_depth, x) - 1, 0, len(table) - 2)
    slope = np.diff(log_cycles)[piece] / np.diff(log_depth)[piece]
    return np.exp(log_cycles[piece] + slope * (x - log_depth[piece]))


def life_used_pct(battery: Battery, soc_pct) -> float:
    """Share of the battery's cycle life [%] that a course of charge (n,) [%] uses.

    Source: linear damage accumulation (Palmgren, Miner) over rainflow cycles. Ageing by calendar and by temperature is
    not part of it.
    """
    return 100.0 * sum(
        cycle.count / float(cycles_to_end_of_life(battery, cycle.depth))
        for cycle in count_cycles(soc_pct)
        if cycle.depth > 0
    )

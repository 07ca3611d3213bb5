"""Many perturbed weeks at once, and the probability that one breaks its floor."""

from dataclasses import dataclass
from math import sqrt
from typing import NamedTuple

import numpy as np

from planner.mission.models import Satellite
from planner.power.battery import Cell
from planner.power.corners import Corner
from planner.power.intervals import Intervals
from planner.power.series import cell_intervals, cells_of

GRID_STEPS = 2000  # 0.05 % of charge: the curves' knots fall on it
FURTHEST_SIGMA = 4.0  # draws are cut here, so that no factor turns negative
CONFIDENCE_SIGMA = 1.959964  # two-sided 95 % of the normal distribution


class Perturbation(NamedTuple):
    """Factors on capacity, resistance, array, loads and session power, and the start charge [%]; (samples,) each."""

    capacity: np.ndarray
    resistance: np.ndarray
    array: np.ndarray
    load: np.ndarray
    transmitter: np.ndarray
    start_soc_pct: np.ndarray


@dataclass(frozen=True)
class Batch:
    """Lowest and last state of charge of every perturbed week, (samples,) [%], each of its own full charge."""

    soc_min_pct: np.ndarray
    soc_end_pct: np.ndarray
    perturbation: Perturbation

    def broken(self, soc_floor_pct: float) -> "Share":
        """The share of weeks whose charge falls below the floor, with its 95 % confidence interval."""
        return share_of(int(np.sum(self.soc_min_pct < soc_floor_pct)), len(self.soc_min_pct))


class Share(NamedTuple):
    """An estimated probability and the two ends of its confidence interval."""

    value: float
    low: float
    high: float


def share_of(count: int, samples: int, sigma: float = CONFIDENCE_SIGMA) -> Share:
    """Probability estimated from `count` of `samples`, with its confidence interval (95 % by default).

    Source: the score interval of Wilson, J. American Statistical Association 22 (1927), from memory. Unlike the plain
    one it stays within 0 to 1 and does not shrink to nothing at no count.
    """
    share, weight = count / samples, sigma**2 / samples
    middle = (share + weight / 2) / (1 + weight)
    half = sqrt(share * (1 - share) * weight + weight**2 / 4) / (1 + weight)
    return Share(share, max(0.0, middle - half), min(1.0, middle + half))


def most_broken(samples: int, allowed_pct: float) -> int:
    """The most of `samples` weeks that may break a limit for `share_of` to end at `allowed_pct`; 0 if not even one."""
    counts = (count for count in range(samples) if 100 * share_of(count, samples).high <= allowed_pct)
    return max(counts, default=0)


def perturb(satellite: Satellite, corner: Corner) -> Perturbation:
    """Random factors around a corner: normal with the stated spreads, cut at four sigma, from the stated seed.

    The start charge is uniform within its stated error, which is a bound and not a sigma.
    """
    spread, start = satellite.spacecraft.spread, satellite.start_state
    random = np.random.default_rng(spread.seed)

    def factor(one_sigma_pct: float):
        normal = np.clip(random.standard_normal(spread.samples), -FURTHEST_SIGMA, FURTHEST_SIGMA)
        return np.maximum(1 + one_sigma_pct / 100 * normal, 0.01)

    def start_soc_pct():
        error_pct = random.uniform(-start.soc_error_pct, start.soc_error_pct, spread.samples)
        return np.clip(corner.start_soc_pct + error_pct, 0.0, 100.0)

    return Perturbation(
        capacity=factor(spread.capacity_pct),
        resistance=factor(spread.resistance_pct),
        array=factor(spread.array_pct),
        load=factor(spread.load_pct),
        transmitter=factor(spread.transmitter_pct),
        start_soc_pct=start_soc_pct(),
    )


def run_batch(satellite: Satellite, corner: Corner, intervals: Intervals, perturbation: Perturbation) -> Batch:
    """Walk all perturbed weeks side by side through the intervals.

    The recurrence is that of `recurrence.charge_course_c` on one straight piece per interval: where the curve bends
    inside an interval the bend is neglected, some hundredths of a per cent of charge.
    """
    craft = satellite.spacecraft
    drive = cell_intervals(corner, craft, intervals)
    array_w = intervals.array_w / cells_of(craft)
    session_w = intervals.session_w / cells_of(craft)
    steady_w = intervals.load_w / cells_of(craft) - session_w
    step = _stepper(corner.cell, perturbation)
    soc = perturbation.start_soc_pct / 100.0
    lowest = soc.copy()
    rows = zip(*(column.tolist() for column in (array_w, steady_w, session_w)), *_lists(drive), strict=True)
    for array, steady, session, duration_s, factor, limit_a in rows:
        surplus_w = array * perturbation.array - steady * perturbation.load - session * perturbation.transmitter
        soc = step(soc, surplus_w, duration_s, factor, limit_a)
        np.minimum(lowest, soc, out=lowest)
    return Batch(100.0 * lowest, 100.0 * soc, perturbation)


def _lists(drive):
    return drive.duration_s.tolist(), drive.resistance_factor.tolist(), drive.charge_limit_a.tolist()


def _stepper(cell: Cell, perturbation: Perturbation):
    """One interval for all weeks: (soc, surplus_w, duration_s, factor, limit_a) -> soc, with soc from 0 to 1."""
    grid = np.linspace(0.0, 1.0, GRID_STEPS + 1)
    grid_v, grid_ohm = cell.open_circuit_v(grid * cell.capacity_c), cell.resistance_ohm(grid * cell.capacity_c)
    slope_v = np.append(np.diff(grid_v), grid_v[-1] - grid_v[-2]) * GRID_STEPS
    capacity_c = cell.capacity_c * perturbation.capacity
    efficiency, max_v, leak_per_s = cell.coulombic_efficiency, cell.limits.cell_max_v, cell.leak_a / cell.capacity_c

    def step(soc, surplus_w, duration_s, factor, limit_a):
        index = (soc * GRID_STEPS).astype(np.intp)
        slope = slope_v[index]
        emf_v = grid_v[index] + slope * (soc - grid[index])
        ohm = factor * grid_ohm[index] * perturbation.resistance
        charging = surplus_w >= 0
        rise_ohm = slope * (np.where(charging, efficiency, 1.0) * duration_s) / capacity_c
        stiff_ohm = ohm + 0.5 * rise_ohm
        root = np.sqrt(np.maximum(emf_v * emf_v + 4.0 * stiff_ohm * surplus_w, 0.0))
        current_a = 2.0 * surplus_w / (emf_v + root)
        # beyond the largest power: the current of the largest power
        current_a = np.maximum(current_a, -emf_v / (2.0 * stiff_ohm))
        taper_a = np.maximum(np.minimum((max_v - emf_v) / (ohm + rise_ohm), limit_a), 0.0)
        gained_a = np.where(charging, efficiency * np.minimum(current_a, taper_a), current_a)
        return np.clip(soc + (gained_a / capacity_c - leak_per_s) * duration_s, 0.0, 1.0)

    return step

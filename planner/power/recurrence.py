"""The charge of one cell from interval to interval: the one place where time must be walked.

Within an interval everything but the charge is constant, and the current is the mean over it. Discharge and unhindered
charge solve the constant-power circuit with the mean open-circuit voltage of the interval (implicit midpoint where the
curve is straight). Constant-voltage charging holds the cell at its upper voltage at the interval's end (implicit Euler,
which does not ring). Resistance is that at the interval's start. Speed matters here: a week is some 12 000 intervals.
"""

from bisect import bisect_right
from math import sqrt
from typing import NamedTuple

import numpy as np

from planner.power.battery import Cell

SETTLED_C = 1e-10  # a charge this small is no change: a billionth of a joule
MOST_ITERATIONS = 100


class CellIntervals(NamedTuple):
    """What drives one cell, (n,) each; `surplus_w` is array less load, positive into the cell."""

    duration_s: np.ndarray
    surplus_w: np.ndarray
    resistance_factor: np.ndarray
    charge_limit_a: np.ndarray


class _Segment(NamedTuple):
    """A straight piece of the curves: voltage start_v + slope_v_c q and resistance start_ohm + slope_ohm_c q."""

    low_c: float
    high_c: float
    start_v: float
    slope_v_c: float
    start_ohm: float
    slope_ohm_c: float
    low_j: float


def charge_course_c(cell: Cell, start_c: float, intervals: CellIntervals) -> np.ndarray:
    """Charge at the edges of the intervals.

    Parameters
    ----------
    start_c : charge at the first edge [C], 0 to the cell's capacity
    intervals : n intervals

    Returns
    -------
    (n + 1,) charge [C]

    A load beyond what the cell can carry takes the circuit's largest power instead, and an empty cell gives nothing:
    nothing is shed, so more load never leaves more charge.
    """
    segments = _segments(cell)
    knots_c = cell.charge_c.tolist()
    last = len(segments) - 1
    efficiency, max_v, leak_a = cell.coulombic_efficiency, cell.limits.cell_max_v, cell.leak_a
    half_leak_a = leak_a / 2
    charge_c = start_c
    low_c, high_c, start_v, slope_v_c, start_ohm, slope_ohm_c, _ = segments[
        min(bisect_right(knots_c, charge_c) - 1, last)
    ]
    course = [charge_c]
    for duration_s, power_w, factor, limit_a in zip(*(column.tolist() for column in intervals), strict=True):
        emf_v = start_v + slope_v_c * (charge_c - half_leak_a * duration_s)
        ohm = factor * (start_ohm + slope_ohm_c * charge_c)
        if power_w < 0.0:
            stiff_ohm = ohm + 0.5 * slope_v_c * duration_s
            discriminant = emf_v * emf_v + 4.0 * stiff_ohm * power_w
            current_a = 2.0 * power_w / (emf_v + sqrt(discriminant)) if discriminant >= 0.0 else -emf_v / stiff_ohm / 2
            after_c = charge_c + (current_a - leak_a) * duration_s
        else:
            rise_ohm = slope_v_c * efficiency * duration_s
            current_a = 2.0 * power_w / (emf_v + sqrt(emf_v * emf_v + 4.0 * (ohm + 0.5 * rise_ohm) * power_w))
            taper_a = (max_v - emf_v) / (ohm + rise_ohm)
            current_a = max(min(current_a, limit_a, taper_a), 0.0)
            after_c = charge_c + (efficiency * current_a - leak_a) * duration_s
        if low_c <= after_c <= high_c:
            charge_c = after_c
        else:
            drive = (duration_s, power_w, factor * (start_ohm + slope_ohm_c * charge_c), limit_a)
            charge_c = _over_the_bend(cell, segments, knots_c, charge_c, drive)
            low_c, high_c, start_v, slope_v_c, start_ohm, slope_ohm_c, _ = segments[
                min(bisect_right(knots_c, charge_c) - 1, last)
            ]
        course.append(charge_c)
    return np.array(course)


def _segments(cell: Cell) -> list[_Segment]:
    slope_v_c, slope_ohm_c = (np.diff(knots) / np.diff(cell.charge_c) for knots in (cell.knot_v, cell.knot_ohm))
    low_c = cell.charge_c[:-1]
    columns = (
        low_c,
        cell.charge_c[1:],
        cell.knot_v[:-1] - slope_v_c * low_c,
        slope_v_c,
        cell.knot_ohm[:-1] - slope_ohm_c * low_c,
        slope_ohm_c,
        cell.stored_j[:-1],
    )
    return [_Segment(*row) for row in zip(*(column.tolist() for column in columns), strict=True)]


def _over_the_bend(cell, segments, knots_c, charge_c, drive) -> float:
    """Charge after an interval in which the curve bends: the chord of the curve over the interval, iterated."""
    duration_s, power_w, ohm, limit_a = drive
    gain = cell.coulombic_efficiency if power_w >= 0 else 1.0
    last = len(segments) - 1

    def lookup(charge_c):
        """Open-circuit voltage and stored energy."""
        piece = segments[min(bisect_right(knots_c, charge_c) - 1, last)]
        emf_v = piece.start_v + piece.slope_v_c * charge_c
        low_v = piece.start_v + piece.slope_v_c * piece.low_c
        return emf_v, piece.low_j + 0.5 * (low_v + emf_v) * (charge_c - piece.low_c)

    emf_v, stored_j = lookup(charge_c)
    most_c = _taper_charge_c(cell, segments, charge_c, duration_s, ohm) if power_w >= 0 else cell.capacity_c
    chord_v_c, after_c = 0.0, charge_c
    for _ in range(MOST_ITERATIONS):
        stiff_ohm = ohm + chord_v_c * gain * duration_s
        start_v = emf_v - chord_v_c * cell.leak_a * duration_s
        discriminant = start_v * start_v + 4.0 * stiff_ohm * power_w
        current_a = 2.0 * power_w / (start_v + sqrt(discriminant)) if discriminant >= 0.0 else -start_v / stiff_ohm / 2
        moved_c = (gain * min(current_a, limit_a) - cell.leak_a) * duration_s
        before_c, after_c = after_c, min(max(charge_c + moved_c, 0.0), most_c)
        change_c = after_c - charge_c
        if abs(after_c - before_c) < SETTLED_C or change_c == 0.0:
            break
        mean_v = (lookup(after_c)[1] - stored_j) / change_c
        chord_v_c = (mean_v - emf_v) / change_c
    return after_c


def _taper_charge_c(cell, segments, charge_c, duration_s, ohm) -> float:
    """Charge at the end of an interval that ends with the cell exactly at its upper voltage.

    Never below what standing idle leaves: constant voltage does not discharge.
    """
    max_v, idle_c = cell.limits.cell_max_v, charge_c - cell.leak_a * duration_s
    pull_v_c = ohm / (cell.coulombic_efficiency * duration_s)
    for piece in segments:
        if piece.high_c <= idle_c:
            continue
        end_c = (max_v - piece.start_v + pull_v_c * idle_c) / (piece.slope_v_c + pull_v_c)
        if end_c <= piece.high_c:
            return max(end_c, idle_c)
    return cell.capacity_c

"""The battery through the week: what the recurrence means in volts, amperes and watts, and the energy books."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from planner.mission.contacts import Session
from planner.mission.models import Policy, Spacecraft
from planner.power.corners import Corner
from planner.power.intervals import Intervals
from planner.power.limits import Breach, find_breaches
from planner.power.recurrence import CellIntervals, charge_course_c
from planner.units import JOULE_PER_WH

# What the array or the load wants and the battery does not take or give counts as spill or brown-out above this;
# below it, it is the solver's error and stays visible in the energy books
RESOLUTION_W = 1e-8


@dataclass(frozen=True)
class EnergyBooks:
    """Where a span's energy went [J]; `open_j` is what does not add up, and has no other definition."""

    array_j: float
    delivered_j: float
    converter_loss_j: float
    resistive_loss_j: float
    coulombic_loss_j: float
    self_discharge_j: float
    spill_j: float
    unserved_j: float
    stored_change_j: float

    @property
    def open_j(self) -> float:
        used_j = self.delivered_j + self.converter_loss_j - self.unserved_j + self.spill_j
        lost_j = self.resistive_loss_j + self.coulombic_loss_j + self.self_discharge_j
        return self.array_j - used_j - lost_j - self.stored_change_j


@dataclass(frozen=True)
class BatterySeries:
    """One satellite's battery at one corner through the span, with the sessions that were simulated.

    Arrays have one row per edge, (n + 1,). State (`soc_pct`, `stored_wh`) is that at the row's time; everything else
    is the mean over the interval until the next row, and the last row repeats the interval before it.
    `cell_a` is positive in charge; `bus_v` is `cells_series` times `cell_v`: the battery sits on the bus.
    `load_w` is what the bus gives to the loads, their converters included; `loss_w` is lost inside the battery.
    """

    corner: Corner
    spacecraft: Spacecraft
    sessions: tuple[Session, ...]
    intervals: Intervals
    charge_c: np.ndarray

    @property
    def time_s(self) -> np.ndarray:
        return self.intervals.edges_s

    @cached_property
    def soc_pct(self) -> np.ndarray:
        return self.corner.cell.soc_pct(self.charge_c)

    @cached_property
    def stored_wh(self) -> np.ndarray:
        return self.cells * self.corner.cell.stored_energy_j(self.charge_c) / JOULE_PER_WH

    @property
    def cells(self) -> int:
        return cells_of(self.spacecraft)

    @cached_property
    def cell_a(self) -> np.ndarray:
        cell, moved_c = self.corner.cell, np.diff(self.charge_c) + self._leaked_c
        charged_c = np.where(moved_c > 0, moved_c / cell.coulombic_efficiency, moved_c)
        return _held(charged_c / self.intervals.duration_s)

    @cached_property
    def resistance_ohm(self) -> np.ndarray:
        return _held(self.corner.cell.resistance_ohm(self.charge_c[:-1], self.intervals.battery_c))

    @cached_property
    def open_circuit_v(self) -> np.ndarray:
        """Mean open-circuit voltage of a cell over each interval: stored energy over charge moved."""
        cell, moved_c = self.corner.cell, np.diff(self.charge_c)
        energy_j = np.diff(cell.stored_energy_j(self.charge_c))
        still = np.abs(moved_c) < 1e-6 * cell.capacity_c
        middle_v = cell.open_circuit_v(0.5 * (self.charge_c[1:] + self.charge_c[:-1]))
        return _held(np.where(still, middle_v, energy_j / np.where(still, 1.0, moved_c)))

    @cached_property
    def cell_v(self) -> np.ndarray:
        return self.open_circuit_v + self.cell_a * self.resistance_ohm

    @property
    def bus_v(self) -> np.ndarray:
        return self.spacecraft.battery.cells_series * self.cell_v

    @property
    def peak_bus_a(self) -> np.ndarray:
        """Highest current of all loads: duty-cycled ones at full power, stated peaks added, at the mean bus voltage."""
        draw = self.intervals.draw
        return np.maximum(self.load_w / self.bus_v, _held(draw.peak_w) / self.bus_v + _held(draw.peak_a))

    @property
    def peak_cell_a(self) -> np.ndarray:
        """`cell_a` at the moment of the highest bus current: what exceeds the mean comes out of the battery."""
        extra_a = self.peak_bus_a - self.load_w / self.bus_v
        return self.cell_a - extra_a / self.spacecraft.battery.cells_parallel

    @property
    def lowest_cell_v(self) -> np.ndarray:
        """Lowest cell voltage within each interval: at its lower charge and its highest current out."""
        lower_c = _held(np.minimum(self.charge_c[1:], self.charge_c[:-1]))
        return self.corner.cell.open_circuit_v(lower_c) + self.peak_cell_a * self.resistance_ohm

    @property
    def battery_c(self) -> np.ndarray:
        return _held(self.intervals.battery_c)

    @property
    def array_w(self) -> np.ndarray:
        """Power the array offers to the bus; what is not taken of it is `spill_w`."""
        return _held(self.intervals.array_w)

    @property
    def load_w(self) -> np.ndarray:
        return _held(self.intervals.load_w)

    @cached_property
    def battery_w(self) -> np.ndarray:
        """Power at the battery's terminals, positive in charge."""
        return self.cells * self.cell_v * self.cell_a

    @property
    def loss_w(self) -> np.ndarray:
        resistive_w, coulombic_w, leak_w = self._losses_w
        return resistive_w + coulombic_w + leak_w

    @property
    def spill_w(self) -> np.ndarray:
        left_w = self.array_w - self.load_w - np.maximum(self.battery_w, 0.0)
        return np.where((self.array_w >= self.load_w) & (left_w > RESOLUTION_W * self.cells), left_w, 0.0)

    @property
    def unserved_w(self) -> np.ndarray:
        """Load that neither array nor battery could carry: a brown-out where above 0."""
        short_w = self.load_w - self.array_w + self.battery_w
        return np.where((self.array_w < self.load_w) & (short_w > RESOLUTION_W * self.cells), short_w, 0.0)

    @property
    def sunlit(self) -> np.ndarray:
        """True where any part of the Sun's disc is seen."""
        return _held(self.intervals.visible_sun > 0)

    @property
    def attitude(self) -> np.ndarray:
        """Name of the attitude law, or "slew"."""
        return _held(np.array(self.intervals.attitudes)[self.intervals.attitude])

    @property
    def _leaked_c(self) -> np.ndarray:
        return np.where(self.charge_c[1:] > 0, self.corner.cell.leak_a * self.intervals.duration_s, 0.0)

    @property
    def _losses_w(self):
        """Resistive, coulombic and self-discharge loss."""
        cell = self.corner.cell
        wasted_a = (1 - cell.coulombic_efficiency) * np.maximum(self.cell_a, 0.0)
        leak_a = _held(self._leaked_c / self.intervals.duration_s)
        return (
            self.cells * self.cell_a**2 * self.resistance_ohm,
            self.cells * wasted_a * self.open_circuit_v,
            self.cells * leak_a * self.open_circuit_v,
        )

    def books(self) -> EnergyBooks:
        """The energy books of the whole span."""

        def total_j(power_w):
            return float(power_w[: len(self.intervals.duration_s)] @ self.intervals.duration_s)

        resistive_w, coulombic_w, leak_w = self._losses_w
        delivered_w = self.intervals.draw.delivered_w
        return EnergyBooks(
            array_j=total_j(self.array_w),
            delivered_j=total_j(delivered_w),
            converter_loss_j=total_j(self.intervals.load_w - delivered_w),
            resistive_loss_j=total_j(resistive_w),
            coulombic_loss_j=total_j(coulombic_w),
            self_discharge_j=total_j(leak_w),
            spill_j=total_j(self.spill_w),
            unserved_j=total_j(self.unserved_w),
            stored_change_j=float(self.stored_wh[-1] - self.stored_wh[0]) * JOULE_PER_WH,
        )

    def soc_at_pct(self, time_s):
        """State of charge [%] at any time, straight between rows."""
        return np.interp(time_s, self.time_s, self.soc_pct)

    def lowest(self, begin_s: float = 0.0, end_s: float = np.inf) -> tuple[float, float]:
        """Time [s] and value [%] of the lowest state of charge from `begin_s` to `end_s`."""
        begin_s, end_s = np.clip([begin_s, end_s], self.time_s[0], self.time_s[-1])
        inside = (self.time_s > begin_s) & (self.time_s < end_s)
        time_s = np.concatenate([[begin_s], self.time_s[inside], [end_s]])
        soc_pct = self.soc_at_pct(time_s)
        k = int(np.argmin(soc_pct))
        return float(time_s[k]), float(soc_pct[k])

    def recovered_s(self, after_s: float, soc_pct: float) -> float:
        """First time at or after `after_s` at which the charge is `soc_pct` or more; NaN when not within the span."""
        if self.soc_at_pct(after_s) >= soc_pct:
            return float(after_s)
        later = np.flatnonzero((self.time_s > after_s) & (self.soc_pct >= soc_pct))
        if not len(later):
            return float("nan")
        k = later[0]
        begin_s = max(self.time_s[k - 1], after_s)
        rise = np.array([self.soc_at_pct(begin_s), self.soc_pct[k]])
        return float(np.interp(soc_pct, rise, [begin_s, self.time_s[k]]))

    def breaches(self, policy: Policy) -> tuple[Breach, ...]:
        """Every limit that breaks, in order of time."""
        return find_breaches(self, policy)


def cells_of(craft: Spacecraft) -> int:
    """Number of cells in the pack."""
    return craft.battery.cells_series * craft.battery.cells_parallel


def cell_intervals(corner: Corner, craft: Spacecraft, intervals: Intervals) -> CellIntervals:
    """What the week asks of one cell. Charging is held off outside the battery's charge temperatures if it says so."""
    battery = craft.battery
    too_cold_or_hot = (intervals.battery_c < battery.charge_min_c) | (intervals.battery_c > battery.charge_max_c)
    return CellIntervals(
        duration_s=intervals.duration_s,
        surplus_w=(intervals.array_w - intervals.load_w) / cells_of(craft),
        resistance_factor=corner.cell.resistance_by_temperature(intervals.battery_c),
        charge_limit_a=np.where(battery.charge_inhibit & too_cold_or_hot, 0.0, battery.cell_max_charge_a),
    )


def run_battery(
    corner: Corner, craft: Spacecraft, intervals: Intervals, sessions: tuple[Session, ...]
) -> BatterySeries:
    """Walk the battery through the intervals from the corner's start charge."""
    start_c = float(corner.cell.charge_at_c(corner.start_soc_pct))
    course_c = charge_course_c(corner.cell, start_c, cell_intervals(corner, craft, intervals))
    return BatterySeries(corner, craft, sessions, intervals, course_c)


def _held(values) -> np.ndarray:
    """The last interval's value once more, for the row at the end of the span."""
    return np.append(values, values[-1:])

"""The cell circuit: an open-circuit voltage that follows the charge, behind a resistance.

Signs, here and in the whole room: current and power are positive INTO the battery (charge), negative out of it.
The one exception is a quantity called `terminal_w`, which is what the rest of the satellite asks of the battery:
positive OUT of it. A pack is `cells_series` x `cells_parallel` equal cells; they share current and voltage evenly.
"""

from dataclasses import dataclass

import numpy as np

from planner.mission.power import Battery
from planner.power import chemistry
from planner.units import DAY_S, HOUR_S

MONTH_S = 30.4375 * DAY_S  # a twelfth of a Julian year


@dataclass(frozen=True)
class Cell:
    """One cell at one corner: curves over charge, straight between knots, and its limits.

    Arrays have one row per knot; charge runs from 0 (empty) to the capacity that this corner's health leaves.
    Resistance is that at 25 degC: multiply by `resistance_by_temperature`.
    """

    charge_c: np.ndarray
    knot_v: np.ndarray
    knot_ohm: np.ndarray
    stored_j: np.ndarray
    temperature_c: np.ndarray
    temperature_factor: np.ndarray
    coulombic_efficiency: float
    leak_a: float
    limits: Battery

    @property
    def capacity_c(self) -> float:
        """Charge of the full cell [C]."""
        return float(self.charge_c[-1])

    def soc_pct(self, charge_c):
        """State of charge in per cent of this corner's own full charge."""
        return 100.0 * np.asarray(charge_c) / self.capacity_c

    def charge_at_c(self, soc_pct):
        """Charge [C] at a state of charge [%]."""
        return np.asarray(soc_pct) * self.capacity_c / 100.0

    @property
    def full_soc_pct(self) -> float:
        """State of charge [%] at which the resting cell stands at its derated upper voltage: no charger goes on."""
        return float(self.soc_pct(np.interp(self.limits.cell_max_v, self.knot_v, self.charge_c)))

    def open_circuit_v(self, charge_c):
        """Open-circuit voltage [V] at a charge [C]."""
        return np.interp(charge_c, self.charge_c, self.knot_v)

    def resistance_ohm(self, charge_c, battery_c=25.0):
        """Direct-current resistance [ohm] at a charge [C] and a temperature [degC], flat outside the tables."""
        return np.interp(charge_c, self.charge_c, self.knot_ohm) * self.resistance_by_temperature(battery_c)

    def resistance_by_temperature(self, battery_c):
        """Resistance at a temperature [degC] against that at 25 degC."""
        return np.interp(battery_c, self.temperature_c, self.temperature_factor)

    def stored_energy_j(self, charge_c):
        """Integral of open-circuit voltage over charge from empty [J]; exact for the curve straight between knots."""
        charge_c = np.asarray(charge_c, dtype=float)
        left = np.clip(np.searchsorted(self.charge_c, charge_c, side="right") - 1, 0, len(self.charge_c) - 2)
        mean_v = 0.5 * (self.knot_v[left] + self.open_circuit_v(charge_c))
        return self.stored_j[left] + mean_v * (charge_c - self.charge_c[left])

    def charge_with_energy_c(self, stored_j):
        """Charge [C] at which the cell stores `stored_j` [J]: the inverse of `stored_energy_j`, clipped to the cell."""
        stored_j = np.clip(stored_j, 0.0, self.stored_j[-1])
        left = np.clip(np.searchsorted(self.stored_j, stored_j, side="right") - 1, 0, len(self.stored_j) - 2)
        slope_v_c = np.diff(self.knot_v)[left] / np.diff(self.charge_c)[left]
        start_v, rest_j = self.knot_v[left], stored_j - self.stored_j[left]
        return self.charge_c[left] + 2 * rest_j / (start_v + np.sqrt(start_v**2 + 2 * slope_v_c * rest_j))


def describe_cell(battery: Battery, *, health: float, resistance_factor: float = 1.0) -> Cell:
    """The cell of `battery` with `health` of its capacity left and its resistance grown by `resistance_factor`."""
    curve = np.array(battery.open_circuit or chemistry.OPEN_CIRCUIT[battery.chemistry])
    by_charge = np.array(battery.resistance_by_charge or chemistry.RESISTANCE_BY_CHARGE)
    by_temperature = np.array(battery.resistance_by_temperature or chemistry.RESISTANCE_BY_TEMPERATURE)
    soc_pct = np.union1d(curve[:, 0], by_charge[(by_charge[:, 0] > 0) & (by_charge[:, 0] < 100), 0])
    capacity_c = battery.cell_capacity_ah * HOUR_S * health
    charge_c = soc_pct / 100.0 * capacity_c
    knot_v = np.interp(soc_pct, curve[:, 0], curve[:, 1])
    steps_j = np.diff(charge_c) * 0.5 * (knot_v[1:] + knot_v[:-1])
    return Cell(
        charge_c=charge_c,
        knot_v=knot_v,
        knot_ohm=1e-3 * battery.cell_resistance_mohm * resistance_factor * np.interp(soc_pct, *by_charge.T),
        stored_j=np.concatenate([[0.0], np.cumsum(steps_j)]),
        temperature_c=by_temperature[:, 0],
        temperature_factor=by_temperature[:, 1],
        coulombic_efficiency=battery.coulombic_efficiency,
        leak_a=battery.self_discharge_pct_month / 100.0 * capacity_c / MONTH_S,
        limits=battery,
    )


def battery_current_a(terminal_w, open_circuit_v, resistance_ohm):
    """Current out of a battery that gives `terminal_w` at its terminals.

    Parameters
    ----------
    terminal_w : float or array [W], positive out of the battery, negative in charge
    open_circuit_v : float or array [V], above 0
    resistance_ohm : float or array [ohm], 0 or more

    Returns
    -------
    float or array [A], positive out of the battery; NaN where no current can carry the load (a brown-out:
    `terminal_w` above the circuit's largest power, open_circuit_v**2 / (4 resistance_ohm))

    Source: Kirchhoff's voltage law, terminal_w = (open_circuit_v - I R) I. Of the two roots the small one is meant:
    the other lies beyond the largest power, where more current gives less. Written so that R = 0 is no special case.
    """
    discriminant = np.square(open_circuit_v) - 4 * np.multiply(resistance_ohm, terminal_w)
    root = np.sqrt(np.where(discriminant >= 0, discriminant, np.nan))
    return 2 * np.asarray(terminal_w) / (open_circuit_v + root)


def chemical_power_w(terminal_w, open_circuit_v, resistance_ohm):
    """Power taken from the cells' charge for `terminal_w` at the terminals: what is delivered, and the resistive loss.

    Shapes and signs as in `battery_current_a`; negative in charge, where less reaches the cells than
    the terminals took. The coulombic loss is not part of it.
    Infinite at a brown-out: what the battery cannot give has no price.
    """
    chemical_w = open_circuit_v * battery_current_a(terminal_w, open_circuit_v, resistance_ohm)
    return np.where(np.isnan(chemical_w), np.inf, chemical_w)[()]

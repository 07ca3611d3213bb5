"""The battery as the programme sees it: how fast stored energy changes, with likely losses and with the least possible.

Stored energy is the integral of open-circuit voltage over charge, so a voltage that changes with charge touches only
the losses. `likely` takes voltage and resistance at a middle charge; `least` the highest voltage that the charger
reaches and the lowest resistance over charge, which no real week can beat.
"""

from dataclasses import dataclass

import numpy as np

from planner.mission.models import Policy
from planner.power.balance import SatellitePower
from planner.power.battery import battery_current_a
from planner.power.corners import CornerName
from planner.power.session import SessionDraw
from planner.schedule.sessions import EnergyCost
from planner.schedule.states import EnergyStates
from planner.units import JOULE_PER_WH


@dataclass(frozen=True)
class Conversion:
    """From terminal power to the rate at which stored energy changes, at one voltage and resistance."""

    open_circuit_v: float
    ohm_at_25_c: float
    power: SatellitePower
    corner: CornerName
    optimistic: bool = False  # neither the charger's voltage limit, cold, nor self-discharge holds anything back

    def stored_w(self, terminal_w: np.ndarray, battery_c: np.ndarray) -> np.ndarray:
        """Rate of change of stored energy (n,) [W]: negative when `terminal_w` (n,) is drawn, losses included."""
        battery, cell = self.power.satellite.spacecraft.battery, self.power.corner(self.corner).cell
        resistance_ohm = self.ohm_at_25_c * cell.resistance_by_temperature(battery_c)
        out_a = battery_current_a(terminal_w, self.open_circuit_v, resistance_ohm)
        in_a = np.minimum(np.maximum(-out_a, 0.0), self._charge_limit_a(resistance_ohm, battery_c))
        leak_a = 0.0 if self.optimistic else cell.leak_a * battery.cells_parallel
        return self.open_circuit_v * (cell.coulombic_efficiency * in_a - np.maximum(out_a, 0.0) - leak_a)

    def _charge_limit_a(self, resistance_ohm: np.ndarray, battery_c: np.ndarray) -> np.ndarray:
        battery = self.power.satellite.spacecraft.battery
        most_a = np.full_like(resistance_ohm, battery.cell_max_charge_a * battery.cells_parallel)
        if self.optimistic:
            return most_a
        headroom_v = battery.cells_series * battery.cell_max_v - self.open_circuit_v
        barred = battery.charge_inhibit & ((battery_c < battery.charge_min_c) | (battery_c > battery.charge_max_c))
        return np.where(barred, 0.0, np.minimum(most_a, max(headroom_v, 0.0) / resistance_ohm))


def full_soc_pct(power: SatellitePower, corner: CornerName) -> float:
    """Charge at which the open-circuit voltage reaches the charger's upper limit."""
    battery, cell = power.satellite.spacecraft.battery, power.corner(corner).cell
    return float(cell.soc_pct(np.interp(battery.cell_max_v, cell.knot_v, cell.charge_c)))


def likely(power: SatellitePower, policy: Policy) -> Conversion:
    """At the charge halfway between floor and full, of the pessimistic corner: the optimiser steers by it."""
    corner: CornerName = "pessimistic"
    soc_pct = (policy.soc_floor_pct + full_soc_pct(power, corner)) / 2
    open_circuit_v = float(power.pack_open_circuit_v(soc_pct, corner))
    return Conversion(open_circuit_v, float(power.pack_resistance_ohm(soc_pct, 25.0, corner)), power, corner)


def least(power: SatellitePower, policy: Policy) -> Conversion:
    """At the highest voltage and the lowest resistance; the charger's own voltage headroom is not held against it."""
    corner = policy.bound_corner
    lowest_ohm = float(power.pack_resistance_ohm(np.linspace(0.0, 100.0, 201), 25.0, corner).min())
    top_v = float(power.pack_open_circuit_v(full_soc_pct(power, corner), corner))
    return Conversion(top_v, lowest_ohm, power, corner, optimistic=True)


def idle_changes_s(power: SatellitePower, conversion: Conversion) -> np.ndarray:
    """Times at which the satellite without sessions turns from charging to discharging or back."""
    edges_s, rate_w = _idle_rate_w(power, conversion)
    return edges_s[1:-1][np.diff(np.sign(rate_w)) != 0]


def depth_floor_pct(power: SatellitePower, corner: CornerName) -> float:
    """A floor that keeps every cycle within the battery's `max_cycle_depth_pct`; 0 where it has no such limit.

    Counted from the highest charge that the satellite reaches without sessions: a little stricter than the limit,
    which counts from each cycle's own peak.
    """
    deepest_pct = power.satellite.spacecraft.battery.max_cycle_depth_pct
    return 0.0 if deepest_pct is None else float(power.simulate((), corner).soc_pct.max()) - deepest_pct


def energy_states(
    power: SatellitePower, policy: Policy, conversion: Conversion, events_s: np.ndarray, lowest_pct: float = 0.0
) -> EnergyStates:
    """Stored energy without sessions between `events_s` (n + 1,); never below the policy's floors nor `lowest_pct`."""
    edges_s, rate_w = _idle_rate_w(power, conversion)
    sum_wh = np.concatenate([[0.0], np.cumsum(rate_w * np.diff(edges_s))]) / JOULE_PER_WH
    corner = conversion.corner
    full_pct = full_soc_pct(power, corner)
    start_pct = min(power.corner(corner).start_soc_pct, full_pct)
    start_wh, full_wh, floor_wh, end_wh = (
        float(power.stored_wh(soc_pct, corner))
        for soc_pct in (
            start_pct,
            full_pct,
            max(policy.soc_floor_pct, lowest_pct),
            max(policy.soc_end_pct, lowest_pct),
        )
    )
    floors_wh = np.full(len(events_s), floor_wh)
    floors_wh[-1] = end_wh
    return EnergyStates(start_wh, full_wh, floors_wh, np.diff(np.interp(events_s, edges_s, sum_wh)))


def session_cost(power: SatellitePower, draw: SessionDraw, conversion: Conversion) -> EnergyCost:
    """What a session over its whole window takes from the stored energy, beyond what the satellite takes anyway."""
    idle = power.idle(conversion.corner)
    step_s = np.diff(draw.edges_s)
    middle_s = (draw.edges_s[1:] + draw.edges_s[:-1]) / 2
    at = np.clip(np.searchsorted(idle.edges_s, middle_s, side="right") - 1, 0, len(idle.battery_c) - 1)
    battery_c = idle.battery_c[at]
    taken_w = conversion.stored_w(draw.idle_terminal_w, battery_c) - conversion.stored_w(draw.terminal_w, battery_c)
    on_air = draw.phase == "transmission"
    return EnergyCost(
        fixed_wh=float(taken_w[~on_air] @ step_s[~on_air] / JOULE_PER_WH),
        edges_s=np.append(draw.edges_s[:-1][on_air], draw.edges_s[1:][on_air][-1]),
        per_s_wh=taken_w[on_air] / JOULE_PER_WH,
    )


def _idle_rate_w(power: SatellitePower, conversion: Conversion) -> tuple[np.ndarray, np.ndarray]:
    idle = power.idle(conversion.corner)
    return idle.edges_s, conversion.stored_w(idle.load_w - idle.array_w, idle.battery_c)

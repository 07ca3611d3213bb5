"""What draws from the bus, and when."""

from dataclasses import dataclass

import numpy as np

from planner.mission.models import Spacecraft
from planner.mission.power import Load
from planner.mission.transmitter import Transmitter


@dataclass(frozen=True)
class Draw:
    """Loads summed per interval, (n,) each. The bus gives `bus_w`; `delivered_w` of it passes the converters.

    `peak_w` and `peak_a` are for the over-current trip, which hears no averages: every duty-cycled load at full power,
    and apart from them the loads whose peak current is stated.
    """

    bus_w: np.ndarray
    delivered_w: np.ndarray
    peak_w: np.ndarray
    peak_a: np.ndarray

    @classmethod
    def none(cls, n: int) -> "Draw":
        """No load in any of `n` intervals."""
        return cls(*(np.zeros(n) for _ in range(4)))

    def __add__(self, other: "Draw") -> "Draw":
        return Draw(
            self.bus_w + other.bus_w,
            self.delivered_w + other.delivered_w,
            self.peak_w + other.peak_w,
            self.peak_a + other.peak_a,
        )

    def take(self, index) -> "Draw":
        """The intervals of `index`."""
        return Draw(self.bus_w[index], self.delivered_w[index], self.peak_w[index], self.peak_a[index])


def on_share(load: Load, middle_s, visible_sun, battery_c, windows_s):
    """Share of each interval in which the load may be on (n,), duty apart.

    A sunlit load follows the visible fraction of the Sun through penumbra and an eclipse load the rest of it. The
    thermostat has no hysteresis: the battery temperature does not answer to the heater in this model.
    """
    share = {"always": np.ones_like(visible_sun), "sunlit": visible_sun, "eclipse": 1.0 - visible_sun}.get(load.when)
    if share is None:
        share = np.zeros_like(visible_sun)
        for begin_s, end_s in windows_s:
            share[(begin_s <= middle_s) & (middle_s < end_s)] = 1.0
    return share if load.on_below_c is None else share * (battery_c < load.on_below_c)


def load_draw(load: Load, share, factor: float) -> Draw:
    """One load over intervals in which it may be on for `share` (n,) of the time, its power times `factor`."""
    delivered_w = load.power_w * factor * load.duty * share
    active = share > 0
    full_w = load.power_w * factor / load.converter_efficiency if load.duty > 0 else 0.0
    stated = load.peak_current_a is not None
    return Draw(
        bus_w=delivered_w / load.converter_efficiency,
        delivered_w=delivered_w,
        peak_w=np.zeros_like(share) if stated else full_w * active,
        peak_a=load.peak_current_a * active if stated else np.zeros_like(share),
    )


def steady_draw(loads: tuple[Load, ...], middle_s, visible_sun, battery_c, windows_s, factor: float) -> Draw:
    """All loads that do not depend on sessions; `windows_s` holds one tuple of (begin, end) per load."""
    total = Draw.none(len(middle_s))
    for load, windows in zip(loads, windows_s, strict=True):
        total += load_draw(load, on_share(load, middle_s, visible_sun, battery_c, windows), factor)
    return total


def session_draw(
    craft: Spacecraft, transmitter: Transmitter, phases, load_factor: float, transmitter_factor: float
) -> Draw:
    """A session's own loads: warm-up, transmission and cool-down of its transmitter, and turning the satellite.

    `phases` has the boolean arrays (n,) `.warming`, `.transmitting`, `.cooling`, `.slewing`.
    """
    delivered_w = transmitter_factor * (
        transmitter.warmup_power_w * phases.warming
        + transmitter.dc_power_w * phases.transmitting
        + transmitter.cooldown_power_w * phases.cooling
    )
    slewing_w = load_factor * craft.pointing.slew_power_w * phases.slewing  # stated at the bus: no converter
    bus_w = delivered_w / transmitter.converter_efficiency + slewing_w
    return Draw(bus_w, delivered_w + slewing_w, bus_w, np.zeros_like(bus_w))

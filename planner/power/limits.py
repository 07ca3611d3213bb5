"""Every limit of the battery and the bus, with the time and the size of each breach."""

import itertools
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from planner.mission.models import Policy
from planner.power.life import count_cycles

if TYPE_CHECKING:
    from planner.power.series import BatterySeries

# Excess smaller than this is the arithmetic's, not the battery's: some thousand times rounding
RESOLUTION = 1e-6


CELL_LIMITS = (
    "cell voltage under load",
    "cell voltage",
    "cell discharge current",
    "cell charge current",
    "charging too cold",
    "charging too hot",
)
CELL_CAUTION = (
    "lithium cells outside their limits can be damaged, vent or burn: the cell maker's data sheet and the launch and"
    " battery safety review decide, not this plan"
)


class Breach(NamedTuple):
    """A limit that breaks: the time of the first row outside it, and the worst value until it holds again."""

    limit: str
    time_s: float
    value: float
    bound: float
    unit: str

    @property
    def caution(self) -> str:
        """What to heed where the breach is one of the lithium cells themselves; empty otherwise."""
        return CELL_CAUTION if self.limit in CELL_LIMITS else ""


def find_breaches(series: "BatterySeries", policy: Policy) -> tuple[Breach, ...]:
    """All breaches of a simulated week in order of time; one for each unbroken stretch outside a limit."""
    found = [
        *_charge_breaches(series, policy),
        *_cell_breaches(series),
        *_bus_breaches(series),
        *_session_breaches(series),
    ]
    return tuple(sorted(found, key=lambda breach: breach.time_s))


def _stretches(limit: str, unit: str, time_s, value, bound: float, above: bool) -> list[Breach]:
    """One breach for each unbroken run of rows at which `value` lies above (or below) `bound`."""
    excess = (value - bound) if above else (bound - value)
    edges = np.flatnonzero(np.diff(np.concatenate([[0], excess > RESOLUTION, [0]]).astype(int)))
    worst = np.max if above else np.min
    return [
        Breach(limit, float(time_s[begin]), float(worst(value[begin:end])), float(bound), unit)
        for begin, end in zip(edges[::2], edges[1::2], strict=True)
    ]


def _charge_breaches(series: "BatterySeries", policy: Policy) -> list[Breach]:
    time_s, soc_pct = series.time_s, series.soc_pct
    found = _stretches("SoC floor", "%", time_s, soc_pct, policy.soc_floor_pct, above=False)
    found += _stretches("end-of-span SoC", "%", time_s[-1:], soc_pct[-1:], policy.soc_end_pct, above=False)
    deepest_pct = series.spacecraft.battery.max_cycle_depth_pct
    if deepest_pct is not None:
        found += [
            Breach("depth of discharge", float(time_s[cycle.begin]), cycle.depth, deepest_pct, "%")
            for cycle in count_cycles(soc_pct)
            if cycle.depth > deepest_pct + RESOLUTION
        ]
    return found


def _cell_breaches(series: "BatterySeries") -> list[Breach]:
    """Cell limits hold for the peaks that loads state too, not only for the mean of an interval."""
    battery, time_s = series.spacecraft.battery, series.time_s
    lowest_v, out_a = series.lowest_cell_v, -series.peak_cell_a
    charge_a = np.maximum(series.cell_a, 0.0)
    found = _stretches("cell voltage under load", "V", time_s, lowest_v, battery.cell_min_v, above=False)
    found += _stretches("cell voltage", "V", time_s, series.cell_v, battery.cell_max_v, above=True)
    found += _stretches("cell discharge current", "A", time_s, out_a, battery.cell_max_discharge_a, above=True)
    found += _stretches("cell charge current", "A", time_s, charge_a, battery.cell_max_charge_a, above=True)
    # at rest any temperature is allowed: only rows that charge are looked at
    charging = charge_a > RESOLUTION
    coldest_c = np.where(charging, series.battery_c, np.inf)
    hottest_c = np.where(charging, series.battery_c, -np.inf)
    found += _stretches("charging too cold", "degC", time_s, coldest_c, battery.charge_min_c, above=False)
    found += _stretches("charging too hot", "degC", time_s, hottest_c, battery.charge_max_c, above=True)
    return found


def _bus_breaches(series: "BatterySeries") -> list[Breach]:
    time_s, trip_a = series.time_s, series.spacecraft.battery.bus_trip_a
    found = []
    if trip_a is not None:
        found += _stretches("bus over-current trip", "A", time_s, series.peak_bus_a, trip_a, above=True)
    wanted_w, unserved_w = series.load_w, series.unserved_w
    edges = np.flatnonzero(np.diff(np.concatenate([[0], unserved_w > 0, [0]]).astype(int)))
    for begin, end in zip(edges[::2], edges[1::2], strict=True):
        k = begin + int(np.argmax(unserved_w[begin:end]))
        found.append(
            Breach("brown-out", float(time_s[begin]), float(wanted_w[k]), float(wanted_w[k] - unserved_w[k]), "W")
        )
    return found


def _session_breaches(series: "BatterySeries") -> list[Breach]:
    """Longest transmission; and a transmitter is not warmed up again before its cool-down is over."""
    found = []
    for transmitter in series.spacecraft.transmitter:
        own = [session for session in series.sessions if session.mode == transmitter.mode]
        longest_s = transmitter.longest_on_s
        for session in own:
            length_s = session.tx_off_s - session.tx_on_s
            if longest_s is not None and length_s > longest_s + RESOLUTION:
                found.append(Breach("longest transmission", session.tx_on_s, length_s, longest_s, "s"))
        for earlier, later in itertools.pairwise(own):
            pause_s = later.tx_on_s - transmitter.warmup_s - earlier.tx_off_s
            if pause_s < transmitter.cooldown_s - RESOLUTION:
                found.append(Breach("cool-down", later.tx_on_s, pause_s, transmitter.cooldown_s, "s"))
    return found

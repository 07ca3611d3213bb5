"""What one more Wh, W, dB, Mbit, station hour or station is worth, each found by planning the week anew."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd

from planner.errors import NoWeekError
from planner.mission.models import Mission, Spacecraft
from planner.mission.station import Hours
from planner.schedule.hours import open_windows_s
from planner.schedule.result import WeekPlan, plan_week, prepared
from planner.units import HOUR_S

COLUMNS = ("item", "change", "amount", "unit", "volume_mbit", "worth_mbit_per_unit", "uncertain_mbit_per_unit")
LARGER = 1.15  # capacities and areas are tried this much larger: enough to stand out of the gaps


@dataclass(frozen=True)
class Variant:
    """A mission with one thing changed by `amount` units."""

    item: str
    change: str
    amount: float
    unit: str
    mission: Mission


def price_list(plan: WeekPlan, progress: Callable[[str], None], cancelled: Callable[[], bool]) -> pd.DataFrame:
    """Marginal worths in Mbit a span, one row a change, from a full plan of each changed mission.

    Each plan lies somewhere below its bound, so half of both gaps is the uncertainty: what is smaller may be nothing.
    """
    mission = plan.flown.week.mission
    base_mbit, base_gap_mbit = plan.summary["volume_mbit"], _gap_mbit(plan)
    rows = []
    for variant in variants(mission, plan):
        progress(f"pricing {variant.item}: {variant.change}")
        try:
            changed = plan_week(variant.mission, cancelled=cancelled)
        except NoWeekError:
            rows.append((variant.item, variant.change, variant.amount, variant.unit, np.nan, np.nan, np.nan))
            continue
        volume_mbit = changed.summary["volume_mbit"]
        worth = (volume_mbit - base_mbit) / variant.amount
        uncertain = abs((base_gap_mbit + _gap_mbit(changed)) / 2 / variant.amount)
        rows.append((variant.item, variant.change, variant.amount, variant.unit, volume_mbit, worth, uncertain))
    return pd.DataFrame(rows, columns=list(COLUMNS))


def _gap_mbit(plan: WeekPlan) -> float:
    return plan.summary["upper_bound_mbit"] - plan.summary["volume_mbit"]


def variants(mission: Mission, plan: WeekPlan) -> Iterator[Variant]:
    """One change at a time."""
    power = next(iter(prepared(mission).powers.values()))
    battery_wh = power.capacity_wh("nominal") * (LARGER - 1)
    array_w = float(np.mean(power.idle("pessimistic").array_w)) * (LARGER - 1)
    room_mbit = mission.satellites[0].spacecraft.recorder.capacity_mbit * (LARGER - 1)
    yield Variant("battery", f"{battery_wh:.2f} Wh more", battery_wh, "Wh nominal", _each(mission, _more_battery))
    yield Variant("array", f"{array_w:.3f} W more", array_w, "W orbit average", _each(mission, _more_array))
    margin_db = mission.policy.link_margin_db
    yield Variant(
        "link", "1 dB less margin asked", 1.0, "dB", mission.with_changes(policy={"link_margin_db": margin_db - 1})
    )
    yield Variant("storage", f"{room_mbit:.0f} Mbit more", room_mbit, "Mbit", _each(mission, _more_storage))
    for index, station in enumerate(mission.stations):
        closed_s = mission.span_s - sum(end_s - begin_s for begin_s, end_s in open_windows_s(mission, station))
        if closed_s > 0:
            always = station.model_copy(update={"hours": Hours()})
            stations = (*mission.stations[:index], always, *mission.stations[index + 1 :])
            changed = mission.model_copy(update={"stations": stations})
            yield Variant("station hours", f"{station.name} always open", closed_s / HOUR_S, "h", changed)
    if len(mission.stations) > 1:
        for station in mission.stations:
            others = tuple(other for other in mission.stations if other is not station)
            changed = mission.model_copy(update={"stations": others})
            yield Variant("station", f"without {station.name}", -1.0, "station", changed)


def _each(mission: Mission, change: Callable[[Spacecraft], Spacecraft]) -> Mission:
    """The change on every satellite."""
    satellites = tuple(s.model_copy(update={"spacecraft": change(s.spacecraft)}) for s in mission.satellites)
    return mission.model_copy(update={"satellites": satellites})


def _more_battery(craft: Spacecraft) -> Spacecraft:
    larger = craft.battery.model_copy(update={"cell_capacity_ah": craft.battery.cell_capacity_ah * LARGER})
    return craft.model_copy(update={"battery": larger})


def _more_array(craft: Spacecraft) -> Spacecraft:
    panels = tuple(panel.model_copy(update={"cell_area_m2": panel.cell_area_m2 * LARGER}) for panel in craft.panel)
    return craft.model_copy(update={"panel": panels})


def _more_storage(craft: Spacecraft) -> Spacecraft:
    larger = craft.recorder.model_copy(update={"capacity_mbit": craft.recorder.capacity_mbit * LARGER})
    return craft.model_copy(update={"recorder": larger})

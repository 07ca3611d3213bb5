"""What became of the data, class by class, and what a set of sessions is worth."""

import numpy as np

from planner.mission.models import Satellite
from planner.schedule.checks import cost_of
from planner.schedule.flown import Flown
from planner.units import HOUR_S


def data_classes(flown: Flown, satellite: Satellite) -> list[dict]:
    """One row a class, heaviest first. By Little's law, what was stored over time per Mbit sent is its mean age."""
    classes, rows, before = satellite.spacecraft.recorder.classes, [], np.zeros(4)
    for data_class, series in zip(classes, flown.heaviest(satellite), strict=True):
        held_mbit_h = float(np.trapezoid(series.stored_mbit, series.time_s)) / HOUR_S
        sums = np.array([series.delivered_mbit[-1], series.lost_mbit[-1], series.stored_mbit[-1], held_mbit_h])
        delivered, lost, stored, held = (sums - before).tolist()
        before = sums
        rows.append(
            {
                "satellite": satellite.name,
                "name": data_class.name,
                "weight": data_class.weight,
                "delivered_mbit": delivered,
                "lost_mbit": lost,
                "stored_end_mbit": stored,
                "mean_age_h": held / delivered if delivered > 0 else None,
                "worth": data_class.weight * delivered - data_class.fading_per_h * held,
            }
        )
    return rows


def worth_mbit(flown: Flown) -> float:
    """The objective of the week, but for its tie-breaks: the worth of the data less the price of the stations."""
    mission = flown.week.mission
    rows = [row for satellite in mission.satellites for row in data_classes(flown, satellite)]
    return sum(row["worth"] for row in rows) - mission.policy.cost_mbit * cost_of(flown)

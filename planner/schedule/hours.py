"""When a station is open."""

from datetime import UTC, datetime, time, timedelta

import numpy as np

from planner.mission.models import Mission
from planner.mission.station import Hours, Station
from planner.units import DAY_S, HOUR_S

WEEKDAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
Windows = list[tuple[float, float]]


def open_windows_s(mission: Mission, station: Station) -> Windows:
    """Unbroken stretches of the span in which the station is open, maintenance taken out [s after the start]."""
    return open_hours_s(mission, station.hours)


def open_hours_s(mission: Mission, hours: Hours) -> Windows:
    """The same for hours alone: a station's, or the operators' shifts."""
    whole = [(0.0, mission.span_s)]
    daily = _daily_windows_s(mission, hours) if hours.open or len(hours.days) < 7 else whole
    start = mission.start
    maintenance = [((a - start).total_seconds(), (b - start).total_seconds()) for a, b in hours.maintenance]
    return subtract(intersect(merge(daily), whole), merge(maintenance))


def _daily_windows_s(mission: Mission, hours: Hours) -> Windows:
    """Windows of the named days, a day too early and too late; one that closes before it opens runs past midnight."""
    midnight = datetime.combine(mission.start.astimezone(UTC).date(), time(), tzinfo=UTC) - timedelta(days=1)
    windows = []
    for day in range(int(np.ceil(mission.days)) + 3):
        begin_s = (midnight + timedelta(days=day) - mission.start).total_seconds()
        if WEEKDAYS[(midnight + timedelta(days=day)).weekday()] not in hours.days:
            continue
        for opens, closes in hours.open or ((time(), time()),):
            open_s, close_s = (_seconds(t) for t in (opens, closes))
            windows.append((begin_s + open_s, begin_s + close_s + (DAY_S if close_s <= open_s else 0)))
    return windows


def _seconds(moment: time) -> float:
    return moment.hour * HOUR_S + moment.minute * 60 + moment.second + moment.microsecond * 1e-6


def merge(windows: Windows) -> Windows:
    """Sorted, with overlapping and touching ones joined."""
    merged: Windows = []
    for begin_s, end_s in sorted(windows):
        if merged and begin_s <= merged[-1][1]:
            merged[-1] = (merged[-1][0], max(merged[-1][1], end_s))
        else:
            merged.append((begin_s, end_s))
    return merged


def intersect(a: Windows, b: Windows) -> Windows:
    """Stretches that are in both."""
    common = [(max(a0, b0), min(a1, b1)) for a0, a1 in a for b0, b1 in b]
    return [(begin_s, end_s) for begin_s, end_s in common if end_s > begin_s]


def subtract(windows: Windows, closed: Windows) -> Windows:
    """Stretches of `windows` outside the merged `closed` ones."""
    for close_s, reopen_s in closed:
        windows = [
            piece
            for begin_s, end_s in windows
            for piece in ((begin_s, min(end_s, close_s)), (max(begin_s, reopen_s), end_s))
            if piece[1] > piece[0]
        ]
    return windows

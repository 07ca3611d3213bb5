"""When one mode may be on air on one pass, rule after rule; the first rule that leaves nothing is the reason."""

from collections.abc import Iterator

import numpy as np

from planner.data.volume import Profile
from planner.mission.models import Satellite
from planner.mission.transmitter import Transmitter
from planner.schedule.hours import Windows, intersect, subtract
from planner.schedule.week import Week
from planner.sky import aging

Coded = tuple[Profile, float, float]  # one way of coding, and a window for it


def usable_windows(
    week: Week, satellite: Satellite, transmitter: Transmitter, row: int, earliest_s: float
) -> tuple[str, list[Coded]]:
    """(reason, windows): the windows in which a session may lie, or why there is none.

    earliest_s : no transmission may begin before [s after the start]
    """
    table, place = week.place_of[row, transmitter.mode]
    if table.reasons[place]:
        return table.reasons[place], []
    windows = [(profile, *w) for profile in week.profiles(row, transmitter.mode) for w in profile.windows_s()]
    for reason, allowed in _rules(week, satellite, transmitter, row, earliest_s):
        windows = [(profile, *w) for profile, *window in windows for w in intersect([(window[0], window[1])], allowed)]
        if not windows:
            return reason, []
    return _long_enough(week, windows)


def _rules(week, satellite, transmitter, row: int, earliest_s: float) -> Iterator[tuple[str, Windows]]:
    """(what to say when it leaves nothing, windows that it leaves)."""
    passes, span_s = week.sky.passes, week.mission.span_s
    guard_s = week.mission.policy.clock_guard_s + timing_error_s(week, satellite, row)
    # a whole pass is only worth a word about its margin if the link table found none
    yield "below margin all along", [(0.0, span_s)]
    yield f"{passes.station[row]} is closed", week.open_s[str(passes.station[row])]
    yield "outside the operators' shifts (policy.shifts)", week.shifts_s
    yield (
        f"shorter than its guards of {guard_s:.1f} s against clock and element error",
        [(passes.aos_s[row] + guard_s, passes.los_s[row] - guard_s)],
    )
    yield "the payload keeps the idle attitude (pointing.no_slew_windows)", turning_s(week, satellite, transmitter)
    yield "too near the start of the span, or frozen", [(earliest_s + _lead_s(satellite, transmitter), span_s)]


def _long_enough(week: Week, windows: list[Coded]) -> tuple[str, list[Coded]]:
    shortest_s = week.mission.policy.min_session_s
    longest_s = max(end_s - begin_s for _, begin_s, end_s in windows)
    if longest_s < shortest_s:
        return f"too short: {longest_s:.0f} s usable, the policy asks {shortest_s:.0f} s", []
    some = [window for window in windows if window[2] - window[1] >= shortest_s]
    return "acquisition takes the whole window", [w for w in some if w[0].volume_mbit(*w[1:]) > 0]


def timing_error_s(week: Week, satellite: Satellite, row: int) -> float:
    """One-sigma error of a pass's times with elements as old as the policy lets them grow."""
    samples = week.sky.samples
    aos = samples.of(row).start
    error_s = aging.timing_error_s(
        satellite.spacecraft.aging,
        week.mission.policy.elements_refresh_days,
        samples.position_km[aos : aos + 1],
        samples.velocity_km_s[aos : aos + 1],
    )
    return float(np.squeeze(error_s))


def turning_s(week: Week, satellite: Satellite, transmitter: Transmitter) -> Windows:
    """When a session of this mode may be on air without turning the satellite while a payload forbids it."""
    pointing, start = satellite.spacecraft.pointing, week.mission.start
    whole = [(0.0, week.mission.span_s)]
    if not _turns(satellite, transmitter):
        return whole
    slew_s = pointing.longest_slew_s
    kept = [tuple((moment - start).total_seconds() for moment in window) for window in pointing.no_slew_windows]
    return subtract(whole, [(begin_s - slew_s, end_s + slew_s) for begin_s, end_s in sorted(kept)])


def _turns(satellite: Satellite, transmitter: Transmitter) -> bool:
    pointing = satellite.spacecraft.pointing
    return (transmitter.session_law or pointing.session) != pointing.idle


def _lead_s(satellite: Satellite, transmitter: Transmitter) -> float:
    """The longest the satellite can be busy before transmission: warm-up, or half a turn to the session's attitude."""
    slew_s = satellite.spacecraft.pointing.longest_slew_s if _turns(satellite, transmitter) else 0.0
    return max(transmitter.warmup_s, slew_s)

"""When stations are open: windows past midnight, weekdays, maintenance, and starts within a day."""

from datetime import UTC, datetime, time, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.mission.station import Hours
from planner.schedule.hours import intersect, merge, open_windows_s, subtract

HOUR = 3600.0
MONDAY = datetime(2026, 12, 7, tzinfo=UTC)


def opened(marshlight, hours: Hours, start=MONDAY, days=2.0):
    mission = marshlight.model_copy(update={"start": start, "days": days})
    windows = open_windows_s(mission, marshlight.stations[0].model_copy(update={"hours": hours}))
    return [(begin_s / HOUR, end_s / HOUR) for begin_s, end_s in windows]


def test_without_hours_it_is_always_open(marshlight):
    assert opened(marshlight, Hours()) == [(0, 48)]


def test_daily_windows(marshlight):
    assert opened(marshlight, Hours(open=((time(6), time(9, 30)), (time(18), time(20))))) == [
        (6, 9.5), (18, 20), (30, 33.5), (42, 44),
    ]  # fmt: skip


def test_a_window_past_midnight_is_open_before_and_after_it(marshlight):
    assert opened(marshlight, Hours(open=((time(22), time(2)),))) == [(0, 2), (22, 26), (46, 48)]


def test_a_window_past_midnight_belongs_to_the_day_on_which_it_opens(marshlight):
    assert opened(marshlight, Hours(open=((time(22), time(2)),), days=("mon",))) == [(22, 26)]
    assert opened(marshlight, Hours(open=((time(22), time(2)),), days=("sun",))) == [(0, 2)]


def test_days_without_windows_are_open_all_day(marshlight):
    assert opened(marshlight, Hours(days=("tue",))) == [(24, 48)]
    assert opened(marshlight, Hours(days=("mon", "tue"))) == [(0, 48)]


def test_a_window_from_a_moment_to_itself_is_a_whole_day(marshlight):
    assert opened(marshlight, Hours(open=((time(8), time(8)),), days=("mon",))) == [(8, 32)]


def test_maintenance_is_taken_out(marshlight):
    closed = ((MONDAY + timedelta(hours=7), MONDAY + timedelta(hours=8)), (MONDAY - timedelta(hours=9), MONDAY))
    assert opened(marshlight, Hours(open=((time(6), time(9)),), maintenance=closed), days=1.0) == [(6, 7), (8, 9)]


def test_maintenance_over_everything_leaves_nothing(marshlight):
    closed = ((MONDAY - timedelta(days=1), MONDAY + timedelta(days=9)),)
    assert opened(marshlight, Hours(maintenance=closed)) == []


def test_a_start_within_the_day_and_half_a_second(marshlight):
    start = MONDAY + timedelta(hours=7)
    assert opened(marshlight, Hours(open=((time(6), time(9, 0, 0, 500_000)),)), start, 0.5) == [(0, 2 + 0.5 / HOUR)]


def test_hours_are_utc_whatever_zone_the_start_is_written_in(marshlight):
    hours = Hours(open=((time(6), time(9)),), days=("mon",))
    elsewhere = MONDAY.astimezone(timezone(timedelta(hours=10)))
    before_midnight = MONDAY.astimezone(timezone(timedelta(hours=-8)))
    assert opened(marshlight, hours, elsewhere) == opened(marshlight, hours, before_midnight) == [(6, 9)]


windows = st.lists(st.tuples(st.integers(0, 50), st.integers(1, 20)).map(lambda w: (w[0], w[0] + w[1])), max_size=5)


def seconds_in(some) -> set[int]:
    return {second for begin, end in some for second in range(begin, end)}


@given(windows, windows)
def test_windows_as_sets_of_seconds(a, b):
    assert seconds_in(merge(a)) == seconds_in(a)
    assert seconds_in(intersect(merge(a), merge(b))) == seconds_in(a) & seconds_in(b)
    assert seconds_in(subtract(merge(a), merge(b))) == seconds_in(a) - seconds_in(b)


@pytest.mark.parametrize("joined", [[(0, 1), (1, 2)], [(0, 2), (1, 1.5)], [(1, 2), (0, 1)]])
def test_touching_and_nested_windows_are_one(joined):
    assert merge(joined) == [(0, 2)]

"""Time: seconds inside, dates and Julian days at the edges."""

from datetime import UTC, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sky_examples import DAY_S, START, clock_of
from skyfield.sgp4lib import theta_GMST1982

from planner.errors import InputError
from planner.sky.clock import Clock, timescale

# A Julian day's fraction resolves this in double precision, and so does a datetime.
A_MICROSECOND = 1e-6
# The Earth turns a millimetre at the equator in this angle.
A_MILLIMETRE_RAD = 1.6e-10


def test_a_naive_start_is_refused_with_a_fix_that_can_be_pasted():
    with pytest.raises(InputError) as caught:
        Clock(datetime(2026, 12, 7, 6, 30), DAY_S)
    assert str(caught.value) == (
        "start must carry a time zone, got datetime.datetime(2026, 12, 7, 6, 30); if it is UTC, write"
        " datetime(2026, 12, 7, 6, 30, 0, tzinfo=UTC)"
    )
    assert eval("datetime(2026, 12, 7, 6, 30, 0, tzinfo=UTC)").tzinfo is UTC


def test_another_zone_is_turned_into_utc():
    zone = timezone(timedelta(hours=2))
    assert Clock(datetime(2026, 12, 7, 2, tzinfo=zone), DAY_S) == Clock(START, DAY_S)


@pytest.mark.parametrize("year", [1957, 1961, 1999, 2050])
def test_all_years_that_the_sun_and_element_sets_cover(year):
    assert Clock(datetime(year, 1, 2, tzinfo=UTC), DAY_S).iso(0.0) == f"{year}-01-02T00:00:00.000Z"


@pytest.mark.parametrize(("year", "span_s"), [(1956, DAY_S), (2051, DAY_S), (2050, 400 * DAY_S)])
def test_years_outside_are_refused(year, span_s):
    with pytest.raises(InputError, match="start and end must lie in 1957 to 2050"):
        Clock(datetime(year, 6, 1, tzinfo=UTC), span_s)


@pytest.mark.parametrize("span_s", [0.0, -1.0, float("nan")])
def test_a_span_must_be_above_zero(span_s):
    with pytest.raises(InputError, match=r"span_s must be above 0 s, got"):
        Clock(START, span_s)


def test_julian_days_are_midnights_and_fractions():
    whole, fraction = clock_of().julian([-1.0, 0.0, 43_200.0, DAY_S])
    assert list(whole) == [2461380.5, 2461381.5, 2461381.5, 2461382.5]  # 2026-12-07 is 2461381.5 (computed)
    assert list(fraction) == pytest.approx([1 - 1 / DAY_S, 0.0, 0.5, 0.0], abs=A_MICROSECOND / DAY_S)


@given(st.datetimes(datetime(1957, 1, 2), datetime(2050, 11, 1)), st.floats(-DAY_S, 7 * DAY_S))
def test_there_and_back(start, time_s):
    clock = Clock(start.replace(tzinfo=UTC), DAY_S)
    assert clock.seconds(clock.datetime(time_s)) == pytest.approx(time_s, abs=2 * A_MICROSECOND)
    whole, fraction = clock.julian(time_s)
    days_2000 = (clock.datetime(time_s) - datetime(2000, 1, 1, 12, tzinfo=UTC)) / timedelta(days=1)
    assert (whole - 2451545.0) + fraction == pytest.approx(days_2000, abs=1e-10)


def test_iso_rounds_to_the_millisecond_and_takes_arrays():
    clock = clock_of()
    assert clock.iso(0.0004) == "2026-12-07T00:00:00.000Z"
    assert list(clock.iso(np.array([0.9996, 86_399.9996]))) == ["2026-12-07T00:00:01.000Z", "2026-12-08T00:00:00.000Z"]
    assert clock.iso(1.5) == clock.iso(np.array([1.5]))[0]


def test_days_are_counted_from_the_midnight_before_the_start():
    clock = Clock(START + timedelta(hours=6), DAY_S)
    assert list(clock.utc_day([-6 * 3600 - 1, -6 * 3600, 0, 18 * 3600])) == [-1, 0, 0, 1]
    assert list(clock.midnight_s([-1, 0, 1])) == [-30 * 3600, -6 * 3600, 18 * 3600]


def test_the_earths_angle_is_that_of_skyfields_own_ut1():
    clock = clock_of()
    time_s = np.linspace(0, clock.span_s, 500)
    moments = timescale().utc(2026, 12, 7, 0, 0, time_s)
    theirs, _ = theta_GMST1982(moments.whole, moments.ut1_fraction)
    ours, rate_rad_s = clock.earth_angle_rad(time_s)
    assert np.abs((ours - theirs + np.pi) % (2 * np.pi) - np.pi).max() < A_MILLIMETRE_RAD
    assert rate_rad_s == pytest.approx(7.29211e-5, rel=1e-5)

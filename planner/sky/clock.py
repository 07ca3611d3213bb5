"""The one time scale inside: seconds of UTC after the mission's start; dates and Julian days at the edges."""

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from functools import cached_property, lru_cache

import numpy as np

from planner.errors import InputError
from planner.units import DAY_S

JULIAN_DAY_2000 = 2_451_544.5  # midnight that opens 2000-01-01
MIDNIGHT_2000 = datetime(2000, 1, 1, tzinfo=UTC)
FIRST_YEAR, LAST_YEAR = 1957, 2050  # two-digit years of element sets begin in 1957; the Sun's ephemeris ends in 2053


@lru_cache(maxsize=1)
def timescale():
    """Skyfield's time scale with the UT1 and leap seconds it ships (no download)."""
    from skyfield.api import load

    return load.timescale(builtin=True)


@dataclass(frozen=True)
class Clock:
    """A span of UTC. Inside it a day has 86 400 s: there is no leap second after 2016, and before they are neglected.

    Parameters
    ----------
    start : datetime, aware
    span_s : float [s], above 0

    Raises
    ------
    InputError : naive start, span not above 0, or not inside 1957 to 2050
    """

    start: datetime
    span_s: float

    def __post_init__(self):
        object.__setattr__(self, "start", aware(self.start, "start").astimezone(UTC))
        if not self.span_s > 0:
            raise InputError(f"span_s must be above 0 s, got {self.span_s}")
        end_year = (self.start + timedelta(seconds=self.span_s)).year
        if not FIRST_YEAR <= self.start.year <= end_year <= LAST_YEAR:
            raise InputError(
                f"start and end must lie in {FIRST_YEAR} to {LAST_YEAR}, where the Sun's ephemeris and the element"
                f" sets' two-digit years hold, got {self.start.isoformat()} and {self.span_s / DAY_S:g} days"
            )

    @cached_property
    def seconds_of_first_day(self) -> float:
        """Seconds of `start` after the UTC midnight before it."""
        return (self.start - MIDNIGHT_2000) % timedelta(days=1) / timedelta(seconds=1)

    @cached_property
    def _first_day(self) -> float:
        return JULIAN_DAY_2000 + (self.start - MIDNIGHT_2000) // timedelta(days=1)

    def julian(self, time_s):
        """UTC Julian date as midnight (a half-integer) and the fraction of the day after it, shape of `time_s`."""
        days, seconds = np.divmod(np.asarray(time_s, dtype=float) + self.seconds_of_first_day, DAY_S)
        return self._first_day + days, seconds / DAY_S

    def utc_day(self, time_s):
        """Whole UTC days after the midnight before `start`: 0 on the first day, negative before it."""
        return np.floor_divide(np.asarray(time_s, dtype=float) + self.seconds_of_first_day, DAY_S).astype(int)

    def midnight_s(self, utc_day):
        """The opening of a UTC day as `utc_day` counts it [s after start]."""
        return np.asarray(utc_day) * DAY_S - self.seconds_of_first_day

    @cached_property
    def _ut1_less_utc(self):
        """UT1 - UTC once a day, from four days before the span to four after (it drifts under 3 ms a day)."""
        days = np.arange(-4, int(np.ceil(self.span_s / DAY_S)) + 5)
        start = self.start
        moments = timescale().utc(start.year, start.month, start.day + days)
        return self.midnight_s(days), moments.dut1

    def earth_angle_rad(self, time_s):
        """Greenwich mean sidereal time of 1982 [rad], and its rate [rad/s]: turns TEME into the Earth-fixed frame.

        Source: Vallado et al., AIAA 2006-6753, appendix C, as skyfield has it. UT1 is the one skyfield ships, polar
        motion (under 10 m at the ground) is neglected as in skyfield's own chain.
        """
        from skyfield.sgp4lib import theta_GMST1982

        whole, fraction = self.julian(time_s)
        ut1_fraction = fraction + np.interp(time_s, *self._ut1_less_utc) / DAY_S
        angle_rad, rate_rad_day = theta_GMST1982(whole, ut1_fraction)
        return angle_rad, rate_rad_day / DAY_S

    def seconds(self, moment: datetime) -> float:
        """Seconds of `moment` after start; InputError when it carries no time zone."""
        return (aware(moment, "moment") - self.start) / timedelta(seconds=1)

    def datetime(self, time_s: float) -> datetime:
        """The aware UTC datetime of one moment, to the microsecond."""
        return self.start + timedelta(seconds=float(time_s))

    def iso(self, time_s):
        """ISO 8601 UTC with milliseconds and a Z: a str for a scalar, an array of str (n,) for an array."""
        start_ms = np.datetime64(self.start.replace(tzinfo=None), "us")
        moments = start_ms + np.round(np.asarray(time_s, dtype=float) * 1e6).astype("timedelta64[us]")
        rounded = (moments + np.timedelta64(500, "us")).astype("datetime64[ms]")
        text = np.strings.add(np.datetime_as_string(rounded), "Z")
        return str(text) if np.ndim(time_s) == 0 else text


def aware(moment: datetime, name: str) -> datetime:
    """`moment` itself; InputError with a fix to paste when it is naive."""
    if moment.tzinfo is None or moment.utcoffset() is None:
        numbers = ", ".join(str(number) for number in moment.timetuple()[:6])
        raise InputError(
            f"{name} must carry a time zone, got {moment!r}; if it is UTC, write datetime({numbers}, tzinfo=UTC)"
        )
    return moment

"""Names of passes that outlive an element update."""

from dataclasses import replace
from datetime import timedelta

import numpy as np

from planner.errors import InputError
from planner.mission.elements import Ephemeris
from planner.mission.names import alike, slug
from planner.sky.clock import Clock
from planner.sky.propagate import states
from planner.sky.sites import Sites
from planner.sky.track import Track, grid_s

EQUATORIAL_DEG = 1.0  # orbits flatter than this have no steady northernmost and southernmost point
SIDEREAL_DAY_S = 86_164.0905  # from memory


def refuse_equal_slugs(kind: str, names) -> None:
    """InputError when two names of one kind would give the same pass ids."""
    for first, second in alike(names):
        raise InputError(
            f"{kind} names must differ in more than case, blanks and signs, because pass ids are made of them,"
            f" got {first!r} and {second!r}"
        )


def pass_ids(clock: Clock, track: Track, sites: Sites, station_index, aos_s, by_day) -> np.ndarray:
    """Ids of one satellite's passes, (n,) of str.

    `satellite.station.yyyymmdd-nn`: the UTC day of the last passage of the orbit's farthest point before AOS, and
    which passage of that day it was; a letter where several passes share it. The farthest point is the southernmost
    for stations north of the equator and the northernmost for the others; for orbits within 1 deg of the equator it
    is where the satellite crosses the meridian opposite the station. `by_day` (n,) marks passes without such a point
    (geostationary), which carry the UTC day of AOS and 00.

    Known limit: a passage within seconds of midnight UTC may fall on the other day with newer elements, and then the
    ids of that day and of the day it left change their numbers.
    """
    day, count = np.zeros(len(aos_s), dtype=int), np.zeros(len(aos_s), dtype=int)
    earlier = _before(clock, track)
    for direction, stations in _far_directions(track, sites):
        here = np.isin(station_index, stations)
        day[here], count[here] = _day_and_count(clock, _passages_s(clock, track, earlier, direction), aos_s[here])
    day = np.where(by_day, clock.utc_day(aos_s + 1e-3), day)
    count = np.where(by_day, 0, count)
    letters = _letters(station_index, day, count)
    first, satellite = clock.start.date(), slug(track.satellite)
    dates = {d: f"{first + timedelta(days=d):%Y%m%d}" for d in np.unique(day).tolist()}
    heads = [f"{satellite}.{slug(station.name)}." for station in sites.stations]
    ids = [
        f"{heads[s]}{dates[d]}-{n:02d}{letter}"
        for s, d, n, letter in zip(station_index.tolist(), day.tolist(), count.tolist(), letters, strict=True)
    ]
    return np.array(ids, dtype=object)


def is_geostationary(track: Track) -> bool:
    """Near the equator and turning with the Earth, within 3 %: no point of the orbit is farthest from a station."""
    return _near_equator(track) and abs(track.period_s / SIDEREAL_DAY_S - 1) < 0.03


def _near_equator(track: Track) -> bool:
    return track.elements.inclination_deg < EQUATORIAL_DEG or track.elements.inclination_deg > 180 - EQUATORIAL_DEG


def _far_directions(track: Track, sites: Sites):
    """(direction, stations it serves): the orbit's farthest point is where the position reaches furthest along it."""
    if _near_equator(track):
        for index, station in enumerate(sites.stations):
            longitude = np.radians(station.longitude_deg)
            yield np.array([-np.cos(longitude), -np.sin(longitude), 0.0]), [index]
        return
    northern = np.array([station.latitude_deg >= 0 for station in sites.stations], dtype=bool)
    yield np.array([0.0, 0.0, -1.0]), np.flatnonzero(northern)
    yield np.array([0.0, 0.0, 1.0]), np.flatnonzero(~northern)


def _passages_s(clock: Clock, track: Track, earlier: Track, direction):
    """Moments at which the satellite stops moving along `direction`, from a UTC midnight before the track onwards."""
    known_s = _turning_s(track, direction)
    if len(earlier.time_s):
        return np.concatenate([_turning_s(earlier, direction), known_s])
    if not len(known_s):
        return known_s
    # an ephemeris that begins too late is carried back at its own pace
    pace_s = np.diff(known_s).mean() if len(known_s) > 1 else track.period_s
    since_s = clock.midnight_s(_first_day(clock, track))
    back = np.arange(int((known_s[0] - since_s) // pace_s), 0, -1)
    return np.concatenate([known_s[0] - back * pace_s, known_s])


def _before(clock: Clock, track: Track) -> Track:
    """A coarse track from the midnight before a revolution before the track, to where the track begins; may be empty.

    A pass in progress where the track begins belongs to a passage up to a revolution earlier.
    """
    begin_s = float(clock.midnight_s(_first_day(clock, track)))
    if isinstance(track.elements, Ephemeris):
        none = np.zeros((0, 3))
        return replace(track, time_s=none[:, 0], position_km=none, velocity_km_s=none)
    time_s = grid_s(clock, track.elements, begin_s, track.time_s[0])
    position_km, velocity_km_s, known = states(clock, track.satellite, track.elements, time_s)
    return replace(track, time_s=time_s[known], position_km=position_km[known], velocity_km_s=velocity_km_s[known])


def _first_day(clock: Clock, track: Track) -> int:
    return int(clock.utc_day(track.time_s[0] - track.period_s))


def _turning_s(track: Track, direction):
    time_s, speed = track.time_s, track.velocity_km_s @ direction
    k = np.flatnonzero((speed[:-1] > 0) & (speed[1:] <= 0))
    return time_s[k] + (time_s[k + 1] - time_s[k]) * speed[k] / (speed[k] - speed[k + 1])


def _day_and_count(clock: Clock, passages_s, aos_s):
    """Day and number within the day of the last passage before each AOS; the day of AOS and 0 where there is none."""
    if not passages_s.size:
        return clock.utc_day(aos_s), np.zeros(len(aos_s), dtype=int)
    day = clock.utc_day(passages_s)
    number = np.arange(len(day)) - np.searchsorted(day, day, side="left") + 1
    last = np.searchsorted(passages_s, aos_s, side="right") - 1
    has = last >= 0
    return np.where(has, day[last], clock.utc_day(aos_s)), np.where(has, number[last], 0)


def _letters(station_index, day, count) -> list[str]:
    """'' where a pass has its revolution to itself, else a, b, ... in order of time."""
    new = np.ones(len(day) + 1, dtype=bool)
    for column in (station_index, day, count):
        new[1:-1] &= column[1:] == column[:-1]
    new[1:-1] = ~new[1:-1]
    first = np.flatnonzero(new)
    length = np.diff(first)
    rank = np.arange(len(day)) - np.repeat(first[:-1], length)
    shared = np.repeat(length > 1, length)
    return [_letter(k) if several else "" for k, several in zip(rank.tolist(), shared.tolist(), strict=True)]


def _letter(k: int) -> str:
    return _letter(k // 26 - 1) + chr(97 + k % 26) if k >= 26 else chr(97 + k)

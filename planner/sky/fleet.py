"""All satellites of a mission, on every core when there are many."""

import multiprocessing
import os
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor
from functools import partial

from planner.errors import InputError
from planner.sky.clock import Clock
from planner.sky.pass_ids import refuse_equal_slugs
from planner.sky.passes import Passes, joined, passes_of_satellite
from planner.sky.sites import Sites
from planner.sky.track import Track, track_satellite

ENOUGH_TO_SHARE = 16  # satellites below which starting processes costs more than it saves
AT_A_TIME = 4


def observe_fleet(
    clock: Clock,
    satellites,
    stations,
    *,
    progress: Callable[[int, int], None] | None = None,
    workers: int | None = None,
) -> tuple[tuple[Track, ...], Passes]:
    """Tracks and passes of every satellite over every station.

    Parameters
    ----------
    satellites : sequence with `name` and `elements`
    stations : sequence of Station
    progress : called as progress(done, total) after each satellite
    workers : processes; None takes one for each core this process may use, where there are satellites enough

    Raises
    ------
    InputError : names that would share pass ids; one fault for each satellite whose elements cannot be carried through
        the span, all at once
    """
    satellites, sites = list(satellites), Sites.of(stations)
    refuse_equal_slugs("station", [station.name for station in sites.stations])
    refuse_equal_slugs("satellite", [satellite.name for satellite in satellites])
    tracks, parts, faults = [], [], []
    for index, (track, part, found) in enumerate(_results(partial(_one, clock, sites), satellites, workers)):
        faults += found
        if not found:
            tracks.append(track)
            parts.append(part)
        if progress:
            progress(index + 1, len(satellites))
    if faults:
        raise InputError(*faults)
    return tuple(tracks), joined(parts)


def _results(job, satellites: list, workers: int | None) -> Iterator:
    """`job(index, satellite)` of each satellite in turn, in this process or shared out."""
    workers = workers or _cores()
    numbered = list(enumerate(satellites))
    # forked children share what has been imported; where the system cannot fork, one process does it all
    if workers == 1 or len(satellites) < ENOUGH_TO_SHARE or "fork" not in multiprocessing.get_all_start_methods():
        yield from map(job, numbered)
        return
    with ProcessPoolExecutor(workers, mp_context=multiprocessing.get_context("fork")) as pool:
        yield from pool.map(job, numbered, chunksize=AT_A_TIME)


def _cores() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _one(clock: Clock, sites: Sites, numbered):
    """Track, columns of passes and faults of one satellite."""
    index, satellite = numbered
    try:
        track = track_satellite(clock, satellite)
    except InputError as error:
        return None, None, error.faults
    return track, passes_of_satellite(clock, track, index, sites), ()

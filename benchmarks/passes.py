"""How fast passes are found, measured side by side in one run and printed as JSON.

    python benchmarks/passes.py            # one satellite, 7 days, against the library called station by station
    python benchmarks/passes.py --fleet    # 200 satellites x 50 stations x 7 days on every core, with a progress bar

Times of the first are processor seconds of all threads, the best of several runs that alternate, so that a busy
machine disturbs little and both sides alike. The library finds events; ours find them and add ids, azimuths, TCA and
sunlight.
"""

import argparse
import json
import resource
import time
from datetime import UTC, datetime, timedelta
from pathlib import Path
from types import SimpleNamespace

import numpy as np
from skyfield.api import EarthSatellite, wgs84

from planner.mission.elements import read_elements
from planner.mission.station import GroundAntenna, Receiver, Station
from planner.sky.clock import Clock, timescale
from planner.sky.fleet import observe_fleet
from planner.sky.passes import find_passes
from planner.sky.sites import look
from planner.sky.track import track_satellite

START = datetime(2026, 12, 7, tzinfo=UTC)
DAYS = 7
ELEMENTS = Path(__file__).parents[1] / "tle_samples" / "marshlight.tle"


def stations(count: int) -> list[Station]:
    """Sites spread evenly over the globe's latitudes, so that the poles are not favoured."""
    draw = np.random.default_rng(20261207)
    latitude_deg = np.degrees(np.arcsin(draw.uniform(-1, 1, count)))
    longitude_deg = draw.uniform(-180, 180, count)
    antenna = GroundAntenna(diameter_m=2.8)
    receiver = (Receiver(bands=("K",), noise_temperature_k=150.0),)
    return [
        Station(name=f"site {k:02d}", latitude_deg=float(a), longitude_deg=float(b), antenna=antenna, receiver=receiver)
        for k, (a, b) in enumerate(zip(latitude_deg, longitude_deg, strict=True))
    ]


def seconds(call) -> float:
    begin = time.process_time()
    call()
    return time.process_time() - begin


def best_of(repeats: int, **calls) -> dict[str, float]:
    """The least time of each call, the calls taken in turns."""
    runs = [{name: seconds(call) for name, call in calls.items()} for _ in range(repeats)]
    return {name: min(run[name] for run in runs) for name in calls}


def one_satellite(repeats: int) -> dict:
    (elements,) = read_elements(ELEMENTS, START).values()
    satellite = SimpleNamespace(name=elements.name, elements=elements)
    clock, everywhere = Clock(START, DAYS * 86_400.0), stations(50)
    model = elements.sgp4_model()
    theirs = EarthSatellite.from_satrec(model, timescale())
    begin, end = timescale().from_datetime(START), timescale().from_datetime(START + timedelta(days=DAYS))

    def ours(count: int):
        return lambda: find_passes(clock, [track_satellite(clock, satellite)], everywhere[:count])

    def library(count: int):
        def search():
            for site in everywhere[:count]:
                place = wgs84.latlon(site.latitude_deg, site.longitude_deg, elevation_m=site.altitude_m)
                theirs.find_events(place, begin, end, altitude_degrees=site.min_elevation_deg)

        return search

    grid, minutes = (
        clock.julian(t) for t in (track_satellite(clock, satellite).time_s, np.arange(0, clock.span_s, 60))
    )
    times = best_of(
        repeats, ours_6=ours(6), ours_10=ours(10), ours_50=ours(50), library_6=library(6), library_50=library(50),
        sgp4_of_our_grid=lambda: model.sgp4_array(*grid), sgp4_every_60_s=lambda: model.sgp4_array(*minutes),
    )  # fmt: skip
    return {
        "find_events_over_ours_50_stations": round(times["library_50"] / times["ours_50"], 1),
        "find_events_over_ours_6_stations": round(times["library_6"] / times["ours_6"], 1),
        "ours_10_stations_over_bare_sgp4_every_60_s": round(times["ours_10"] / times["sgp4_every_60_s"], 2),
        "ours_10_stations_over_bare_sgp4_of_our_grid": round(times["ours_10"] / times["sgp4_of_our_grid"], 2),
        "grid_points": len(grid[0]),
        "milliseconds": {name: round(value * 1e3, 2) for name, value in times.items()},
        **brute_force(clock, track_satellite(clock, satellite), everywhere),
    }


def brute_force(clock: Clock, track, everywhere) -> dict:
    """A scan of every second of the span: runs above the mask that no pass holds, and passes that no run explains."""
    passes = find_passes(clock, [track], everywhere)
    time_s = np.arange(0.0, clock.span_s)
    states = track.at(time_s)
    missed = runs = 0
    for index, site in enumerate(everywhere):
        above = look(*states, site).elevation_deg > site.min_elevation_deg
        edges = np.diff(np.concatenate([[False], above, [False]]).astype(np.int8))
        first, last = time_s[np.flatnonzero(edges == 1)], time_s[np.flatnonzero(edges == -1) - 1]
        mine = passes.station_index == index
        held = (passes.aos_s[mine] <= first[:, None]) & (passes.los_s[mine] >= last[:, None])
        missed += int((~held.any(axis=1)).sum())
        runs += len(first)
    long = int((passes.duration_s >= 1.0).sum())
    return {"one_second_scan_passes": runs, "passes_found": len(passes), "of_a_second_or_more": long, "missed": missed}


def fleet_of(count: int):
    """Satellites spread over planes and along them, around the sample's orbit."""
    (base,) = read_elements(ELEMENTS, START).values()
    for k in range(count):
        changes = {
            "name": f"member {k:03d}",
            "ra_of_asc_node_deg": (base.ra_of_asc_node_deg + 137.5 * k) % 360.0,
            "mean_anomaly_deg": (base.mean_anomaly_deg + 61.8 * k) % 360.0,
            "inclination_deg": base.inclination_deg - 0.2 * (k % 200),
        }
        yield SimpleNamespace(name=changes["name"], elements=base.model_copy(update=changes))


def fleet() -> dict:
    """Time for 50, 100 and 200 satellites, and the memory of this process and the largest of its children."""
    from rich.console import Console
    from rich.progress import Progress

    clock, everywhere = Clock(START, DAYS * 86_400.0), stations(50)
    times, found = {}, 0
    for count in (50, 100, 200):
        with Progress(transient=True, console=Console(stderr=True)) as bar:
            task = bar.add_task(f"{count} satellites x {len(everywhere)} stations", total=count)
            begin = time.perf_counter()
            _, passes = observe_fleet(
                clock,
                fleet_of(count),
                everywhere,
                progress=lambda done, _, bar=bar, task=task: bar.update(task, completed=done),
            )
            times[count] = time.perf_counter() - begin
        found = len(passes)
    own, child = (resource.getrusage(who).ru_maxrss / 1e6 for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN))
    return {
        "seconds": {count: round(value, 2) for count, value in times.items()},
        "time_per_satellite_200_over_50": round(times[200] / 200 / (times[50] / 50), 2),
        "passes_of_200": found,
        "memory_gb": {"this_process": round(own, 2), "largest_child": round(child, 2)},
    }


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--fleet", action="store_true", help="200 satellites x 50 stations x 7 days")
    parser.add_argument("--repeats", type=int, default=7, help="runs of which the best counts")
    arguments = parser.parse_args()
    print(json.dumps(fleet() if arguments.fleet else one_satellite(arguments.repeats), indent=2))


if __name__ == "__main__":
    main()

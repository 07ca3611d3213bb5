"""How long the week's link takes, without and with the kept curves, and what three ways to choose a MODCOD bring.

    python benchmarks/link.py [MISSION]

The last column is what is asked of the line, where something is.
"""

import os
import sys
import tempfile
from time import perf_counter

import numpy as np

from planner.link import link_table
from planner.link.atmosphere import total_attenuation_db
from planner.link.budget import cannot_hear
from planner.link.curve import attenuation_curves, request_curves
from planner.link.polarisation import TILT_DEG
from planner.mission.files import load_mission
from planner.sky import observe

PERCENT = (0.01, 1.0, 5.0)
WAYS = ("fixed", "best for the pass", "variable")


def seconds(call) -> float:
    """Time of one call [s]."""
    begin_s = perf_counter()
    call()
    return perf_counter() - begin_s


def report(what: str, value: float, unit: str, asked: str = "") -> None:
    print(f"{what:<44} {value:10.3f} {unit:<5} {asked}".rstrip())


def every_table(mission, sky) -> None:
    for satellite in mission.satellites:
        for transmitter in satellite.spacecraft.transmitter:
            link_table(mission, sky, satellite.name, transmitter.mode)


def worst_interpolation_db(mission) -> float:
    """Largest difference between a kept curve and the models, above 5 deg, over stations and modes."""
    elevation_deg = np.random.default_rng(1).uniform(5, 90, 400)
    worst = 0.0
    for transmitter in mission.satellites[0].spacecraft.transmitter:
        for station in mission.stations:
            if cannot_hear(transmitter, station):
                continue
            request = request_curves(station, transmitter.frequency_mhz, transmitter.polarisation, PERCENT)
            kept = attenuation_curves(request).at(elevation_deg).total_db
            for k, pct in enumerate(PERCENT):
                models = total_attenuation_db(
                    request.site,
                    request.frequency_ghz,
                    elevation_deg,
                    pct,
                    diameter_m=request.diameter_m,
                    efficiency=request.efficiency,
                    tilt_deg=TILT_DEG[transmitter.polarisation],
                )
                worst = max(worst, float(np.abs(kept[k] - models.total_db).max()))
    return worst


def volume_gbit(mission, sky, satellite, transmitter, way: str, modcods) -> float:
    """What all usable seconds of all passes would bring [Gbit], the best option of each pass, acquisition aside."""
    changed = transmitter.model_copy(update={"modcod_choice": way, "modcods": modcods})
    craft = satellite.spacecraft.model_copy(update={"transmitter": (changed,)})
    changed_mission = mission.model_copy(update={"satellites": (satellite.model_copy(update={"spacecraft": craft}),)})
    table = link_table(changed_mission, sky, satellite.name, transmitter.mode)
    step_s = np.gradient(table.time_s)
    inside = np.ones(len(step_s), bool)
    inside[table.offsets[1:-1]] = inside[table.offsets[1:-1] - 1] = False
    options = [np.add.reduceat(option.rate_mbps * step_s * inside, table.offsets[:-1]) for option in table.options]
    return float(np.max(options, axis=0).sum() / 1e3)


def main(path: str) -> None:
    mission = load_mission(path)
    sky = observe(mission)
    satellite = mission.satellites[0]
    print(f"{len(sky.passes)} passes, {len(sky.samples)} samples, {len(satellite.spacecraft.transmitter)} modes")
    with tempfile.TemporaryDirectory() as folder:
        os.environ.update(XDG_CACHE_HOME=folder, LOCALAPPDATA=folder)
        report("first tables, maps loaded and curves made", seconds(lambda: every_table(mission, sky)), "s")
        again_s = min(seconds(lambda: every_table(mission, sky)) for _ in range(5))
        report("tables again, curves in memory", again_s, "s", "below 0.5")
        attenuation_curves.cache_clear()
        report("tables again, curves on disk", seconds(lambda: every_table(mission, sky)), "s", "below 0.5")
        report("curves against the models, worst", worst_interpolation_db(mission), "dB", "below 0.1")
        transmitter = max(satellite.spacecraft.transmitter, key=lambda each: len(each.modcods))
        rows = transmitter.modcods
        for way, modcods in ((way, rows if way != "fixed" else rows[len(rows) // 2 :][:1]) for way in WAYS):
            gbit = volume_gbit(mission, sky, satellite, transmitter, way, modcods)
            report(f"{transmitter.mode}, {way}", gbit, "Gbit")


if __name__ == "__main__":
    main(*(sys.argv[1:] or ["missions/marshlight.toml"]))

"""How long the battery takes: profiles, one week at one corner, a session's draw, a thousand perturbed weeks.

    python benchmarks/power.py [MISSION]

Each line is the best of a few runs, beside what is asked of it.
"""

import sys
from time import perf_counter

from planner.mission.contacts import Session
from planner.mission.files import load_mission
from planner.power.balance import SatellitePower
from planner.power.life import life_used_pct
from planner.sky import observe

SESSIONS = 60
MOST_CANDIDATES = 900


def best_of(runs: int, call) -> float:
    """Shortest time of several calls [s]."""
    times_s = []
    for _ in range(runs):
        begin_s = perf_counter()
        call()
        times_s.append(perf_counter() - begin_s)
    return min(times_s)


def built(mission, sky, name) -> SatellitePower:
    """The power system with the profiles of both corners."""
    power = SatellitePower(mission, sky, name)
    power.idle()
    return power


def whole_passes(mission, sky, satellite) -> list[Session]:
    """One session on every pass of a satellite, in each mode, longest passes first."""
    passes = sky.passes
    own = [k for k in range(len(passes)) if passes.satellite[k] == satellite.name and not passes.truncated[k]]
    own.sort(key=lambda k: passes.aos_s[k] - passes.los_s[k])
    return [
        Session(
            float(passes.aos_s[k]) + 5, float(passes.los_s[k]) - 5, satellite.name, passes.station[k], radio.mode,
            passes.pass_id[k],
        )
        for radio in satellite.spacecraft.transmitter
        for k in own
    ]  # fmt: skip


def main(path: str = "missions/marshlight.toml") -> None:
    """Measure and print."""
    mission = load_mission(path)
    sky, satellite = observe(mission), mission.satellites[0]
    power = built(mission, sky, satellite.name)
    candidates = whole_passes(mission, sky, satellite)
    sessions = candidates[:SESSIONS]

    def all_draws():
        built_anew._courses.clear()
        built_anew.session_draws(candidates[:MOST_CANDIDATES])

    built_anew = built(mission, sky, satellite.name)
    power.simulate(sessions)
    intervals = power.intervals(sessions)
    rows = [
        ("profiles of both corners", best_of(3, lambda: built(mission, sky, satellite.name)), 0.5),
        ("one corner's week", best_of(10, lambda: power.simulate(sessions, "pessimistic")), 0.025),
        (
            "both corners' weeks",
            best_of(10, lambda: [power.simulate(sessions, c) for c in ("nominal", "pessimistic")]),
            0.05,
        ),
        (f"draws of {len(candidates[:MOST_CANDIDATES])} sessions", best_of(3, all_draws), 0.9),
        (f"{satellite.spacecraft.spread.samples} perturbed weeks", best_of(3, lambda: power.perturbed(sessions)), 5.0),
    ]
    print(f"{mission.name}: {len(intervals.array_w)} intervals, {len(sessions)} sessions")
    for label, seconds, asked_s in rows:
        verdict = "ok" if seconds <= asked_s else "TOO SLOW"
        print(f"{label:28s} {1e3 * seconds:9.1f} ms   asked for {1e3 * asked_s:7.0f} ms   {verdict}")
    series = power.simulate(sessions)
    lowest_s, lowest_pct = series.lowest()
    print(f"books open by {series.books().open_j / mission.days:.1e} J a day")
    print(f"lowest charge {lowest_pct:.2f} % at {lowest_s:.0f} s, end {series.soc_pct[-1]:.2f} %,"
          f" life used {life_used_pct(satellite.spacecraft.battery, series.soc_pct):.3f} %")  # fmt: skip
    print("risk of breaking the floor", power.perturbed(sessions).broken(mission.policy.soc_floor_pct))


if __name__ == "__main__":
    main(*sys.argv[1:])

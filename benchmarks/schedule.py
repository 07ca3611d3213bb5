"""The optimiser beside simple rules, on the same physics in one run. Prints JSON.

    python benchmarks/schedule.py [MISSION]

Each rule takes whole usable windows one by one and keeps each that breaks no limit beside those kept before: largest
volume first, best volume per joule first, first come. All start from the plan's own low-rate contacts, so that the
required ones are there. Seconds are those of this machine at this moment; the ratios are what to compare.
"""

import json
import sys
import time

import planner
from planner.mission.contacts import Session
from planner.schedule.candidates import pose
from planner.schedule.checks import find_faults
from planner.schedule.flown import Flown
from planner.schedule.result import prepared
from planner.schedule.sessions import Candidate
from planner.schedule.wishes import Wishes

RULES = {
    "largest volume first": lambda c: -c.most_mbit,
    "best volume per joule first": lambda c: -c.most_mbit / max(_energy_wh(c), 1e-6),
    "first come": lambda c: c.opens_s,
}


def _energy_wh(candidate: Candidate) -> float:
    return candidate.likely.fixed_wh + candidate.likely.on_air_wh(candidate.opens_s, candidate.closes_s)


def by_rule(base: Flown, candidates: list[Candidate], key) -> Flown:
    """Sessions kept one by one in the order of a rule."""
    flown = base
    known = {fault.text for fault in find_faults(base)}
    for candidate in sorted(candidates, key=key):
        trial = flown.with_session(_whole(candidate))
        if all(fault.text in known for fault in find_faults(trial)):
            flown = trial
    return flown


def _whole(candidate: Candidate) -> Session:
    on_s = max(candidate.opens_s, candidate.peak_s - candidate.longest_s / 2)
    on_s = min(on_s, candidate.closes_s - candidate.longest_s)
    return candidate.session(on_s, on_s + candidate.longest_s)


def main(path: str = "missions/marshlight.toml") -> dict:
    """Volumes by rule, and the optimiser's."""
    mission = planner.load_mission(path)
    week = prepared(mission)
    began = time.perf_counter()
    plan = planner.plan_week(mission)
    seconds = time.perf_counter() - began
    modes = {c.mode: c.transmitter.symbol_rate_mbaud for c in plan.plan.problem.candidates}
    fastest = max(modes, key=modes.get)
    base = Flown(week, tuple(s for s in plan.flown.sessions if s.mode != fastest))
    problem, _ = pose(week, Wishes())
    candidates = [candidate for candidate in problem.candidates if candidate.mode == fastest]
    optimum = plan.flown.total_mbit
    rows = {}
    for name, key in RULES.items():
        began = time.perf_counter()
        flown = by_rule(base, candidates, key)
        rows[name] = {
            "sessions": len(flown.sessions),
            "volume_mbit": round(flown.total_mbit),
            "share_of_optimiser": round(flown.total_mbit / optimum, 4),
            "seconds": round(time.perf_counter() - began, 1),
        }
    return {
        "mission": mission.name,
        "optimiser": {
            "sessions": len(plan.flown.sessions),
            "volume_mbit": round(optimum),
            "upper_bound_mbit": plan.summary["upper_bound_mbit"],
            "gap_pct": plan.summary["gap_pct"],
            "solver_gap_pct": plan.summary["solver_gap_pct"],
            "solutions": plan.summary["solutions"],
            "seconds": round(seconds, 1),
        },
        "rules": rows,
    }


if __name__ == "__main__":
    print(json.dumps(main(*sys.argv[1:]), indent=2))

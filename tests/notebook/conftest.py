"""One day of the demo mission, planned once, and a workbench on it."""

import asyncio

import pytest
from bench_examples import HIGH, MISSION_FILE

import planner
from planner.notebook.variants import shorter
from planner.notebook.workbench import Workbench


@pytest.fixture(scope="session")
def mission():
    return shorter(planner.load_mission(MISSION_FILE), 1)


@pytest.fixture(scope="session")
def plan(mission):
    return planner.plan_week(mission)


@pytest.fixture
def on_bench(mission, plan, tmp_path):
    """Run what a user does: `act(bench)` inside a loop, as in a kernel; awaited when it is a coroutine."""

    def run(act, mission=mission, plan=plan):
        async def main():
            bench = Workbench(mission, plan, folder=str(tmp_path / "out"))
            bench.week.picture.canvas.draw()  # what a browser asks for first
            result = act(bench)
            return await result if asyncio.iscoroutine(result) else result

        return asyncio.run(main())

    return run


@pytest.fixture
def flown_pass(plan):
    """A planned high-rate session."""
    return next(session for session in plan.flown.sessions if session.mode == HIGH)


@pytest.fixture
def free_pass(plan):
    """A pass left out though its link would do."""
    left_out = plan.passes[(plan.passes["verdict"] == "left out") & plan.passes["reason"].str.startswith(HIGH)]
    return str(left_out["pass_id"].iloc[0])

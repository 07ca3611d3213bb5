"""Plan a week of downlink sessions that a small satellite's battery can pay for.

Everything the command line and the notebook do goes through these functions. Importing this package loads no plotting
library, no widget library and not the ITU-R models.
"""

from importlib import import_module

_HOMES = {
    "load_mission": "planner.mission.files",
    "find_passes": "planner.face",
    "link_budget": "planner.link",
    "Budget": "planner.link",
    "plan_week": "planner.schedule.result",
    "WeekPlan": "planner.schedule.result",
    "audit": "planner.schedule.audit",
    "Audit": "planner.schedule.audit",
    "afford": "planner.schedule.afford",
    "Affordability": "planner.schedule.afford",
    "InputError": "planner.errors",
    "NoWeekError": "planner.errors",
    "MachineError": "planner.errors",
}
__all__ = sorted(_HOMES)


def __getattr__(name: str):
    """Each name is loaded when it is first asked for, so that a solver's child process or `--help` starts at once."""
    if name not in _HOMES:
        raise AttributeError(f"module 'planner' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return __all__

"""What a person works with: widgets that hold state and compute nothing. Loaded only when asked for by name."""

from importlib import import_module

_HOMES = {
    "open_workbench": "planner.notebook.workbench",
    "Workbench": "planner.notebook.workbench",
    "find_file": "planner.notebook.places",
}
__all__ = sorted(_HOMES)


def __getattr__(name: str):
    if name not in _HOMES:
        raise AttributeError(f"module 'planner.notebook' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)

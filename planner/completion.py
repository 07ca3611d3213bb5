"""What the Tab key offers in a shell: commands and options, files of the right kind, and names the mission knows."""

import argparse
import os
from collections.abc import Iterator
from typing import Any

from planner.errors import InputError
from planner.mission.files import DEFAULT_MISSION, load_mission
from planner.mission.models import Mission

FILES = {"mission": ("toml",), "files": ("toml", "csv"), "contacts": ("csv",), "previous": ("csv",), "csv": ("csv",)}
FOLDERS = ("out", "old", "new")


def offer(parser: argparse.ArgumentParser) -> None:
    """Answer a shell that asks for completions, and end; do nothing for anyone else."""
    if "_ARGCOMPLETE" not in os.environ:
        return
    import argcomplete
    from argcomplete.completers import DirectoriesCompleter, FilesCompleter

    completer: Any
    for action in _actions(parser):
        if action.dest in FILES:
            completer = FilesCompleter(FILES[action.dest])
        elif action.dest in FOLDERS:
            completer = DirectoriesCompleter()
        elif action.dest in NAMES:
            completer = _Names(action.dest)
        else:
            continue
        action.completer = completer  # type: ignore[attr-defined]
    argcomplete.autocomplete(parser)


def _actions(parser: argparse.ArgumentParser) -> Iterator[argparse.Action]:
    for action in parser._actions:
        yield action
        if isinstance(action, argparse._SubParsersAction):
            for command in action.choices.values():
                yield from _actions(command)


def _modes(mission: Mission) -> set[str]:
    return {mode.mode for satellite in mission.satellites for mode in satellite.spacecraft.transmitter}


def _passes(mission: Mission) -> list[str]:
    from planner.face import find_passes

    return find_passes(mission)["pass_id"].tolist()


NAMES = {
    "station": lambda mission: [station.name for station in mission.stations],
    "satellite": lambda mission: [satellite.name for satellite in mission.satellites],
    "mode": _modes,
    "pass_id": _passes,
    "drop": _passes,
    "keep": lambda mission: [f"{pass_id}:{mode}" for pass_id in _passes(mission) for mode in sorted(_modes(mission))],
}


class _Names:
    """Names out of the mission on the command line; none where it cannot be read."""

    def __init__(self, dest: str):
        self._dest = dest

    def __call__(self, prefix: str, parsed_args: argparse.Namespace, **_) -> list[str]:
        try:
            mission = load_mission(getattr(parsed_args, "mission", None) or DEFAULT_MISSION)
            return [name for name in sorted(NAMES[self._dest](mission)) if name.startswith(prefix)]
        except InputError:
            return []

"""docs/keys.md lists every key that mission, spacecraft and station files may hold, each with its default."""

import re
from pathlib import Path
from typing import Any, get_args

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from planner.mission.files import MissionTables
from planner.mission.models import Spacecraft
from planner.mission.station import Station

PAGE = Path(__file__).parents[1] / "docs" / "keys.md"
FILLED_IN = {("antenna, measured pattern", "samples")}  # by the reader, not by the user
Rows = dict[tuple[str, str], str]  # (table, key) -> default


def models_in(annotation: Any) -> list[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [model for part in get_args(annotation) for model in models_in(part)]


def default_of(info: FieldInfo) -> str:
    default = info.get_default()
    if info.is_required():
        return "required"
    if default is None or default == () or isinstance(default, BaseModel):
        return ""
    shown = list(default) if isinstance(default, tuple) else default
    return f"`{shown}`".replace("'", "").replace("True", "true").replace("False", "false")


def keys_of(model: type[BaseModel], table: str) -> Rows:
    """Every key below a model, with the table it stands in; variants of one table are told apart by their kind."""
    rows: Rows = {}
    for key, info in model.model_fields.items():
        rows[table, key] = default_of(info)
        for inner in models_in(info.annotation):
            kind = inner.model_fields.get("kind")
            below = f"{table}.{key}".lstrip(".")
            rows |= keys_of(inner, below if kind is None else f"{below}, {' or '.join(get_args(kind.annotation))}")
    return {
        where: default for where, default in rows.items() if (where[0].rpartition(".")[2], where[1]) not in FILLED_IN
    }


def keys_on_the_page() -> Rows:
    """A heading names one table or several that are alike; `` is the top of the mission file."""
    rows: Rows = {}
    tables: list[str] = []
    for line in PAGE.read_text().splitlines():
        if line.startswith("#"):
            tables = re.findall(r"`([^`]*)`", line)
        elif row := re.fullmatch(r"\| `(\w+)` \| ?(.*?) \| (.+) \|", line):
            rows |= {(table, row[1]): row[2] for table in tables}
    return rows


def test_the_page_lists_every_key_with_its_default():
    known = keys_of(MissionTables, "") | keys_of(Spacecraft, "") | keys_of(Station, "station file")
    assert keys_on_the_page() == known

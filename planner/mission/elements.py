"""Orbits as the user gives them: element sets (TLE, OMM) or an ephemeris message (OEM)."""

from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Literal

from pydantic import AwareDatetime, Field

from planner.errors import InputError
from planner.mission.base import Described, Name

LARGEST_FILE_MB = 50


class ElementSet(Described):
    """SGP4 mean elements in the units of the OMM standard (CCSDS 502.0-B-3): degrees, rev/day, 1/Earth radii."""

    name: Name
    catalog_number: str
    international_designator: str = ""
    epoch: AwareDatetime
    mean_motion_rev_day: float
    eccentricity: float
    inclination_deg: float
    ra_of_asc_node_deg: float
    arg_of_pericenter_deg: float
    mean_anomaly_deg: float
    bstar: float = 0.0
    mean_motion_dot: float = 0.0
    mean_motion_ddot: float = 0.0
    rev_at_epoch: int = 0
    source: Literal["TLE", "OMM"] = "TLE"
    sets_in_file: int = Field(default=1, description="this set was chosen among so many of its satellite")


def read_elements(path, at: datetime) -> dict[str, ElementSet]:
    """Every satellite of the file by name, each with its newest set at or before `at` (else the oldest)."""
    lines = [line.rstrip() for line in Path(path).read_text(encoding="utf-8-sig").splitlines()]
    sets: dict[str, list[ElementSet]] = {}
    for index, line in enumerate(lines):
        if line.startswith("1 ") and index + 1 < len(lines):
            name = lines[index - 1].removeprefix("0 ") if index and lines[index - 1][:2] not in ("1 ", "2 ") else ""
            element_set = _of_tle(name or line[2:7].strip(), line, lines[index + 1])
            sets.setdefault(element_set.name, []).append(element_set)
    if not sets:
        raise InputError(f"{path}: must hold at least one element set, got none")
    return {name: _chosen(candidates, at) for name, candidates in sets.items()}


def _chosen(candidates: list[ElementSet], at: datetime) -> ElementSet:
    by_epoch = sorted(candidates, key=lambda element_set: element_set.epoch)
    usable = [element_set for element_set in by_epoch if element_set.epoch <= at]
    return (usable[-1] if usable else by_epoch[0]).model_copy(update={"sets_in_file": len(candidates)})


def _of_tle(name: str, one: str, two: str) -> ElementSet:
    year = int(one[18:20])
    epoch = datetime(year + (1900 if year >= 57 else 2000), 1, 1, tzinfo=UTC)
    return ElementSet(
        name=name,
        catalog_number=one[2:7].strip(),
        international_designator=one[9:17].strip(),
        epoch=epoch + timedelta(days=float(one[20:32]) - 1),
        mean_motion_rev_day=float(two[52:63]),
        eccentricity=float("0." + two[26:33]),
        inclination_deg=float(two[8:16]),
        ra_of_asc_node_deg=float(two[17:25]),
        arg_of_pericenter_deg=float(two[34:42]),
        mean_anomaly_deg=float(two[43:51]),
        bstar=float(one[53] + "." + one[54:59] + "e" + one[59:61]),
        rev_at_epoch=int(two[63:68]),
    )

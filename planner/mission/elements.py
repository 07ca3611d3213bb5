"""Orbits as the user gives them: element sets (TLE, OMM) or an ephemeris message (OEM)."""

from datetime import datetime
from typing import Literal

from pydantic import AwareDatetime

from planner.mission.base import Described, Name


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


def read_elements(path, at: datetime) -> dict[str, ElementSet]:
    """Every satellite of the file by name, each with its newest set at or before `at` (else the oldest)."""
    raise NotImplementedError

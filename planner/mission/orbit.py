"""The two ways an orbit is given: an SGP4 element set, or an ephemeris (states in a table)."""

import math
from datetime import UTC, datetime, timedelta
from functools import cached_property
from itertools import pairwise
from typing import Annotated, Literal

import numpy as np
from pydantic import AwareDatetime, Field

from planner.errors import InputError
from planner.mission.base import Described, Name
from planner.mission.interpolation import errors_km
from planner.units import DAY_S, EARTH_GM_KM3_S2, EARTH_RATE_RAD_S

EPOCH_OF_SGP4 = datetime(1949, 12, 31, tzinfo=UTC)
SLOWEST_REV_DAY = 0.05  # slower ones reach to the Moon, beyond what SGP4 is made for


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
    sets_in_file: int = Field(default=1, description="this one was chosen among so many of its satellite")
    newer_epoch: AwareDatetime | None = Field(default=None, description="of the newest that was passed over")

    def sgp4_model(self):
        """The `sgp4` package's model of this set, with the WGS 72 constants such sets are made with.

        Raises InputError with satellite, epoch and SGP4's own message when SGP4 refuses the set, and for a mean motion
        below SLOWEST_REV_DAY.
        """
        from sgp4.api import WGS72, Satrec

        if self.mean_motion_rev_day < SLOWEST_REV_DAY:
            raise InputError(
                f"{self.name}: mean motion of the element set of epoch {iso(self.epoch)} must be at least"
                f" {SLOWEST_REV_DAY:g} rev/day, got {self.mean_motion_rev_day:g}"
            )
        model = Satrec()
        days_1949 = (self.epoch - EPOCH_OF_SGP4) / timedelta(days=1)
        rad_min = self.mean_motion_rev_day * 2 * np.pi / 1440
        pericenter, inclination, anomaly, node = np.radians(
            [self.arg_of_pericenter_deg, self.inclination_deg, self.mean_anomaly_deg, self.ra_of_asc_node_deg]
        ).tolist()
        no_rates = (0.0, 0.0)  # SGP4 has no use for the mean motion's rates
        model.sgp4init(
            WGS72, "i", 0, days_1949, self.bstar, *no_rates, self.eccentricity, pericenter, inclination, anomaly,
            rad_min, node,
        )  # fmt: skip
        if model.error:
            raise self.refused(model.error)
        return model

    def refused(self, error: int, when: str = "") -> InputError:
        """The fault to raise for an SGP4 error number, told with SGP4's own words."""
        from sgp4.api import SGP4_ERRORS

        own_words = SGP4_ERRORS.get(int(error), f"error {error}")
        return InputError(f"{self.name}: SGP4 refuses the element set of epoch {iso(self.epoch)}{when}: {own_words}")


State = tuple[float, float, float, float, float, float]


class Segment(Described):
    """States of one segment of an ephemeris message, UTC, kilometres and kilometres a second in its frame."""

    frame: Literal["TEME", "ITRF", "EME2000", "GCRF"]
    interpolation: Literal["HERMITE", "LAGRANGE", "LINEAR"] = "LAGRANGE"
    degree: Annotated[int, Field(ge=1, le=25)] = 7
    usable_from: AwareDatetime
    usable_to: AwareDatetime
    moment: Annotated[tuple[AwareDatetime, ...], Field(min_length=3)]
    state: Annotated[tuple[State, ...], Field(min_length=3)]

    @property
    def interval_errors_km(self) -> np.ndarray:
        """About how far off the positions in the middle between states may be, 0 where they are of no use, (n - 1,)."""
        useful = [later > self.usable_from and earlier < self.usable_to for earlier, later in pairwise(self.moment)]
        return np.where(useful, errors_km(self), 0.0)


class Ephemeris(Described):
    """An ephemeris message (CCSDS OEM). Its epoch, from which its age counts, is the message's creation date."""

    name: Name
    catalog_number: str = ""
    international_designator: str = ""
    epoch: AwareDatetime
    segment: Annotated[tuple[Segment, ...], Field(min_length=1)]
    source: Literal["OEM"] = "OEM"
    sets_in_file: int = 1
    newer_epoch: AwareDatetime | None = None

    @cached_property
    def shape(self) -> tuple[float, float, float]:
        """Semi-major axis [km], eccentricity, inclination [deg] of the middle state of the first segment, two-body."""
        segment = self.segment[0]
        return two_body(segment.state[len(segment.state) // 2], segment.frame)

    @property
    def interpolation_error_km(self) -> float:
        """The greatest error to expect between states [km], from states left out (see `interpolation.errors_km`)."""
        return max(float(segment.interval_errors_km.max()) for segment in self.segment)

    @property
    def mean_motion_rev_day(self) -> float:
        return float(np.sqrt(EARTH_GM_KM3_S2 / self.shape[0] ** 3) * DAY_S / (2 * np.pi))

    @property
    def eccentricity(self) -> float:
        return self.shape[1]

    @property
    def inclination_deg(self) -> float:
        return self.shape[2]


def two_body(state: State, frame: str) -> tuple[float, float, float]:
    """Semi-major axis [km], negative where the state escapes, eccentricity and inclination [deg] of Kepler's orbit.

    The radius of the state must be above 0.
    """
    x, y, z, vx, vy, vz = state
    if frame == "ITRF":
        vx, vy = vx - EARTH_RATE_RAD_S * y, vy + EARTH_RATE_RAD_S * x
    momentum = (y * vz - z * vy, z * vx - x * vz, x * vy - y * vx)
    per_axis = 2 / math.hypot(x, y, z) - (vx * vx + vy * vy + vz * vz) / EARTH_GM_KM3_S2
    eccentricity = math.sqrt(max(0.0, 1 - math.hypot(*momentum) ** 2 / EARTH_GM_KM3_S2 * per_axis))
    inclination_deg = math.degrees(math.atan2(math.hypot(*momentum[:2]), momentum[2]))
    return 1 / per_axis if per_axis else math.inf, eccentricity, inclination_deg


def iso(moment: datetime) -> str:
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")

"""A ground station: where it stands, what it can hear, when it is open, what it costs."""

import itertools
from datetime import time
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from planner.mission.base import Described, Efficiency, LossDecibel, Name, NonNegative, Positive, Windows
from planner.mission.transmitter import BandName, Polarisation

Weekday = Literal["mon", "tue", "wed", "thu", "fri", "sat", "sun"]


class GroundAntenna(Described):
    diameter_m: Positive
    efficiency: Efficiency = 0.6
    pointing_error_deg: NonNegative = 0.0
    autotrack: bool = Field(default=False, description="follows the signal: the age of the elements costs no gain")
    axial_ratio_db: LossDecibel = 0.0
    polarisations: Annotated[tuple[Polarisation, ...], Field(min_length=1)] = ("RHCP", "LHCP")
    max_azimuth_rate_deg_s: Positive = 10.0
    max_elevation_rate_deg_s: Positive = 5.0


class Receiver(Described):
    """Either a cascade (feed loss, amplifier, cable, what follows) or a stated G/T at zenith in clear sky."""

    bands: Annotated[tuple[BandName, ...], Field(min_length=1)]
    noise_temperature_k: Positive | None = None
    feed_loss_db: LossDecibel = 0.0
    amplifier_gain_db: LossDecibel = 50.0
    cable_loss_db: LossDecibel = 0.0
    following_noise_figure_db: LossDecibel = 0.0
    ground_spillover_k: NonNegative = 10.0
    gt_dbk: Annotated[float, Field(ge=-60, le=80)] | None = None

    @model_validator(mode="after")
    def _one_of_two(self):
        if (self.noise_temperature_k is None) == (self.gt_dbk is None):
            raise ValueError(
                "give either noise_temperature_k or gt_dbk, got " + ("none" if self.gt_dbk is None else "both")
            )
        return self


class Hours(Described):
    """Open windows in UTC on the named days, less maintenance; without `open` the station is always open."""

    open: tuple[tuple[time, time], ...] = ()
    days: Annotated[tuple[Weekday, ...], Field(min_length=1)] = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
    maintenance: Windows = ()


class Cost(Described):
    per_pass: NonNegative = 0.0
    per_minute: NonNegative = 0.0


class Station(Described):
    name: Name
    latitude_deg: Annotated[float, Field(ge=-90, le=90)]
    longitude_deg: Annotated[float, Field(ge=-180, le=360)]
    altitude_m: Annotated[float, Field(ge=-500, le=9000)] = 0.0
    min_elevation_deg: Annotated[float, Field(ge=0, lt=90)] = 5.0
    horizon: tuple[tuple[float, float], ...] = Field(default=(), description="[azimuth_deg, elevation_deg] points")
    rain_rate_mm_h: NonNegative | None = Field(
        default=None, description="exceeded 0.01 % of the year; None takes the map"
    )
    uplink: bool = True
    antenna: GroundAntenna
    receiver: Annotated[tuple[Receiver, ...], Field(min_length=1)]
    hours: Hours = Hours()
    cost: Cost = Cost()

    @field_validator("receiver", mode="before")
    @classmethod
    def _one_table_is_a_list_of_one(cls, value):
        return (value,) if isinstance(value, dict) else value

    @field_validator("horizon")
    @classmethod
    def _a_circle_of_elevations(cls, points: tuple[tuple[float, float], ...]):
        azimuths = [azimuth for azimuth, _ in points]
        if any(not 0 <= azimuth < 360 for azimuth in azimuths) or any(b <= a for a, b in itertools.pairwise(azimuths)):
            raise ValueError(f"azimuths must rise from 0 to below 360 deg, got {azimuths}")
        if any(not 0 <= elevation < 90 for _, elevation in points):
            raise ValueError(f"elevations must be from 0 to below 90 deg, got {[elevation for _, elevation in points]}")
        return points

    def receiver_for(self, band: str) -> Receiver | None:
        """The receiver that hears `band`, or None."""
        return next((receiver for receiver in self.receiver if band in receiver.bands), None)

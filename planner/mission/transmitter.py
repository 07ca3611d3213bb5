"""A mode: one transmitter setting, with its antenna, its codes and what it draws."""

from typing import Annotated, Literal

from pydantic import Field, model_validator

from planner.mission.base import (
    BodyAxis,
    Decibel,
    Described,
    Efficiency,
    FileName,
    Fraction,
    LossDecibel,
    Name,
    NonNegative,
    Positive,
)
from planner.mission.pointing import Law

Polarisation = Literal["RHCP", "LHCP", "horizontal", "vertical"]

# Letter bands of IEEE Std 521, lower edges in MHz (from memory)
BAND_EDGES_MHZ = (("VHF", 30), ("UHF", 300), ("L", 1000), ("S", 2000), ("C", 4000), ("X", 8000), ("Ku", 12000),
                  ("K", 18000), ("Ka", 27000), ("V", 40000), ("beyond V", 75000))  # fmt: skip
BandName = Literal["VHF", "UHF", "L", "S", "C", "X", "Ku", "K", "Ka", "V"]


def band_of(frequency_mhz: float) -> str:
    """Letter band of a frequency, e.g. 26 250 MHz is K."""
    return [name for name, edge in BAND_EDGES_MHZ if frequency_mhz >= edge][-1]


class Isotropic(Described):
    kind: Literal["isotropic"]


class GainOnly(Described):
    """A gain and nothing else: usable only where the antenna looks straight at the station."""

    kind: Literal["gain only"]
    gain_dbi: Decibel


class Parabola(Described):
    kind: Literal["parabola"]
    diameter_m: Positive
    efficiency: Efficiency = 0.6


class CosinePower(Described):
    """Patch, or array of patches: gain falls as a power of the cosine of the off-axis angle."""

    kind: Literal["patch", "array"]
    gain_dbi: Decibel


class ReflectingArray(Described):
    """Flat reflecting array lit by a feed."""

    kind: Literal["flat reflecting array"]
    width_m: Positive
    height_m: Positive
    aperture_efficiency: Efficiency = 0.6
    illumination_efficiency: Efficiency = 0.8


class MeasuredPattern(Described):
    """Off-axis angle [deg] and gain [dBi] from a CSV file; `samples` is filled in when the file is read."""

    kind: Literal["measured pattern"]
    file: FileName
    samples: tuple[tuple[float, float], ...] = ()


Antenna = Annotated[
    Isotropic | GainOnly | Parabola | CosinePower | ReflectingArray | MeasuredPattern, Field(discriminator="kind")
]


class OwnModcod(Described):
    """A row of the user's own: information bits per symbol and the Es/N0 it needs."""

    name: Name
    bits_per_symbol: Positive
    required_esn0_db: Decibel


class Transmitter(Described):
    mode: Name
    # radio
    frequency_mhz: Annotated[float, Field(ge=30, lt=75_000)]
    rf_power_w: Positive
    line_loss_db: LossDecibel = 0.0
    polarisation: Polarisation = "RHCP"
    axial_ratio_db: LossDecibel = 0.0
    pointing_error_deg: NonNegative = 0.0
    antenna: Antenna
    boresight: BodyAxis = (0.0, 0.0, 1.0)
    # codes
    symbol_rate_mbaud: Positive
    roll_off: Fraction = 0.35
    allocated_bandwidth_mhz: Positive | None = None
    modcods: Annotated[tuple[Name, ...], Field(min_length=1)]
    own_modcods: tuple[OwnModcod, ...] = ()
    modcod_choice: Literal["fixed", "best for the pass", "variable"] = "fixed"
    hysteresis_db: LossDecibel = 0.5
    shortest_dwell_s: NonNegative = 10.0
    pilots: bool = Field(default=False, description="DVB-S2 pilot symbols are sent; other codes ignore it")
    implementation_loss_db: LossDecibel = 1.0
    acquisition_s: NonNegative = 5.0
    modcod_change_s: NonNegative = 0.0
    upper_layer_overhead_pct: Annotated[float, Field(ge=0, lt=100)] = 0.0
    retransmission_reserve_pct: Annotated[float, Field(ge=0, lt=100)] = 0.0
    # power, at the bus behind its converter
    dc_power_w: Positive
    converter_efficiency: Efficiency = 0.95
    warmup_s: NonNegative = 0.0
    warmup_power_w: NonNegative = 0.0
    cooldown_s: NonNegative = 0.0
    cooldown_power_w: NonNegative = 0.0
    longest_on_s: Positive | None = None
    most_on_per_orbit_s: Positive | None = Field(default=None, description="on air in any one revolution")
    # operation
    session_law: Law | None = Field(default=None, description="pointing in session; None takes pointing.session")
    uplink: bool = Field(default=False, description="the contact also carries commands up")
    together_with: tuple[Name, ...] = ()

    @property
    def band(self) -> str:
        return band_of(self.frequency_mhz)

    @model_validator(mode="after")
    def _consistent(self):
        if self.rf_power_w >= self.dc_power_w:
            raise ValueError(f"rf_power_w must be below dc_power_w, got {self.rf_power_w} and {self.dc_power_w}")
        occupied_mhz = self.symbol_rate_mbaud * (1 + self.roll_off)
        if self.allocated_bandwidth_mhz is not None and occupied_mhz > self.allocated_bandwidth_mhz:
            raise ValueError(
                f"symbol_rate_mbaud x (1 + roll_off) = {occupied_mhz:g} MHz must fit"
                f" allocated_bandwidth_mhz, got {self.allocated_bandwidth_mhz:g}"
            )
        if self.modcod_choice == "fixed" and len(self.modcods) != 1:
            raise ValueError(f'modcods must name one row when modcod_choice is "fixed", got {len(self.modcods)}')
        return self

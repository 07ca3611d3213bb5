"""The spacecraft's power side as the user describes it: panels, battery, loads, and how bad a bad day is."""

import itertools
from datetime import datetime
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from planner.mission.base import (
    BodyAxis,
    Celsius,
    Described,
    Efficiency,
    Name,
    NonNegative,
    Percent,
    Positive,
    Real,
    Windows,
)

When = Literal["always", "sunlit", "eclipse", "windows"]
Table = tuple[tuple[Real, Real], ...]
# What a cell of a chemistry is ever discharged and charged to (from memory; the cell's data sheet comes first)
FARTHEST_V = {"LiFePO4": (2.0, 3.65), "Li-ion": (2.0, 4.5)}
ABOVE_REST_V = 0.2  # how far a charger may stand above the full resting cell of a table of one's own
# Cell voltages an operator commonly stays between, for cycle life and headroom (common practice, no source)
DERATED_V = {"LiFePO4": (2.8, 3.5), "Li-ion": (3.0, 4.1)}


def check_windows(when: str, windows: tuple[tuple[datetime, datetime], ...]) -> None:
    """Windows are given exactly when `when` asks for them."""
    if (when == "windows") != bool(windows):
        raise ValueError(
            f'windows must be given exactly when `when` is "windows", got {when!r} and {len(windows)} windows'
        )


class Panel(Described):
    name: Name
    normal: BodyAxis = Field(description="outward normal in body axes, before the hinge turns it")
    cell_area_m2: Positive
    efficiency: Efficiency = 0.298
    temperature_coefficient_pct_k: Annotated[float, Field(ge=-2, le=0)] = -0.25
    end_of_life_factor: Efficiency = 0.89
    hinge_axis: BodyAxis | None = None
    hinge_angle_deg: Annotated[float, Field(ge=-180, le=180)] = 0.0
    shading: tuple[tuple[float, float], ...] = Field(
        default=(), description="[incidence_deg, lit share 0..1] table; empty means never shaded"
    )
    temperature_sunlit_c: Celsius | None = Field(default=None, description="None: from the thermal balance")

    @field_validator("shading")
    @classmethod
    def _table(cls, rows: tuple[tuple[float, float], ...]):
        angles = [angle for angle, _ in rows]
        if any(b <= a for a, b in itertools.pairwise(angles)) or any(not 0 <= a <= 90 for a in angles):
            raise ValueError(f"incidence angles must rise from 0 to 90 deg, got {angles}")
        if any(not 0 <= share <= 1 for _, share in rows):
            raise ValueError(f"lit shares must be from 0 to 1, got {[share for _, share in rows]}")
        return rows

    @model_validator(mode="after")
    def _hinge(self):
        if self.hinge_axis is None and self.hinge_angle_deg != 0:
            raise ValueError(
                f"hinge_axis must be given with hinge_angle_deg, got none and {self.hinge_angle_deg:g} deg"
            )
        return self


class ArrayConversion(Described):
    """What stands between the cells and the bus."""

    converter_efficiency: Efficiency = 0.92
    tracking_efficiency: Efficiency = 0.97
    max_array_w: Positive | None = None


class Battery(Described):
    cells_series: Annotated[int, Field(ge=1, le=1000)]
    cells_parallel: Annotated[int, Field(ge=1, le=1000)]
    cell_capacity_ah: Positive
    chemistry: Literal["LiFePO4", "Li-ion"] = "LiFePO4"
    open_circuit: Table | None = Field(
        default=None, description="[soc_pct, cell_v] table of your own; None: the built-in one of the chemistry"
    )
    health: Annotated[float, Field(gt=0, le=1)] = 1.0
    cell_resistance_mohm: Positive = Field(description="direct-current resistance at 25 degC and half charge")
    resistance_by_temperature: Table | None = Field(
        default=None, description="[degC, factor on cell_resistance_mohm] table; None: the built-in one"
    )
    resistance_by_charge: Table | None = Field(
        default=None, description="[soc_pct, factor on cell_resistance_mohm] table; None: the built-in one"
    )
    coulombic_efficiency: Efficiency = 0.995
    self_discharge_pct_month: Percent = 2.0
    cell_min_v: Positive = Field(default=DERATED_V["LiFePO4"][0], description="default by chemistry")
    cell_max_v: Positive = Field(default=DERATED_V["LiFePO4"][1], description="default by chemistry")
    cell_max_discharge_a: Positive
    cell_max_charge_a: Positive
    charge_min_c: Celsius = 0.0
    charge_max_c: Celsius = 45.0
    charge_inhibit: bool = Field(
        default=True,
        description="the charger holds off outside charge_min_c..charge_max_c; false: it charges, and that is a breach",
    )
    bus_trip_a: Positive | None = Field(default=None, description="over-current trip of the bus")
    # thermal model: relaxes towards one temperature in sunlight and another in eclipse
    sunlit_c: Celsius = 20.0
    eclipse_c: Celsius = 10.0
    thermal_time_constant_min: Positive = 90.0
    # life
    max_cycle_depth_pct: Percent | None = None
    cycle_life: Table | None = Field(
        default=None, description="[depth_pct, cycles to end of life] table; None: the built-in one"
    )

    @model_validator(mode="before")
    @classmethod
    def _window_of_the_chemistry(cls, table):
        if not isinstance(table, dict) or table.get("chemistry") not in DERATED_V:
            return table
        low_v, high_v = DERATED_V[table["chemistry"]]
        return {"cell_min_v": low_v, "cell_max_v": high_v} | table

    @field_validator("open_circuit", "resistance_by_temperature", "resistance_by_charge", "cycle_life")
    @classmethod
    def _a_positive_table(cls, rows: Table | None):
        if rows is None:
            return rows
        if len(rows) < 2:
            raise ValueError(
                f"a table needs two rows or more, got {len(rows)}; leave the key out for the built-in table"
            )
        arguments, values = zip(*rows, strict=True)
        if any(b <= a for a, b in itertools.pairwise(arguments)):
            raise ValueError(f"the first column must rise, got {list(arguments)}")
        if min(values) <= 0:
            raise ValueError(f"the second column must be above 0, got {list(values)}")
        return rows

    @field_validator("open_circuit")
    @classmethod
    def _rising_voltage(cls, rows: Table | None):
        if rows is None:
            return rows
        if rows[0][0] != 0 or rows[-1][0] != 100:
            raise ValueError(f"soc_pct must run from 0 to 100, got {rows[0][0]:g} to {rows[-1][0]:g}")
        volts = [volt for _, volt in rows]
        if any(b <= a for a, b in itertools.pairwise(volts)):
            raise ValueError(f"cell_v must rise with charge, got {volts}")
        return rows

    @field_validator("cycle_life")
    @classmethod
    def _fewer_deep_cycles(cls, rows: Table | None):
        if rows is None:
            return rows
        if rows[0][0] <= 0:
            raise ValueError(f"depth_pct must be above 0, got {rows[0][0]:g}")
        cycles = [count for _, count in rows]
        if any(b > a for a, b in itertools.pairwise(cycles)):
            raise ValueError(f"cycles must not grow with depth, got {cycles}")
        return rows

    @model_validator(mode="after")
    def _voltages_of_the_chemistry(self):
        (low_v, high_v), what = FARTHEST_V[self.chemistry], f"{self.chemistry} cells"
        if self.open_circuit is not None:
            low_v, high_v = 0.0, max(high_v, round(self.open_circuit[-1][1] + ABOVE_REST_V, 6))
            what = f"{what} and a full cell of open_circuit"
        if self.cell_min_v < low_v:
            raise ValueError(f"cell_min_v must be at least {low_v:g} for {what}, got {self.cell_min_v:g}")
        if self.cell_max_v > high_v:
            raise ValueError(f"cell_max_v must be at most {high_v:g} for {what}, got {self.cell_max_v:g}")
        return self

    @model_validator(mode="after")
    def _floors_below_ceilings(self):
        if self.cell_min_v >= self.cell_max_v:
            raise ValueError(f"cell_min_v must be below cell_max_v, got {self.cell_min_v} and {self.cell_max_v}")
        if self.charge_min_c >= self.charge_max_c:
            raise ValueError(
                f"charge_min_c must be below charge_max_c, got {self.charge_min_c} and {self.charge_max_c}"
            )
        return self


class Load(Described):
    """A steady draw behind its converter. A thermostat holds the heater off above `on_below_c`."""

    name: Name
    power_w: NonNegative
    when: When = "always"
    windows: Windows = ()
    duty: Annotated[float, Field(ge=0, le=1)] = 1.0
    on_below_c: Celsius | None = Field(default=None, description="thermostat on the battery temperature")
    converter_efficiency: Efficiency = 0.95
    peak_current_a: NonNegative | None = None

    @model_validator(mode="after")
    def _windows(self):
        check_windows(self.when, self.windows)
        return self


class Pessimistic(Described):
    """The corner that every limit is held to, relative to the nominal description."""

    health: Annotated[float, Field(gt=0, le=1)] = Field(
        default=0.85, description="share of the new capacity that is left; the battery's own health where that is lower"
    )
    resistance_factor: Annotated[float, Field(ge=1, le=100)] = 1.5
    battery_colder_k: NonNegative = 8.0
    array_end_of_life: bool = True
    array_factor: Efficiency = 0.97
    load_factor: Annotated[float, Field(ge=1, le=10)] = 1.05
    transmitter_factor: Annotated[float, Field(ge=1, le=10)] = 1.03


class Spread(Described):
    """One-sigma relative spreads for the probability that a week breaks its floor."""

    capacity_pct: Percent = 3.0
    resistance_pct: Percent = 15.0
    array_pct: Percent = 3.0
    load_pct: Percent = 3.0
    transmitter_pct: Percent = 2.0
    samples: Annotated[int, Field(ge=10, le=100_000)] = 1000
    seed: Annotated[int, Field(ge=0)] = 1


__all__ = ["ArrayConversion", "Battery", "Load", "Panel", "Pessimistic", "Spread", "check_windows"]

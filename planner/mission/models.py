"""The mission: one frozen tree that holds everything the user describes."""

from datetime import datetime, timedelta
from itertools import pairwise
from typing import Annotated, Any, Literal

from pydantic import AwareDatetime, Field, ValidationError, field_validator, model_validator

from planner.errors import InputError
from planner.mission.base import Decibel, Described, Name, NonNegative, Percent, Positive, Windows
from planner.mission.elements import ElementSet, Ephemeris
from planner.mission.names import alike
from planner.mission.pointing import Pointing
from planner.mission.power import (
    ArrayConversion,
    Battery,
    Load,
    Panel,
    Pessimistic,
    Spread,
    When,
    check_windows,
)
from planner.mission.station import Hours, Station
from planner.mission.text import faults_of
from planner.mission.transmitter import Transmitter
from planner.units import DAY_S


class StartState(Described):
    """As telemetry last said."""

    soc_pct: Percent
    soc_error_pct: Percent = 4.0
    stored_mbit: NonNegative = 0.0
    commands_aboard_until: AwareDatetime | None = Field(
        default=None, description="sessions before this need no upload in the span; None: the whole first day"
    )


class Policy(Described):
    # battery
    soc_floor_pct: Percent
    soc_end_pct: Percent
    floor_risk_pct: Annotated[float, Field(gt=0, lt=50)] | None = Field(
        default=None,
        description="instead of the pessimistic corner: most probability that a week spread about nominal breaks"
        " soc_floor_pct or soc_end_pct (upper end of its 95 % interval)",
    )
    # link
    link_margin_db: Decibel = 3.0
    availability_pct: Annotated[float, Field(ge=50, le=99.999)] = 99.0
    enforce_flux_limit: bool = False
    # sessions
    min_session_s: Positive = 90.0
    turnaround_s: NonNegative = 120.0
    clock_guard_s: NonNegative = Field(
        default=0.5, description="kept inside AOS and LOS for clocks, beside the elements' one-sigma timing error"
    )
    max_sessions_per_day: Annotated[int, Field(ge=1)] | None = None
    shifts: Hours = Field(default=Hours(), description="when operators are there: contacts lie within their hours")
    longest_gap_h: Positive | None = None
    daily_contact_modes: tuple[Name, ...] = Field(
        default=(), description="at least one contact a UTC day in one of these"
    )
    cost_budget: NonNegative | None = None
    cost_mbit: NonNegative = Field(default=0.0, description="Mbit that one unit of station cost is worth")
    keep: tuple[str, ...] = Field(default=(), description="PASS:MODE")
    drop: tuple[str, ...] = Field(default=(), description="PASS")
    replan_loss_pct: Percent = Field(default=1.0, description="volume a re-plan may give up to change fewer contacts")
    # elements and commands
    elements_refresh_days: Positive = 1.0
    elements_max_age_days: Positive = 14.0
    upload_lead_h: NonNegative | None = Field(default=None, description="None: commands are always aboard")
    upload_reach_h: Positive = 48.0

    @property
    def floor_words(self) -> str:
        """The floor as it is to be told beside a charge of the pessimistic week."""
        risk = "" if self.floor_risk_pct is None else f" but for {self.floor_risk_pct:g} % of weeks"
        return f"floor {self.soc_floor_pct:g} %{risk}"

    @property
    def bound_corner(self) -> Literal["nominal", "pessimistic"]:
        """The corner that a bound on every allowed week may count on: a policy of risk lets half the weeks be worse."""
        return "pessimistic" if self.floor_risk_pct is None else "nominal"

    @model_validator(mode="after")
    def _consistent(self):
        if self.soc_end_pct < self.soc_floor_pct:
            raise ValueError(
                f"soc_end_pct must not be below soc_floor_pct, got {self.soc_end_pct:g} and {self.soc_floor_pct:g}"
            )
        if self.upload_lead_h is not None and self.upload_lead_h >= self.upload_reach_h:
            raise ValueError(
                f"upload_reach_h must be above upload_lead_h, got {self.upload_reach_h:g} and {self.upload_lead_h:g}"
            )
        return self


class ElementAging(Described):
    """In-track one-sigma error: at epoch, and growth with age (see sky/aging.py for the model and its source)."""

    in_track_at_epoch_km: NonNegative = 1.0
    in_track_km_per_day: NonNegative = 2.0
    in_track_km_per_day2: NonNegative = 0.5


class DataClass(Described):
    """Data of one priority: what a Mbit of it is worth fresh, and at which age it is worth nothing any more.

    The worth falls in a straight line with age. Heavier classes are sent first, and lighter ones give way to them when
    the recorder is full.
    """

    name: Name
    weight: Positive = 1.0
    latency_h: Positive | None = Field(default=None, description="None: worth does not fall with age")

    @property
    def fading_per_h(self) -> float:
        """Worth that a stored Mbit loses in an hour."""
        return 0.0 if self.latency_h is None else self.weight / self.latency_h


class Source(Described):
    """A payload that fills the recorder."""

    name: Name
    data_class: Name | None = Field(default=None, description="None: the lightest class")
    rate_mbps: NonNegative
    when: When = "sunlit"
    windows: Windows = ()
    duty: Annotated[float, Field(ge=0, le=1)] = 1.0

    @model_validator(mode="after")
    def _windows(self):
        check_windows(self.when, self.windows)
        return self


class Recorder(Described):
    capacity_mbit: Positive
    reserve_mbit: NonNegative = Field(default=0.0, description="kept free for housekeeping")
    source: tuple[Source, ...] = ()
    data_class: tuple[DataClass, ...] = ()

    @property
    def classes(self) -> tuple[DataClass, ...]:
        """From the heaviest to the lightest; one of weight 1 where none is described."""
        return tuple(sorted(self.data_class, key=lambda c: -c.weight)) or (DataClass(name="data"),)

    def class_index(self, source: Source) -> int:
        """Place of a source's data in `classes`."""
        names = [data_class.name for data_class in self.classes]
        return len(names) - 1 if source.data_class is None else names.index(source.data_class)

    @model_validator(mode="after")
    def _classes(self):
        names = [data_class.name for data_class in self.data_class]
        if len(set(names)) < len(names):
            raise ValueError(f"data_class names must differ, got {names}")
        unknown = [s.data_class for s in self.source if s.data_class is not None and s.data_class not in names]
        if unknown:
            raise ValueError(f"source.data_class must name one of {names}, got {unknown}")
        fading = [data_class.fading_per_h for data_class in self.classes]
        if any(lighter > heavier for heavier, lighter in pairwise(fading)):
            raise ValueError(
                "weight / latency_h must not be higher for a lighter data_class (it would have to be sent first),"
                f" got {[f'{value:.3g}' for value in fading]} from the heaviest on"
            )
        return self

    @model_validator(mode="after")
    def _room(self):
        if self.reserve_mbit >= self.capacity_mbit:
            raise ValueError(
                f"reserve_mbit must be below capacity_mbit, got {self.reserve_mbit:g} and {self.capacity_mbit:g}"
            )
        return self

    @property
    def usable_mbit(self) -> float:
        return self.capacity_mbit - self.reserve_mbit


class Spacecraft(Described):
    """Everything aboard one satellite."""

    transmitter: Annotated[tuple[Transmitter, ...], Field(min_length=1)]
    battery: Battery
    panel: Annotated[tuple[Panel, ...], Field(min_length=1)]
    array: ArrayConversion = ArrayConversion()
    load: tuple[Load, ...] = ()
    recorder: Recorder
    pointing: Pointing = Pointing()
    pessimistic: Pessimistic = Pessimistic()
    spread: Spread = Spread()
    aging: ElementAging = ElementAging()

    @field_validator("transmitter")
    @classmethod
    def _distinct_modes(cls, transmitters: tuple[Transmitter, ...]):
        modes = [transmitter.mode for transmitter in transmitters]
        if alike(modes):
            raise ValueError(f"mode names must differ in their letters and digits, got {modes}")
        unknown = [name for transmitter in transmitters for name in transmitter.together_with if name not in modes]
        if unknown:
            raise ValueError(f"together_with must name modes of this satellite {modes}, got {unknown}")
        return transmitters

    def may_overlap(self, a: str, b: str) -> bool:
        """Whether two modes may be on air at once on one pass: both say so, and they ask for no two attitudes."""
        first, second = self.mode(a), self.mode(b)
        laws = {mode.session_law or self.pointing.session for mode in (first, second)} - {self.pointing.idle}
        return a != b and b in first.together_with and a in second.together_with and len(laws) < 2

    def mode(self, name: str) -> Transmitter:
        """The transmitter setting of that name; KeyError otherwise."""
        return {transmitter.mode: transmitter for transmitter in self.transmitter}[name]


class Satellite(Described):
    """One satellite: its orbit, what is aboard, and its state at the start."""

    name: Name
    elements: ElementSet | Ephemeris
    spacecraft: Spacecraft
    start_state: StartState


class Mission(Described):
    name: Name
    start: AwareDatetime
    days: Annotated[float, Field(gt=0, le=60)]
    satellites: Annotated[tuple[Satellite, ...], Field(min_length=1)]
    stations: Annotated[tuple[Station, ...], Field(min_length=1)]
    policy: Policy
    inputs: tuple[tuple[str, str], ...] = Field(default=(), description="(file, SHA-256) of every file read")

    def __repr__(self) -> str:
        """In a line: the whole of it fills pages."""
        names = ", ".join(satellite.name for satellite in self.satellites)
        return (
            f"<Mission {self.name!r}: {self.days:g} days from {self.start.isoformat()}, {names},"
            f" {len(self.stations)} stations>"
        )

    __str__ = __repr__

    @property
    def end(self) -> datetime:
        return self.start + timedelta(days=self.days)

    @property
    def span_s(self) -> float:
        return self.days * DAY_S

    def station(self, name: str) -> Station:
        """The station of that name; KeyError otherwise."""
        return {station.name: station for station in self.stations}[name]

    def satellite(self, name: str) -> Satellite:
        """The satellite of that name; KeyError otherwise."""
        return {satellite.name: satellite for satellite in self.satellites}[name]

    def with_changes(
        self, *, policy: dict[str, Any] | None = None, start_state: dict[str, Any] | None = None
    ) -> "Mission":
        """A copy with some keys of `policy`, and of every satellite's `start_state`, changed and checked anew.

        >>> mission.with_changes(policy={"soc_floor_pct": 55.0}, start_state={"soc_pct": 80.0})

        Raises
        ------
        InputError : with every fault, each naming table, key, rule and value
        """
        satellites = tuple(
            one.model_copy(update={"start_state": _changed("start_state", one.start_state, start_state)})
            for one in self.satellites
        )
        return self.model_copy(update={"policy": _changed("policy", self.policy, policy), "satellites": satellites})


def _changed(table: str, described: Described, changes: dict[str, Any] | None):
    """A table with some keys changed; InputError where it is then at fault."""
    raw = described.model_dump() | (changes or {})
    try:
        return type(described).model_validate(raw)
    except ValidationError as error:
        raise InputError(*faults_of(table, error, raw, type(described))) from None

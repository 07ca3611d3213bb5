"""What every described thing has in common: frozen, no unknown keys, no silent conversion, no NaN."""

import math
from datetime import datetime
from typing import Annotated

from pydantic import AfterValidator, AwareDatetime, BaseModel, ConfigDict, Field

# No quantity in a mission is larger or smaller in its own unit; keeps 1e308 and 1e-308 out of the arithmetic
LARGEST, SMALLEST = 1e12, 1e-9
LARGEST_DB = 300.0


class Described(BaseModel):
    """A table of a mission or station file."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False, ser_json_timedelta="float")


def is_name(text: str) -> bool:
    """Whether text can name something: one printable line of 1 to 80 characters."""
    return bool(text.strip()) and text.isprintable() and len(text) <= 80


def _one_printable_line(text: str) -> str:
    if not is_name(text):
        raise ValueError("must be one printable line of 1 to 80 characters")
    return text


def _plain_path(text: str) -> str:
    if not text.strip() or not text.isprintable():
        raise ValueError("must be a file name in printable characters")
    return text


def _not_tiny(value: float) -> float:
    if value < SMALLEST:
        raise ValueError(f"must be at least {SMALLEST:g}")
    return value


def _not_null(vector: tuple[float, float, float]) -> tuple[float, float, float]:
    if math.hypot(*vector) < SMALLEST:
        raise ValueError("must not be the null vector")
    return vector


def _forward(windows: tuple[tuple[datetime, datetime], ...]) -> tuple[tuple[datetime, datetime], ...]:
    for begin, end in windows:
        if begin >= end:
            raise ValueError(f"a window must end after it begins, got {begin.isoformat()} to {end.isoformat()}")
    return windows


Windows = Annotated[tuple[tuple[AwareDatetime, AwareDatetime], ...], AfterValidator(_forward)]
Name = Annotated[str, AfterValidator(_one_printable_line)]
FileName = Annotated[str, AfterValidator(_plain_path)]
Positive = Annotated[float, Field(gt=0, le=LARGEST), AfterValidator(_not_tiny)]
NonNegative = Annotated[float, Field(ge=0, le=LARGEST)]
Real = Annotated[float, Field(ge=-LARGEST, le=LARGEST)]
Decibel = Annotated[float, Field(ge=-LARGEST_DB, le=LARGEST_DB)]
LossDecibel = Annotated[float, Field(ge=0, le=LARGEST_DB)]
Percent = Annotated[float, Field(ge=0, le=100)]
Fraction = Annotated[float, Field(ge=0, le=1)]
Efficiency = Annotated[float, Field(gt=0, le=1)]
Celsius = Annotated[float, Field(ge=-150, le=200)]
BodyAxis = Annotated[tuple[Real, Real, Real], AfterValidator(_not_null)]

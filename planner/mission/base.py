"""What every described thing has in common: frozen, no unknown keys, no silent conversion, no NaN."""

from typing import Annotated

from pydantic import AfterValidator, BaseModel, ConfigDict, Field

LARGEST = 1e12  # no quantity in a mission is larger in its own unit; keeps 1e308 out of the arithmetic


class Described(BaseModel):
    """A table of a mission or station file."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False, ser_json_timedelta="float")


def _one_printable_line(text: str) -> str:
    if not text.strip() or not text.isprintable() or len(text) > 80:
        raise ValueError("must be one printable line of 1 to 80 characters")
    return text


def _not_null(vector: tuple[float, float, float]) -> tuple[float, float, float]:
    if not any(vector):
        raise ValueError("must not be the null vector")
    return vector


Name = Annotated[str, AfterValidator(_one_printable_line)]
Positive = Annotated[float, Field(gt=0, le=LARGEST)]
NonNegative = Annotated[float, Field(ge=0, le=LARGEST)]
Real = Annotated[float, Field(ge=-LARGEST, le=LARGEST)]
Percent = Annotated[float, Field(ge=0, le=100)]
Fraction = Annotated[float, Field(ge=0, le=1)]
Efficiency = Annotated[float, Field(gt=0, le=1)]
Celsius = Annotated[float, Field(ge=-150, le=200)]
BodyAxis = Annotated[tuple[float, float, float], AfterValidator(_not_null)]

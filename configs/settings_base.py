"""The rules every settings model follows, and number types with their range."""

from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field
from pydantic_core import PydanticCustomError


class Settings(BaseModel):
    """A frozen settings block: unknown keys, wrong types and NaN are refused."""

    model_config = ConfigDict(
        frozen=True, extra="forbid", strict=True, allow_inf_nan=False
    )


def _no_truth_value(value: Any) -> Any:
    if isinstance(value, bool):
        raise PydanticCustomError("not_a_number", "must be a number")
    return value


# A literal 1 would take true for itself, since True == 1 in Python.
NotTruth = BeforeValidator(_no_truth_value)
NAME_PATTERN = r"^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$"
Name = Annotated[str, Field(pattern=NAME_PATTERN)]
Text = Annotated[str, Field(min_length=1, max_length=400)]
AngleDeg = Annotated[float, Field(ge=-360.0, le=360.0)]
NonNegative = Annotated[float, Field(ge=0.0, le=1e9)]
Positive = Annotated[float, Field(gt=0.0, le=1e9)]
Fraction = Annotated[float, Field(ge=0.0, le=1.0)]

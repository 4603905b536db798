"""Fields of JSON objects, taken with their type checked; errors name them. Pure."""

import math
from collections.abc import Mapping


def block(values: Mapping[str, object], key: str) -> Mapping[str, object]:
    """The mapping under ``key``; ValueError when it is something else."""
    value = values.get(key)
    if not isinstance(value, dict):
        raise ValueError(f"{key}: a block of settings is missing")
    return value


def text(values: Mapping[str, object], key: str) -> str:
    """The non-empty text under ``key``; ValueError when it is something else."""
    value = values.get(key)
    if not isinstance(value, str) or not value.strip():
        raise ValueError(f"{key}: text is missing")
    return value


def number(values: Mapping[str, object], key: str) -> float:
    """The finite number under ``key``; ValueError when it is something else."""
    value = values.get(key)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError(f"{key}: a number is missing")
    if not math.isfinite(value):
        raise ValueError(f"{key} = {value}: must be finite")
    return float(value)


def whole(values: Mapping[str, object], key: str) -> int:
    """The whole number under ``key``; ValueError when it is something else."""
    value = values.get(key)
    if isinstance(value, bool) or not isinstance(value, int):
        raise ValueError(f"{key}: a whole number is missing")
    return value


def flag(values: Mapping[str, object], key: str) -> bool:
    """True or false under ``key``; ValueError when it is something else."""
    value = values.get(key)
    if not isinstance(value, bool):
        raise ValueError(f"{key}: true or false is missing")
    return value


def in_range(name: str, value: float, low: float, high: float) -> None:
    """ValueError unless ``low`` <= ``value`` <= ``high``; NaN is outside."""
    if not low <= value <= high:
        raise ValueError(f"{name} = {value}: allowed {low} to {high}")

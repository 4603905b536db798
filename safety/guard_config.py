"""What the guard is told on its first line: parsed into frozen values. Pure.

The guard trusts no one's types: every field is checked, ValueError names it.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from pitchsweep.safety.permit import Permit, permit_as_mapping, permit_from_mapping
from pitchsweep.safety.permitted_steps import PermittedSteps

KEEP_ALIVE_LIMIT_MS = 250


@dataclass(frozen=True)
class UnitSettings:
    """Where the emission unit is, how it is spoken to and who it must be.

    ``dialect`` is the dialect's own mapping; ``keep_alive_ms`` is the time after which
    the unit drops out by itself; ``has_shutter`` says whether its shutter position
    counts (a unit that switches the laser itself has none).
    """

    port: str
    baud: int
    dialect: Mapping[str, object]
    identity: str
    keep_alive_ms: int
    has_shutter: bool = True


@dataclass(frozen=True)
class GuardLimits:
    """How often the guard looks and how old what it relies on may be, real seconds."""

    tick_s: float = 0.01
    heartbeat_limit_s: float = 0.3
    tick_limit_s: float = 0.25

    def __post_init__(self) -> None:
        _in_range("tick_s", self.tick_s, 0.001, 0.02)
        _in_range("heartbeat_limit_s", self.heartbeat_limit_s, 0.05, 0.5)
        _in_range("tick_limit_s", self.tick_limit_s, 0.02, 0.25)


@dataclass(frozen=True)
class GuardConfig:
    """Everything a guard works from; nothing of it changes while it runs."""

    unit: UnitSettings
    permit: Permit = field(repr=False)
    limits: GuardLimits
    permitted: PermittedSteps
    ledger_path: str
    run: str
    resumed: bool


def config_as_mapping(config: GuardConfig) -> dict[str, object]:
    """The configuration as JSON values; ``config_from_mapping`` reads them back."""
    unit, limits, permitted = config.unit, config.limits, config.permitted
    return {
        "unit": {**vars(unit), "dialect": dict(unit.dialect)},
        "permit": permit_as_mapping(config.permit),
        "heartbeat_limit_s": limits.heartbeat_limit_s,
        "tick_s": limits.tick_s,
        "tick_limit_s": limits.tick_limit_s,
        "permitted": {
            "steps": [[step, deg] for step, deg in permitted.angles_deg.items()],
            "tolerance_deg": permitted.tolerance_deg,
            "read_age_limit_s": permitted.read_age_limit_s,
        },
        "ledger_path": config.ledger_path,
        "run": config.run,
        "resumed": config.resumed,
    }


def config_from_mapping(values: Mapping[str, object]) -> GuardConfig:
    """The configuration in ``values``; ValueError names the field that is wrong."""
    return GuardConfig(
        unit=_unit(block(values, "unit")),
        permit=permit_from_mapping(block(values, "permit")),
        limits=GuardLimits(
            tick_s=number(values, "tick_s"),
            heartbeat_limit_s=number(values, "heartbeat_limit_s"),
            tick_limit_s=number(values, "tick_limit_s"),
        ),
        permitted=_permitted(block(values, "permitted")),
        ledger_path=text(values, "ledger_path"),
        run=text(values, "run"),
        resumed=flag(values, "resumed"),
    )


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


def _unit(values: Mapping[str, object]) -> UnitSettings:
    keep_alive_ms = whole(values, "keep_alive_ms")
    _in_range("unit.keep_alive_ms", keep_alive_ms, 50, KEEP_ALIVE_LIMIT_MS)
    return UnitSettings(
        port=text(values, "port"),
        baud=whole(values, "baud"),
        dialect=block(values, "dialect"),
        identity=text(values, "identity"),
        keep_alive_ms=keep_alive_ms,
        has_shutter=flag(values, "has_shutter"),
    )


def _permitted(values: Mapping[str, object]) -> PermittedSteps:
    steps = values.get("steps")
    if not isinstance(steps, list):
        raise ValueError("permitted.steps: a list of [step, degrees] is missing")
    angles: dict[int, float] = {}
    for pair in steps:
        if not isinstance(pair, list) or len(pair) != 2:
            raise ValueError(f"permitted.steps: {pair!r} is no [step, degrees]")
        named = {"step": pair[0], "degrees": pair[1]}
        step = whole(named, "step")
        if step in angles:
            raise ValueError(f"permitted.steps: step {step} twice")
        angles[step] = number(named, "degrees")
    return PermittedSteps(
        angles_deg=angles,
        tolerance_deg=number(values, "tolerance_deg"),
        read_age_limit_s=number(values, "read_age_limit_s"),
    )


def _in_range(name: str, value: float, low: float, high: float) -> None:
    if not low <= value <= high:
        raise ValueError(f"{name} = {value}: allowed {low} to {high}")

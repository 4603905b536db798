"""What the guard is told on its first line: parsed into frozen values. Pure.

The guard trusts no one's types: every field is checked, ValueError names it.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

from pitchsweep.safety.json_fields import block, flag, in_range, number, text, whole
from pitchsweep.safety.permit import Permit, permit_as_mapping, permit_from_mapping
from pitchsweep.safety.permitted_steps import PermittedSteps

KEEP_ALIVE_LIMIT_MS = 250
NETWORK_AGE_S = 0.1
"""Interlock state read over a network counts only when younger than this."""
RELAY_RISE_S = 1.0
LINES = ("keep-alive", "pulses")


@dataclass(frozen=True)
class UnitSettings:
    """Where the emission unit is, how it is spoken to and who it must be.

    ``dialect`` is the dialect's own mapping; ``keep_alive_ms`` is the time after which
    the unit drops out by itself; ``has_shutter`` says whether its shutter position
    counts (a unit that switches the laser itself has none). ``line`` is how light is
    held: keep-alive messages, or pulses to a time-out relay, which closes only after
    several of them. ``channels`` is how many interlock channels the bench declares.
    """

    port: str
    baud: int
    dialect: Mapping[str, object]
    identity: str
    keep_alive_ms: int
    has_shutter: bool = True
    line: str = "keep-alive"
    channels: int = 1

    @property
    def over_network(self) -> bool:
        """True unless the port is a device path."""
        return "://" in self.port

    @property
    def rises_within_s(self) -> float:
        """How long the unit may stay dark after light was asked for."""
        return 0.0 if self.line == "keep-alive" else RELAY_RISE_S


@dataclass(frozen=True)
class GuardLimits:
    """How often the guard looks and how old what it relies on may be, real seconds."""

    tick_s: float = 0.01
    heartbeat_limit_s: float = 0.3
    tick_limit_s: float = 0.25

    def __post_init__(self) -> None:
        in_range("tick_s", self.tick_s, 0.001, 0.02)
        in_range("heartbeat_limit_s", self.heartbeat_limit_s, 0.05, 0.5)
        in_range("tick_limit_s", self.tick_limit_s, 0.02, 0.25)


@dataclass(frozen=True)
class GuardConfig:
    """Everything a guard works from; nothing of it changes while it runs.

    ``watched`` are files that must stay as they are, path -> SHA-256 in hexadecimal
    (empty: the file must stay absent).
    """

    unit: UnitSettings
    permit: Permit = field(repr=False)
    limits: GuardLimits
    permitted: PermittedSteps
    ledger_path: str
    run: str
    resumed: bool
    watched: Mapping[str, str] = field(default_factory=dict)


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
            "power_ceiling_mw": permitted.power_ceiling_mw,
        },
        "ledger_path": config.ledger_path,
        "run": config.run,
        "resumed": config.resumed,
        "watched": dict(config.watched),
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
        watched=_watched(block(values, "watched")),
    )


def _unit(values: Mapping[str, object]) -> UnitSettings:
    keep_alive_ms = whole(values, "keep_alive_ms")
    in_range("unit.keep_alive_ms", keep_alive_ms, 50, KEEP_ALIVE_LIMIT_MS)
    line, channels = text(values, "line"), whole(values, "channels")
    in_range("unit.channels", channels, 1, 2)
    if line not in LINES:
        raise ValueError(
            f"unit.line = {line}: a static level never means light; allowed"
            f" {' or '.join(LINES)}"
        )
    return UnitSettings(
        port=text(values, "port"),
        baud=whole(values, "baud"),
        dialect=block(values, "dialect"),
        identity=text(values, "identity"),
        keep_alive_ms=keep_alive_ms,
        has_shutter=flag(values, "has_shutter"),
        line=line,
        channels=channels,
    )


def _watched(values: Mapping[str, object]) -> dict[str, str]:
    if not all(isinstance(digest, str) for digest in values.values()):
        raise ValueError("watched: path -> SHA-256 in hexadecimal, or empty")
    return {path: str(digest) for path, digest in values.items()}


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
        power_ceiling_mw=number(values, "power_ceiling_mw"),
    )

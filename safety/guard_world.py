"""What a guard is given and what it gives back: unit, clocks, sinks, replies. Pure."""

import secrets
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Protocol

from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.gate_table import GateState
from pitchsweep.safety.guard_checks import (
    BEFORE_ARMING,
    BEFORE_LIGHT,
    CHECKS,
    ON_BEAT,
)
from pitchsweep.safety.guard_view import Check
from pitchsweep.safety.permit import NONCE_BYTES


class UnitLine(Protocol):
    """The emission unit as the guard speaks to it; failures raise DriverError."""

    def identify(self) -> str: ...

    def prove(self, nonce: bytes) -> bytes: ...

    def light_up(self) -> UnitState: ...

    def keep_lit(self) -> UnitState: ...

    def ready_trial(self) -> None: ...

    def try_time_out(self) -> UnitState: ...

    def dark(self) -> UnitState: ...

    def state(self) -> UnitState: ...


@dataclass(frozen=True)
class GuardChecks:
    """Which checks hold when; the default is the only one outside tests."""

    by_state: Mapping[GateState, tuple[Check, ...]] = field(
        default_factory=lambda: CHECKS
    )
    before_light: tuple[Check, ...] = field(default_factory=lambda: BEFORE_LIGHT)
    on_beat: tuple[Check, ...] = field(default_factory=lambda: ON_BEAT)
    before_arming: tuple[Check, ...] = field(default_factory=lambda: BEFORE_ARMING)


@dataclass(frozen=True)
class GuardWorld:
    """What a guard is given: clocks (seconds), sinks, checks.

    ``report`` takes every line of gate history, ``record`` a ledger entry's kind and
    data; both return at once. ``record_failure`` is empty while the ledger is written,
    ``settings_failure`` while no watched file has changed.
    """

    now: Callable[[], float]
    utc: Callable[[], float]
    report: Callable[[GateEvent], None]
    record: Callable[[str, dict[str, object]], None]
    record_failure: Callable[[], str] = lambda: ""
    settings_failure: Callable[[], str] = lambda: ""
    nonce: Callable[[], bytes] = lambda: secrets.token_bytes(NONCE_BYTES)
    checks: GuardChecks = GuardChecks()


@dataclass(frozen=True)
class Reply:
    """The answer to a command; ``reason`` is empty when it was done.

    ``wants`` says what is to be done next before arming (a word of ``Want``).
    """

    done: bool
    reason: str = ""
    wants: str = ""

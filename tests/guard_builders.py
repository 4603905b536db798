"""Builders for the gate's tests: unit without a port, hand clock, configuration."""

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

from pitchsweep.drivers.driver_errors import DeviceRefused, DriverError
from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.guard import Guard
from pitchsweep.safety.guard_config import GuardConfig, GuardLimits, UnitSettings
from pitchsweep.safety.guard_messages import Command, Request
from pitchsweep.safety.guard_view import Beat
from pitchsweep.safety.guard_world import GuardChecks, GuardWorld
from pitchsweep.safety.permit import Permit, RehearsalPermit, challenge_answer
from pitchsweep.safety.permitted_steps import PermittedSteps

KEY = bytes(range(32))
UTC_S = 1_800_000_000.0
IDENTITY = "bench-unit-1"
STEPS = {0: -10.0, 1: 0.0, 2: 10.0}
POWER_MW = 0.9


@dataclass
class HandClock:
    """Seconds that pass only when told to; ``utc_s`` can be set apart."""

    now_s: float = 100.0
    utc_s: float = UTC_S

    def advance(self, seconds: float) -> None:
        self.now_s += seconds
        self.utc_s += seconds


@dataclass
class FakeUnit:
    """An emission unit in memory; ``error`` is raised instead of every answer."""

    clock: HandClock
    identity: str = IDENTITY
    key: bytes | None = KEY
    keep_alive_s: float = 0.2
    door_closed: bool = True
    second_closed: bool | None = None
    resets: int = 0
    lapses: int = 0
    stuck: bool = False
    error: DriverError | None = None
    asked: list[str] = field(default_factory=list)
    lit_until_s: float = float("-inf")
    lit: bool = False
    tried_until_s: float = float("inf")

    def identify(self) -> str:
        self._hear("identify")
        return self.identity

    def prove(self, nonce: bytes) -> bytes:
        self._hear("prove")
        if self.key is None:
            raise DeviceRefused(self.identity, "declined", "no key")
        return challenge_answer(self.key, nonce)

    def light_up(self) -> UnitState:
        self._hear("light")
        return self._hold()

    def keep_lit(self) -> UnitState:
        self._hear("keep")
        return self._hold()

    def _hold(self) -> UnitState:
        self.lit = True
        self.lit_until_s = self.clock.now_s + self.keep_alive_s
        return self._standing()

    def ready_trial(self) -> None:
        self._hear("ready")

    def try_time_out(self) -> UnitState:
        self._hear("try")
        self.tried_until_s = self.clock.now_s + self.keep_alive_s
        return self._standing()

    def dark(self) -> UnitState:
        self.asked.append("dark")
        self.lit = self.lit and self.stuck
        if self.error is not None:
            raise self.error
        return self._standing()

    def state(self) -> UnitState:
        self._hear("state")
        return self._standing()

    def shows_light(self) -> bool:
        if self.lit and not self.stuck and self.clock.now_s >= self.lit_until_s:
            self.lit = False
            self.lapses += 1
        return self.lit

    def _hear(self, what: str) -> None:
        self.asked.append(what)
        if self.error is not None:
            raise self.error

    def _standing(self) -> UnitState:
        lit = self.shows_light()
        if self.clock.now_s >= self.tried_until_s:
            self.tried_until_s, self.lapses = float("inf"), self.lapses + 1
        return UnitState(
            lit, self.door_closed, lit, self.resets, self.lapses, self.second_closed
        )


def guard_config(
    *,
    port: str = "/dev/null",
    dialect: dict[str, object] | None = None,
    key: bytes = KEY,
    ledger: Path | str = "ledger.jsonl",
    resumed: bool = False,
    utc_s: float = UTC_S,
    valid_for_s: float = 3600.0,
    read_age_limit_s: float = 5.0,
    identity: str = IDENTITY,
    permit: Permit | None = None,
    watched: dict[str, str] | None = None,
    line: str = "keep-alive",
    channels: int = 1,
) -> GuardConfig:
    """A guard's configuration for three permitted steps."""
    return GuardConfig(
        unit=UnitSettings(
            port=port,
            baud=115200,
            dialect=dialect or {"any": 1},
            identity=identity,
            keep_alive_ms=200,
            line=line,
            channels=channels,
        ),
        permit=permit or RehearsalPermit(key, utc_s - 5.0, utc_s + valid_for_s),
        limits=GuardLimits(),
        permitted=PermittedSteps(STEPS, 0.01, read_age_limit_s, POWER_MW),
        ledger_path=str(ledger),
        run="run-1",
        resumed=resumed,
        watched=watched or {},
    )


class Rig:
    """A guard with a fake unit, a hand clock and lists for what it says and records."""

    def __init__(
        self,
        *,
        config: GuardConfig | None = None,
        checks: GuardChecks | None = None,
        begin: bool = True,
    ) -> None:
        self.clock = HandClock()
        self.unit = FakeUnit(self.clock)
        self.events: list[GateEvent] = []
        self.recorded: list[tuple[str, dict[str, object]]] = []
        self.ledger_failure = ""
        self.settings_failure = ""
        self.on_report: Callable[[GateEvent], None] = lambda event: None
        world = GuardWorld(
            now=lambda: self.clock.now_s,
            utc=lambda: self.clock.utc_s,
            report=self._report,
            record=lambda kind, data: self.recorded.append((kind, data)),
            record_failure=lambda: self.ledger_failure,
            settings_failure=lambda: self.settings_failure,
            checks=checks or GuardChecks(),
        )
        self.guard = Guard(config or guard_config(), self.unit, world)
        if begin:
            self.guard.begin()

    @property
    def state(self) -> str:
        return self.guard.state.value

    def beat(self, step: int | None = 1, **changes: object) -> Beat:
        """A heartbeat of now, at rest where the step belongs."""
        angle = STEPS.get(step, 0.0) if step is not None else 0.0
        now = self.clock.now_s
        fields: dict[str, object] = {
            "sent_s": now,
            "step": step,
            "commanded_deg": angle,
            "readback_deg": angle,
            "read_at_s": now,
            "turning": False,
            "power_mw": POWER_MW,
            "power_at_s": now,
        }
        return Beat(**{**fields, **changes})  # type: ignore[arg-type]

    def say(self, request: Request, words: str = "", beat: Beat | None = None) -> bool:
        return self.guard.handle(Command(request, 1, beat, words)).done

    def heartbeat(self, step: int | None = 1, **changes: object) -> None:
        self.say(Request.BEAT, beat=self.beat(step, **changes))

    def run(
        self,
        seconds: float,
        *,
        step: int | None = 1,
        beats: bool = True,
        **change: object,
    ) -> None:
        """Ticks every 10 ms with a heartbeat before each."""
        for _ in range(round(seconds / 0.01)):
            self.clock.advance(0.01)
            if beats:
                self.heartbeat(step, **change)
            self.guard.tick()

    def prove(self) -> bool:
        """The time-out runs out in the dark, a person opens and closes the door."""
        if not self.say(Request.TRIAL):
            return False
        self.run(0.25)
        for closed in (False, True):
            self.move_door(closed)
            self.run(0.02)
        return True

    def move_door(self, closed: bool) -> None:
        """Every channel that there is follows."""
        self.unit.door_closed = closed
        if self.unit.second_closed is not None:
            self.unit.second_closed = closed

    def arm(self) -> bool:
        if not self.prove():
            return False
        self.heartbeat()
        return self.say(Request.ARM)

    def light(self, step: int = 1, **changes: object) -> bool:
        return self.say(Request.LIGHT, beat=self.beat(step, **changes))

    def lit(self) -> "Rig":
        """The rig, armed and lit at step 1."""
        assert self.arm() and self.light()
        return self

    def _report(self, event: GateEvent) -> None:
        self.on_report(event)
        self.events.append(event)

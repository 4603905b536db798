"""Tells what the gate did, once: to the controller at once, to the ledger (acts)."""

from collections.abc import Mapping

from pitchsweep.safety.gate import Outcome
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.guard_world import GuardWorld
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.light_time import LightMeter, StepLight

_EXPOSURE_EVENTS = frozenset({Event.LIGHT_REQUESTED, Event.DARK_REQUESTED})
"""Moves that the ledger sums up per step instead of listing them."""


class GateTeller:
    """The gate's history of a run; a refusal that repeats is told once."""

    def __init__(self, world: GuardWorld, run: str) -> None:
        self._world = world
        self._run = run
        self._meter = LightMeter()
        self._told: tuple[GateState, Event] | None = None

    def lit(self, step: int) -> None:
        """Light begins on ``step``; a step before it is complete."""
        self._record_light(self._meter.lit(step, self._world.now()))

    def dark(self) -> None:
        """Light ends."""
        self._meter.dark(self._world.now())

    def listen_anew(self) -> None:
        """What comes next is told, even where it was told last."""
        self._told = None

    def tell(self, outcome: Outcome, reason: str) -> None:
        """Reports ``outcome`` and records it where the ledger wants it."""
        state, event = outcome.state, outcome.event
        if not outcome.moved and self._told == (state, event):
            return
        self._told = (state, event)
        now_s = self._world.now()
        line = GateEvent(
            utc=utc_text(self._world.utc()),
            monotonic_s=now_s,
            was=outcome.was.value,
            state=state.value,
            event=event.value,
            reason=reason,
        )
        self._world.report(line)
        if state in (GateState.TRIPPED, GateState.ENDED):
            self._record_light(self._meter.close(now_s))
        if line.moved and event not in _EXPOSURE_EVENTS:
            self._record("gate", vars(line))

    def _record_light(self, light: StepLight | None) -> None:
        if light is not None:
            self._record("light", vars(light))

    def _record(self, kind: str, data: Mapping[str, object]) -> None:
        self._world.record(kind, {"run": self._run, **data})

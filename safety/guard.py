"""The guard's hands: moves the gate, and asks the unit for light or dark (acts).

Decisions are made elsewhere (``guard_checks``, ``gate_table``, ``ack_evidence``); this
file does what they say, emission first and explanations afterwards. Clocks, unit and
sinks are handed in. It is an administrative control and no safety function.
"""

from collections.abc import Callable

from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety.ack_evidence import (
    Evidence,
    evidence_in_words,
    observe,
    why_not_acknowledged,
)
from pitchsweep.safety.gate import Gate, emission_requested
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.guard_checks import Beat, Fault, UnitReading, View, first_fault
from pitchsweep.safety.guard_config import GuardConfig
from pitchsweep.safety.guard_messages import Command, Request
from pitchsweep.safety.guard_world import GuardWorld, Reply, UnitLine
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.light_time import LightMeter, StepLight
from pitchsweep.safety.safety_errors import GateTableGap
from pitchsweep.safety.unit_checks import find_no_proof, find_stranger, unit_fault

KEEPS_PER_LIFE = 5
"""Keep-alive messages sent within one keep-alive time of the unit."""

_EXPOSURE_EVENTS = frozenset({Event.LIGHT_REQUESTED, Event.DARK_REQUESTED})
"""Moves that the ledger sums up per step instead of listing them."""


class Guard:
    """The gate, the unit and what is known of controller and bench."""

    def __init__(self, config: GuardConfig, unit: UnitLine, world: GuardWorld) -> None:
        self._config = config
        self._unit = unit
        self._world = world
        self._gate = Gate()
        self._meter = LightMeter()
        self._evidence = Evidence()
        self._beat: Beat | None = None
        self._reading: UnitReading | None = None
        self._lit_step: int | None = None
        self._lit_lapses = 0
        self._start_s = self._last_tick_s = self._dark_since_s = world.now()
        self._start_utc_s = world.utc()
        self._kept_s = float("-inf")
        self._last_reason = ""
        self._told: tuple[GateState, Event] | None = None
        self._keep_period_s = config.unit.keep_alive_ms / 1000.0 / KEEPS_PER_LIFE

    @property
    def state(self) -> GateState:
        """Where the gate stands."""
        return self._gate.state

    def begin(self) -> None:
        """Commands dark, checks who the unit is; a resumed run begins tripped."""
        self._darken()
        if self._config.resumed:
            self._move(Event.RESUMED, "a resumed run begins tripped")
        self._try(self._check_identity)

    def handle(self, command: Command) -> Reply:
        """Does ``command`` at once and says whether it was done."""
        if command.beat is not None:
            self._beat = command.beat
        if command.request is Request.ARM:
            return self._arm()
        if command.request is Request.ACKNOWLEDGE:
            return self._acknowledge(command.words)
        if command.request is Request.LIGHT:
            return self._light()
        if command.request is Request.DARK:
            return self._dark()
        if command.request is Request.TRIP:
            return self._simple(Event.CONTROLLER_FAULT, command.words)
        if command.request is Request.STOP:
            return self._simple(Event.END_REQUESTED, "asked by the controller")
        return Reply(True)

    def tick(self) -> None:
        """Looks at everything once; holds the light only when all checks agree."""
        if self._ledger_failed() or not self._look():
            self._last_tick_s = self._world.now()
            return
        view = self._view()
        self._last_tick_s = view.now_s
        fault = first_fault(view, self._world.checks.by_state[self.state])
        if fault is not None:
            self._move(fault.event, fault.reason)
        elif self._gate.emission and view.now_s - self._kept_s >= self._keep_period_s:
            self._try(self._keep)
        if not self._gate.emission and self._shows_light():
            self._darken()

    def fail(self, event: Event, reason: str) -> None:
        """Takes in a fault or an end found outside; dark first."""
        self._move(event, reason)

    def end(self, reason: str) -> None:
        """Dark at once and for good."""
        self._move(Event.END_REQUESTED, reason)

    def _arm(self) -> Reply:
        outcome = self._gate.look(Event.ARMED)
        if not outcome.moved:
            return self._simple(Event.ARMED, "")
        if not (self._try(self._check_identity) and self._try(self._check_proof)):
            return Reply(False, self._last_reason)
        if not self._look():
            return Reply(False, self._last_reason)
        self._last_tick_s = self._world.now()
        fault = first_fault(self._view(), self._world.checks.before_arming)
        if fault is not None:
            self._move(Event.ARMING_REFUSED, fault.reason)
            return Reply(False, fault.reason)
        self._move(Event.ARMED, "unit and permit proven")
        return Reply(True)

    def _acknowledge(self, name: str) -> Reply:
        if not self._gate.look(Event.ACKNOWLEDGED).moved:
            return self._simple(Event.ACKNOWLEDGED, "")
        says = self._reading.says if self._look() and self._reading else None
        missing = why_not_acknowledged(self._evidence, says, name)
        if missing is not None:
            return Reply(False, missing)
        how = evidence_in_words(self._evidence)
        self._move(Event.ACKNOWLEDGED, f"acknowledged by {name.strip()} ({how})")
        return Reply(True)

    def _light(self) -> Reply:
        if not self._gate.look(Event.LIGHT_REQUESTED).moved:
            return self._simple(Event.LIGHT_REQUESTED, "")
        if not self._look():
            return Reply(False, self._last_reason)
        view = self._view()
        fault = first_fault(view, self._world.checks.before_light)
        if fault is not None:
            self._move(fault.event, fault.reason)
            return Reply(False, fault.reason)
        self._switch_on(view)
        return Reply(
            self._gate.emission, "" if self._gate.emission else self._last_reason
        )

    def _dark(self) -> Reply:
        if not self._gate.emission:
            self._darken()
        return self._simple(Event.DARK_REQUESTED, "asked by the controller")

    def _switch_on(self, view: View) -> None:
        assert view.beat is not None and view.beat.step is not None and view.unit
        self._lit_step = view.beat.step
        self._lit_lapses = view.unit.says.lapse_count
        self._record_light(self._meter.lit(self._lit_step, view.now_s))
        self._move(Event.LIGHT_REQUESTED, f"step {self._lit_step}")
        if self._try(self._keep) and not self._shows_light():
            self._move(Event.LIGHT_DROPPED, "asked for light, the unit stays dark")

    def _simple(self, event: Event, reason: str) -> Reply:
        refusal = self._gate.look(event).refusal
        self._told = None
        self._move(event, reason)
        return Reply(not refusal or event is Event.DARK_REQUESTED, refusal)

    def _move(self, event: Event, reason: str) -> None:
        """Emission first, then the state, then the words."""
        try:
            to = self._gate.look(event).state
        except GateTableGap:
            self._darken()
            raise
        if not emission_requested(to):
            self._darken_if_lit()
        outcome = self._gate.apply(event)
        self._last_reason = reason or outcome.refusal
        if outcome.moved and outcome.state is GateState.TRIPPED:
            self._evidence = self._evidence_at_trip()
        self._explain(outcome.was, event)

    def _evidence_at_trip(self) -> Evidence:
        says = None if self._reading is None else self._reading.says
        return Evidence() if says is None else observe(Evidence(), says)

    def _explain(self, was: GateState, event: Event) -> None:
        now_s, state = self._world.now(), self.state
        if was is state and self._told == (state, event):
            return
        self._told = (state, event)
        line = GateEvent(
            utc=utc_text(self._world.utc()),
            monotonic_s=now_s,
            was=was.value,
            state=state.value,
            event=event.value,
            reason=self._last_reason,
        )
        self._world.report(line)
        if state in (GateState.TRIPPED, GateState.ENDED):
            self._record_light(self._meter.close(now_s))
        if line.moved and event not in _EXPOSURE_EVENTS:
            self._world.record("gate", {"run": self._config.run, **vars(line)})

    def _record_light(self, light: StepLight | None) -> None:
        if light is not None:
            self._world.record("light", {"run": self._config.run, **vars(light)})

    def _ledger_failed(self) -> bool:
        failure = self._world.record_failure()
        if failure and self.state not in (GateState.TRIPPED, GateState.ENDED):
            self._move(Event.LEDGER_FAILED, f"the ledger is not written: {failure}")
            return True
        return False

    def _try(self, act: Callable[[], Fault | None]) -> bool:
        """Does something with the unit; a fault of it moves the gate, False then."""
        try:
            fault = act()
        except DriverError as error:
            fault = unit_fault(error)
        except (KeyError, TypeError, ValueError) as error:
            fault = Fault(Event.UNIT_NONSENSE, f"the unit's answer lacks {error}")
        if fault is not None:
            self._move(fault.event, fault.reason)
        return fault is None

    def _look(self) -> bool:
        return self._try(self._poll)

    def _poll(self) -> Fault | None:
        self._took(self._world.now(), self._unit.state())
        return None

    def _keep(self) -> Fault | None:
        asked_s = self._world.now()
        self._took(asked_s, self._unit.keep_lit())
        self._kept_s = asked_s
        return None

    def _check_identity(self) -> Fault | None:
        return find_stranger(self._unit, self._config.unit.identity)

    def _check_proof(self) -> Fault | None:
        return find_no_proof(self._unit, self._config.permit, self._world.nonce())

    def _took(self, asked_s: float, says: UnitState) -> None:
        self._reading = UnitReading(asked_s, says)
        if self.state is GateState.TRIPPED:
            self._evidence = observe(self._evidence, says)

    def _shows_light(self) -> bool:
        return self._reading is not None and self._reading.says.light_on

    def _darken_if_lit(self) -> None:
        if self._gate.emission:
            self._dark_since_s = self._world.now()
            self._darken()
            self._meter.dark(self._world.now())
            self._lit_step = None

    def _darken(self) -> None:
        """Asks for dark; without an answer the unit's own keep-alive ends the light."""
        asked_s = self._world.now()
        try:
            self._took(asked_s, self._unit.dark())
        except Exception:
            # Whatever failed, the state must still move to dark; the next look at the
            # unit names what is wrong with it.
            self._reading = None

    def _view(self) -> View:
        now_s = self._world.now()
        return View(
            now_s=now_s,
            utc_s=self._world.utc(),
            utc_by_monotonic_s=self._start_utc_s + now_s - self._start_s,
            last_tick_s=self._last_tick_s,
            beat=self._beat,
            unit=self._reading,
            permit=self._config.permit,
            permitted=self._config.permitted,
            limits=self._config.limits,
            lit_step=self._lit_step,
            lit_lapses=self._lit_lapses,
            dark_since_s=self._dark_since_s,
            keep_alive_s=self._config.unit.keep_alive_ms / 1000.0,
            has_shutter=self._config.unit.has_shutter,
        )

"""The guard's hands: moves the gate, and asks the unit for light or dark (acts).

Decisions are made elsewhere (``guard_checks``, ``gate_table``, ``ack_evidence``,
``arming_proof``); this file does what they say, emission first and explanations
afterwards. Clocks, unit and sinks are handed in. It is an administrative control and no
safety function.
"""

from collections.abc import Callable

from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety.ack_evidence import evidence_in_words, why_not_acknowledged
from pitchsweep.safety.arming_proof import next_want, why_not_proven
from pitchsweep.safety.gate import Gate, emission_requested
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.gate_teller import GateTeller
from pitchsweep.safety.guard_checks import first_fault
from pitchsweep.safety.guard_config import GuardConfig
from pitchsweep.safety.guard_messages import Command, Request
from pitchsweep.safety.guard_view import Beat, Fault, View
from pitchsweep.safety.guard_world import GuardWorld, Reply, UnitLine
from pitchsweep.safety.safety_errors import GateTableGap
from pitchsweep.safety.unit_checks import find_no_proof, find_stranger, unit_fault
from pitchsweep.safety.unit_watch import UnitWatch

KEEPS_PER_LIFE = 5
"""Keep-alive messages sent within one keep-alive time of the unit."""

_ARMED = frozenset({GateState.READY, GateState.LIT})


class Guard:
    """The gate, the unit and what is known of controller and bench."""

    def __init__(self, config: GuardConfig, unit: UnitLine, world: GuardWorld) -> None:
        self._config = config
        self._unit = unit
        self._world = world
        self._gate = Gate()
        self._teller = GateTeller(world, config.run)
        self._watch = UnitWatch(unit, world.now)
        self._beat: Beat | None = None
        self._pressed_s = float("-inf")
        self._lit_step: int | None = None
        self._lit_lapses = 0
        self._light_was_seen = False
        self._start_s = self._last_tick_s = self._dark_since_s = world.now()
        self._lit_since_s = self._start_s
        self._start_utc_s = world.utc()
        self._last_reason = ""
        self._keep_period_s = config.unit.keep_alive_ms / 1000.0 / KEEPS_PER_LIFE

    @property
    def state(self) -> GateState:
        """Where the gate stands."""
        return self._gate.state

    @property
    def shows_light(self) -> bool:
        """Whether the unit said so in its last answer."""
        return self._watch.shows_light()

    def begin(self) -> None:
        """Commands dark, checks who the unit is; a resumed run begins tripped."""
        self._watch.darken()
        if self._config.resumed:
            self._move(Event.RESUMED, "a resumed run begins tripped")
        self._try(self._check_identity)

    def handle(self, command: Command) -> Reply:
        """Does ``command`` at once and says whether it was done."""
        if command.beat is not None:
            self._beat = command.beat
            self._judge_beat()
        if command.request is Request.PRESS:
            self._pressed_s = max(self._pressed_s, command.sent_s)
        acts: dict[Request, Callable[[], Reply]] = {
            Request.TRIAL: self._begin_trial,
            Request.PROOF: self._tell_proof,
            Request.ARM: self._arm,
            Request.ACKNOWLEDGE: lambda: self._acknowledge(command.words),
            Request.LIGHT: self._light,
            Request.DARK: self._dark,
            Request.DISARM: lambda: self._simple(
                Event.DISARMED, "somebody is asked to the bench"
            ),
            Request.TRIP: lambda: self._simple(Event.CONTROLLER_FAULT, command.words),
            Request.STOP: lambda: self._simple(
                Event.END_REQUESTED, "asked by the controller"
            ),
        }
        act = acts.get(command.request)
        return Reply(True) if act is None else act()

    def tick(self) -> None:
        """Looks at everything once; holds the light only when all checks agree."""
        if self._failed_outside() or not self._look():
            self._last_tick_s = self._world.now()
            return
        view = self._view()
        self._last_tick_s = view.now_s
        fault = first_fault(view, self._world.checks.by_state[self.state])
        if fault is not None:
            self._move(fault.event, fault.reason)
        elif self._gate.emission:
            self._light_was_seen |= self._watch.shows_light()
            if view.now_s - self._watch.kept_s >= self._keep_period_s:
                self._try(self._watch.keep)
        if not self._gate.emission and self._watch.shows_light():
            self._watch.darken()

    def fail(self, event: Event, reason: str) -> None:
        """Takes in a fault or an end found outside; dark first."""
        self._move(event, reason)

    def end(self, reason: str) -> None:
        """Dark at once and for good."""
        self._move(Event.END_REQUESTED, reason)

    def _judge_beat(self) -> None:
        """What a heartbeat says is acted on at once."""
        if not self._gate.emission:
            return
        fault = first_fault(self._view(), self._world.checks.on_beat)
        if fault is not None:
            self._move(fault.event, fault.reason)

    def _begin_trial(self) -> Reply:
        outcome = self._gate.look(Event.ARMED)
        if not outcome.moved:
            return Reply(False, outcome.refusal)
        begun = self._try(self._check_identity) and self._try(self._watch.begin_trial)
        return Reply(begun, "" if begun else self._last_reason)

    def _tell_proof(self) -> Reply:
        missing = why_not_proven(self._watch.proof)
        return Reply(missing is None, missing or "", next_want(self._watch.proof).value)

    def _arm(self) -> Reply:
        outcome = self._gate.look(Event.ARMED)
        if not outcome.moved:
            return self._simple(Event.ARMED, "")
        if not (self._try(self._check_identity) and self._try(self._check_key)):
            return Reply(False, self._last_reason)
        if not self._look():
            return Reply(False, self._last_reason)
        self._last_tick_s = self._world.now()
        fault = first_fault(self._view(), self._world.checks.before_arming)
        if fault is not None:
            self._move(Event.ARMING_REFUSED, fault.reason)
            return Reply(False, fault.reason)
        took_ms = 1000.0 * self._watch.proof.took_s
        self._move(
            Event.ARMED,
            "unit and permit proven; dropped out in the dark within"
            f" {took_ms:.0f} ms; interlock opened and closed",
        )
        return Reply(True)

    def _acknowledge(self, name: str) -> Reply:
        if not self._gate.look(Event.ACKNOWLEDGED).moved:
            return self._simple(Event.ACKNOWLEDGED, "")
        reading = self._watch.reading if self._look() else None
        says = None if reading is None else reading.says
        missing = why_not_acknowledged(self._watch.evidence, says, name)
        if missing is not None:
            return Reply(False, missing)
        how = evidence_in_words(self._watch.evidence)
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
            self._watch.darken()
        return self._simple(Event.DARK_REQUESTED, "asked by the controller")

    def _switch_on(self, view: View) -> None:
        assert view.beat is not None and view.beat.step is not None and view.unit
        self._lit_step = view.beat.step
        self._lit_since_s = view.now_s
        self._lit_lapses = view.unit.says.lapse_count
        self._light_was_seen = False
        self._teller.lit(self._lit_step)
        self._move(Event.LIGHT_REQUESTED, f"step {self._lit_step}")
        lit = self._try(self._watch.light_up)
        if lit and not (view.settings.rises_within_s or self._watch.shows_light()):
            self._move(Event.LIGHT_DROPPED, "asked for light, the unit stays dark")

    def _simple(self, event: Event, reason: str) -> Reply:
        refusal = self._gate.look(event).refusal
        self._teller.listen_anew()
        self._move(event, reason)
        return Reply(not refusal or event is Event.DARK_REQUESTED, refusal)

    def _move(self, event: Event, reason: str) -> None:
        """Emission first, then the state, then the words."""
        try:
            to = self._gate.look(event).state
        except GateTableGap:
            self._watch.darken()
            raise
        if not emission_requested(to):
            self._darken_if_lit()
        outcome = self._gate.apply(event)
        self._last_reason = reason or outcome.refusal
        if outcome.moved and outcome.state is GateState.TRIPPED:
            self._watch.begin_trip()
        elif outcome.was in _ARMED and outcome.state not in _ARMED:
            self._watch.forget_proof()
        if event is Event.CHANNELS_DISAGREE:
            self._watch.demand_cycle()
        self._teller.tell(outcome, self._last_reason)

    def _failed_outside(self) -> bool:
        if self.state in (GateState.TRIPPED, GateState.ENDED):
            return False
        if failure := self._world.record_failure():
            self._move(Event.LEDGER_FAILED, f"the ledger is not written: {failure}")
        elif failure := self._world.settings_failure():
            self._move(Event.SETTINGS_CHANGED, failure)
        return bool(failure)

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
        return self._try(self._watch.look)

    def _check_identity(self) -> Fault | None:
        return find_stranger(self._unit, self._config.unit.identity)

    def _check_key(self) -> Fault | None:
        return find_no_proof(self._unit, self._config.permit, self._world.nonce())

    def _darken_if_lit(self) -> None:
        if self._gate.emission:
            self._dark_since_s = self._world.now()
            self._watch.darken()
            self._teller.dark()
            self._lit_step = None

    def _view(self) -> View:
        now_s = self._world.now()
        return View(
            now_s=now_s,
            utc_s=self._world.utc(),
            utc_by_monotonic_s=self._start_utc_s + now_s - self._start_s,
            last_tick_s=self._last_tick_s,
            beat=self._beat,
            unit=self._watch.reading,
            permit=self._config.permit,
            permitted=self._config.permitted,
            limits=self._config.limits,
            settings=self._config.unit,
            lit_step=self._lit_step,
            lit_since_s=self._lit_since_s,
            lit_lapses=self._lit_lapses,
            light_was_seen=self._light_was_seen,
            dark_since_s=self._dark_since_s,
            disagree_since_s=self._watch.disagree_since_s,
            proof=self._watch.proof,
            pressed_s=self._pressed_s,
        )

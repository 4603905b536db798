"""The gate against a small model of four facts, in random event orders."""

from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, invariant, rule

from pitchsweep.safety.gate import Gate
from pitchsweep.safety.gate_table import FAULTS, Event, GateState


class GateAgainstModel(RuleBasedStateMachine):
    """The model: over and latched forbid, armed permits, light needs all of it."""

    def __init__(self) -> None:
        super().__init__()
        self.gate = Gate()
        self.armed = self.light = self.latched = self.over = False

    @rule(event=st.sampled_from(list(Event)))
    def happens(self, event: Event) -> None:
        self.gate.apply(event)
        self.over |= event is Event.END_REQUESTED
        self.latched |= event in FAULTS or event is Event.RESUMED
        self.latched &= event is not Event.ACKNOWLEDGED
        self.armed |= event is Event.ARMED
        taken_down = event in (Event.ARMING_REFUSED, Event.DISARMED)
        self.armed &= not taken_down and self.free()
        self.light |= event is Event.LIGHT_REQUESTED
        self.light &= event is not Event.DARK_REQUESTED and self.armed

    def free(self) -> bool:
        return not (self.latched or self.over)

    @invariant()
    def light_agrees(self) -> None:
        assert self.gate.emission == self.light

    @invariant()
    def light_is_armed_and_free(self) -> None:
        if self.gate.emission:
            assert self.armed and not self.latched and not self.over

    @invariant()
    def latch_agrees(self) -> None:
        assert (self.gate.state is GateState.ENDED) == self.over
        if not self.over:
            assert (self.gate.state is GateState.TRIPPED) == self.latched


TestGateAgainstModel = GateAgainstModel.TestCase
TestGateAgainstModel.settings = settings(
    max_examples=500, stateful_step_count=20, deadline=None, derandomize=True
)

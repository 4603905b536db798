"""The gate's engine: a look-up in the two tables and nothing else.

Pure: no clock, no port, no file. What the tables do not list is refused.
"""

from collections.abc import Mapping
from dataclasses import dataclass

from pitchsweep.safety.gate_table import (
    OUTPUTS,
    TRANSITIONS,
    Event,
    GateState,
    Move,
    Output,
)
from pitchsweep.safety.safety_errors import GateTableGap

Table = Mapping[tuple[GateState, Event], Move]


@dataclass(frozen=True)
class Outcome:
    """What an event did: ``refusal`` is empty unless the table says why it stays."""

    was: GateState
    state: GateState
    event: Event
    refusal: str

    @property
    def moved(self) -> bool:
        """True when the state changed."""
        return self.was is not self.state


def decide(state: GateState, event: Event, table: Table = TRANSITIONS) -> Outcome:
    """The outcome of ``event`` in ``state``.

    Raises GateTableGap when the table has no such entry.
    """
    move = table.get((state, event))
    if move is None:
        raise GateTableGap(state, event)
    return Outcome(was=state, state=move.to, event=event, refusal=move.refusal)


def emission_requested(
    state: object, outputs: Mapping[GateState, Output] = OUTPUTS
) -> bool:
    """True only for a state whose output says so; anything unknown is dark."""
    if not isinstance(state, GateState):
        return False
    output = outputs.get(state)
    return output is not None and output.emission is True


class Gate:
    """Holds the state and moves it by the table alone."""

    def __init__(self, table: Table = TRANSITIONS) -> None:
        self._table = table
        self._state = GateState.COLD

    @property
    def state(self) -> GateState:
        """Where the gate stands."""
        return self._state

    @property
    def emission(self) -> bool:
        """True when the guard may ask the unit for light."""
        return emission_requested(self._state)

    def look(self, event: Event) -> Outcome:
        """What ``event`` would do now, without doing it."""
        return decide(self._state, event, self._table)

    def apply(self, event: Event) -> Outcome:
        """Moves by ``event``; GateTableGap leaves the state as it was."""
        outcome = self.look(event)
        self._state = outcome.state
        return outcome

"""Every cell of the gate's tables, and every way through them."""

from itertools import product

import pytest

from pitchsweep.safety.gate import Gate, decide, emission_requested
from pitchsweep.safety.gate_table import (
    FAULTS,
    OUTPUTS,
    TRANSITIONS,
    Event,
    GateState,
)
from pitchsweep.safety.safety_errors import GateTableGap

S, E = GateState, Event
CELLS = list(product(GateState, Event))
MOVES_WITHOUT_FAULT = {
    (S.COLD, E.ARMED): S.READY,
    (S.COLD, E.RESUMED): S.TRIPPED,
    (S.COLD, E.END_REQUESTED): S.ENDED,
    (S.READY, E.ARMING_REFUSED): S.COLD,
    (S.READY, E.LIGHT_REQUESTED): S.LIT,
    (S.READY, E.RESUMED): S.TRIPPED,
    (S.READY, E.END_REQUESTED): S.ENDED,
    (S.READY, E.DISARMED): S.COLD,
    (S.LIT, E.ARMING_REFUSED): S.COLD,
    (S.LIT, E.DARK_REQUESTED): S.READY,
    (S.LIT, E.RESUMED): S.TRIPPED,
    (S.LIT, E.END_REQUESTED): S.ENDED,
    (S.LIT, E.DISARMED): S.COLD,
    (S.TRIPPED, E.ACKNOWLEDGED): S.COLD,
    (S.TRIPPED, E.END_REQUESTED): S.ENDED,
}


def test_the_table_lists_every_cell_and_nothing_else() -> None:
    assert set(TRANSITIONS) == set(CELLS)
    assert set(OUTPUTS) == set(GateState)


def test_the_faults_are_all_events_that_are_no_request() -> None:
    requests = {
        E.ARMED,
        E.ARMING_REFUSED,
        E.LIGHT_REQUESTED,
        E.DARK_REQUESTED,
        E.ACKNOWLEDGED,
        E.RESUMED,
        E.END_REQUESTED,
        E.DISARMED,
    }
    assert FAULTS == set(Event) - requests


@pytest.mark.parametrize(("state", "event"), CELLS)
def test_each_cell_says_what_the_trade_expects(state: GateState, event: Event) -> None:
    outcome = decide(state, event)
    if event in FAULTS:
        wanted = S.ENDED if state is S.ENDED else S.TRIPPED
    else:
        wanted = MOVES_WITHOUT_FAULT.get((state, event), state)
    assert outcome.state is wanted
    assert bool(outcome.refusal) == (not outcome.moved)
    if event in FAULTS:
        assert not emission_requested(outcome.state)


def test_emission_is_requested_in_exactly_one_state() -> None:
    assert [state for state in GateState if emission_requested(state)] == [S.LIT]


@pytest.mark.parametrize("unknown", [None, "lit", "LIT", 2, E.ARMED, object()])
def test_outputs_of_unknown_states_are_off(unknown: object) -> None:
    assert not emission_requested(unknown)


def test_a_state_without_output_is_off() -> None:
    assert not emission_requested(S.LIT, {})


def reachable(start: GateState, without: Event | None = None) -> set[GateState]:
    """States that can be reached, breadth first, without ever using one event."""
    seen, edge = {start}, {start}
    while edge:
        events = [event for event in Event if event is not without]
        edge = {decide(s, e).state for s, e in product(edge, events)} - seen
        seen |= edge
    return seen


def test_every_state_can_be_reached_from_cold() -> None:
    assert reachable(S.COLD) == set(GateState)


def test_a_walk_over_every_reachable_state_and_event_meets_light_in_one_place() -> None:
    """Breadth first through the engine itself; every edge is taken and judged."""
    edges, seen, queue = [], {S.COLD}, [S.COLD]
    while queue:
        state = queue.pop(0)
        for event in Event:
            gate = Gate()
            gate._state = state
            outcome = gate.apply(event)
            edges.append((state, event, gate.state))
            assert gate.emission == (gate.state is S.LIT)
            assert not (event in FAULTS and gate.emission)
            if gate.emission and state is not S.LIT:
                assert (state, event) == (S.READY, E.LIGHT_REQUESTED)
            if gate.state not in seen:
                seen.add(gate.state)
                queue.append(outcome.state)
    assert len(edges) == len(CELLS) and seen == set(GateState)


def test_no_path_reaches_emission_without_arming() -> None:
    for start in set(GateState) - {S.READY, S.LIT}:
        assert S.LIT not in reachable(start, without=E.ARMED)


def test_no_path_leaves_a_trip_towards_light_without_acknowledging() -> None:
    assert reachable(S.TRIPPED, without=E.ACKNOWLEDGED) == {S.TRIPPED, S.ENDED}


def test_nothing_leaves_the_end() -> None:
    assert reachable(S.ENDED) == {S.ENDED}


@pytest.mark.parametrize("cell", CELLS)
def test_a_missing_entry_raises_and_leaves_the_state(
    cell: tuple[GateState, Event],
) -> None:
    holed = {key: move for key, move in TRANSITIONS.items() if key != cell}
    gate = Gate(holed)
    gate._state = cell[0]
    with pytest.raises(GateTableGap):
        gate.apply(cell[1])
    assert gate.state is cell[0]

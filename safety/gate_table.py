"""The gate as data: what follows from each event in each state, and what is put out.

Rules of this file: one literal, total over state x event; a refusal is written down
as staying put with its reason; there is no default. Whatever is not listed is an
error to the engine (``gate.py``) and leaves the state as it was.

    cold     the gate is shut and nothing is proven
    ready    unit and permit are proven; dark
    lit      emission is requested, tick by tick
    tripped  dark and latched until a person on the spot acknowledges
    ended    dark; this guard will never light again
"""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum
from types import MappingProxyType


class GateState(Enum):
    """Where the gate stands."""

    COLD = "cold"
    READY = "ready"
    LIT = "lit"
    TRIPPED = "tripped"
    ENDED = "ended"


class Event(Enum):
    """What can happen to the gate: requests first, then faults."""

    ARMED = "armed"
    ARMING_REFUSED = "arming-refused"
    LIGHT_REQUESTED = "light-requested"
    DARK_REQUESTED = "dark-requested"
    ACKNOWLEDGED = "acknowledged"
    RESUMED = "resumed"
    DISARMED = "disarmed"
    END_REQUESTED = "end-requested"

    HEARTBEAT_STALE = "heartbeat-stale"
    INTERLOCK_OPEN = "interlock-open"
    PERMIT_LAPSED = "permit-lapsed"
    STEP_NOT_PERMITTED = "step-not-permitted"
    ANGLE_DISAGREES = "angle-disagrees"
    READING_STALE = "reading-stale"
    STAGE_TURNING = "stage-turning"
    UNIT_SILENT = "unit-silent"
    UNIT_NONSENSE = "unit-nonsense"
    UNIT_STRANGE = "unit-strange"
    UNIT_REFUSED = "unit-refused"
    PROOF_FAILED = "proof-failed"
    LIGHT_STUCK = "light-stuck"
    LIGHT_DROPPED = "light-dropped"
    TICK_LATE = "tick-late"
    LEDGER_FAILED = "ledger-failed"
    CHANNELS_DISAGREE = "channels-disagree"
    POWER_ABOVE_LIMIT = "power-above-limit"
    SETTINGS_CHANGED = "settings-changed"
    HAND_STOP = "hand-stop"
    CONTROLLER_FAULT = "controller-fault"
    GUARD_FAULT = "guard-fault"


FAULTS = frozenset(list(Event)[list(Event).index(Event.HEARTBEAT_STALE) :])
"""Events after which emission must be off, whatever the state was."""


@dataclass(frozen=True)
class Move:
    """An entry of the table: the state that follows; a refusal says why it stays."""

    to: GateState
    refusal: str = ""


@dataclass(frozen=True)
class Output:
    """What the guard may ask of the unit in a state."""

    emission: bool


_COLD = Move(GateState.COLD)
_READY = Move(GateState.READY)
_LIT = Move(GateState.LIT)
_TRIP = Move(GateState.TRIPPED)
_END = Move(GateState.ENDED)
_STILL_COLD = Move(GateState.COLD, "the gate is not armed")
_NO_TRIP_COLD = Move(GateState.COLD, "there is no trip to acknowledge")
_NO_TRIP_READY = Move(GateState.READY, "there is no trip to acknowledge")
_NO_TRIP_LIT = Move(GateState.LIT, "there is no trip to acknowledge")
_ARMED_READY = Move(GateState.READY, "the gate is armed already")
_ARMED_LIT = Move(GateState.LIT, "the gate is armed and lit already")
_LATCHED = Move(GateState.TRIPPED, "tripped: acknowledge at the bench first")
_LATCHED_TWICE = Move(GateState.TRIPPED, "tripped already")
_OVER = Move(GateState.ENDED, "this guard has ended")

TRANSITIONS: Mapping[tuple[GateState, Event], Move] = MappingProxyType(
    {
        (GateState.COLD, Event.ARMED): _READY,
        (GateState.COLD, Event.ARMING_REFUSED): _STILL_COLD,
        (GateState.COLD, Event.LIGHT_REQUESTED): _STILL_COLD,
        (GateState.COLD, Event.DARK_REQUESTED): Move(GateState.COLD, "dark already"),
        (GateState.COLD, Event.ACKNOWLEDGED): _NO_TRIP_COLD,
        (GateState.COLD, Event.RESUMED): _TRIP,
        (GateState.COLD, Event.DISARMED): _STILL_COLD,
        (GateState.COLD, Event.END_REQUESTED): _END,
        (GateState.COLD, Event.HEARTBEAT_STALE): _TRIP,
        (GateState.COLD, Event.INTERLOCK_OPEN): _TRIP,
        (GateState.COLD, Event.PERMIT_LAPSED): _TRIP,
        (GateState.COLD, Event.STEP_NOT_PERMITTED): _TRIP,
        (GateState.COLD, Event.ANGLE_DISAGREES): _TRIP,
        (GateState.COLD, Event.READING_STALE): _TRIP,
        (GateState.COLD, Event.STAGE_TURNING): _TRIP,
        (GateState.COLD, Event.UNIT_SILENT): _TRIP,
        (GateState.COLD, Event.UNIT_NONSENSE): _TRIP,
        (GateState.COLD, Event.UNIT_STRANGE): _TRIP,
        (GateState.COLD, Event.UNIT_REFUSED): _TRIP,
        (GateState.COLD, Event.PROOF_FAILED): _TRIP,
        (GateState.COLD, Event.LIGHT_STUCK): _TRIP,
        (GateState.COLD, Event.LIGHT_DROPPED): _TRIP,
        (GateState.COLD, Event.TICK_LATE): _TRIP,
        (GateState.COLD, Event.LEDGER_FAILED): _TRIP,
        (GateState.COLD, Event.CHANNELS_DISAGREE): _TRIP,
        (GateState.COLD, Event.POWER_ABOVE_LIMIT): _TRIP,
        (GateState.COLD, Event.SETTINGS_CHANGED): _TRIP,
        (GateState.COLD, Event.HAND_STOP): _TRIP,
        (GateState.COLD, Event.CONTROLLER_FAULT): _TRIP,
        (GateState.COLD, Event.GUARD_FAULT): _TRIP,
        #
        (GateState.READY, Event.ARMED): _ARMED_READY,
        (GateState.READY, Event.ARMING_REFUSED): _COLD,
        (GateState.READY, Event.LIGHT_REQUESTED): _LIT,
        (GateState.READY, Event.DARK_REQUESTED): Move(GateState.READY, "dark already"),
        (GateState.READY, Event.ACKNOWLEDGED): _NO_TRIP_READY,
        (GateState.READY, Event.RESUMED): _TRIP,
        (GateState.READY, Event.DISARMED): _COLD,
        (GateState.READY, Event.END_REQUESTED): _END,
        (GateState.READY, Event.HEARTBEAT_STALE): _TRIP,
        (GateState.READY, Event.INTERLOCK_OPEN): _TRIP,
        (GateState.READY, Event.PERMIT_LAPSED): _TRIP,
        (GateState.READY, Event.STEP_NOT_PERMITTED): _TRIP,
        (GateState.READY, Event.ANGLE_DISAGREES): _TRIP,
        (GateState.READY, Event.READING_STALE): _TRIP,
        (GateState.READY, Event.STAGE_TURNING): _TRIP,
        (GateState.READY, Event.UNIT_SILENT): _TRIP,
        (GateState.READY, Event.UNIT_NONSENSE): _TRIP,
        (GateState.READY, Event.UNIT_STRANGE): _TRIP,
        (GateState.READY, Event.UNIT_REFUSED): _TRIP,
        (GateState.READY, Event.PROOF_FAILED): _TRIP,
        (GateState.READY, Event.LIGHT_STUCK): _TRIP,
        (GateState.READY, Event.LIGHT_DROPPED): _TRIP,
        (GateState.READY, Event.TICK_LATE): _TRIP,
        (GateState.READY, Event.LEDGER_FAILED): _TRIP,
        (GateState.READY, Event.CHANNELS_DISAGREE): _TRIP,
        (GateState.READY, Event.POWER_ABOVE_LIMIT): _TRIP,
        (GateState.READY, Event.SETTINGS_CHANGED): _TRIP,
        (GateState.READY, Event.HAND_STOP): _TRIP,
        (GateState.READY, Event.CONTROLLER_FAULT): _TRIP,
        (GateState.READY, Event.GUARD_FAULT): _TRIP,
        #
        (GateState.LIT, Event.ARMED): _ARMED_LIT,
        (GateState.LIT, Event.ARMING_REFUSED): _COLD,
        (GateState.LIT, Event.LIGHT_REQUESTED): Move(GateState.LIT, "lit already"),
        (GateState.LIT, Event.DARK_REQUESTED): _READY,
        (GateState.LIT, Event.ACKNOWLEDGED): _NO_TRIP_LIT,
        (GateState.LIT, Event.RESUMED): _TRIP,
        (GateState.LIT, Event.DISARMED): _COLD,
        (GateState.LIT, Event.END_REQUESTED): _END,
        (GateState.LIT, Event.HEARTBEAT_STALE): _TRIP,
        (GateState.LIT, Event.INTERLOCK_OPEN): _TRIP,
        (GateState.LIT, Event.PERMIT_LAPSED): _TRIP,
        (GateState.LIT, Event.STEP_NOT_PERMITTED): _TRIP,
        (GateState.LIT, Event.ANGLE_DISAGREES): _TRIP,
        (GateState.LIT, Event.READING_STALE): _TRIP,
        (GateState.LIT, Event.STAGE_TURNING): _TRIP,
        (GateState.LIT, Event.UNIT_SILENT): _TRIP,
        (GateState.LIT, Event.UNIT_NONSENSE): _TRIP,
        (GateState.LIT, Event.UNIT_STRANGE): _TRIP,
        (GateState.LIT, Event.UNIT_REFUSED): _TRIP,
        (GateState.LIT, Event.PROOF_FAILED): _TRIP,
        (GateState.LIT, Event.LIGHT_STUCK): _TRIP,
        (GateState.LIT, Event.LIGHT_DROPPED): _TRIP,
        (GateState.LIT, Event.TICK_LATE): _TRIP,
        (GateState.LIT, Event.LEDGER_FAILED): _TRIP,
        (GateState.LIT, Event.CHANNELS_DISAGREE): _TRIP,
        (GateState.LIT, Event.POWER_ABOVE_LIMIT): _TRIP,
        (GateState.LIT, Event.SETTINGS_CHANGED): _TRIP,
        (GateState.LIT, Event.HAND_STOP): _TRIP,
        (GateState.LIT, Event.CONTROLLER_FAULT): _TRIP,
        (GateState.LIT, Event.GUARD_FAULT): _TRIP,
        #
        (GateState.TRIPPED, Event.ARMED): _LATCHED,
        (GateState.TRIPPED, Event.ARMING_REFUSED): _LATCHED,
        (GateState.TRIPPED, Event.LIGHT_REQUESTED): _LATCHED,
        (GateState.TRIPPED, Event.DARK_REQUESTED): Move(
            GateState.TRIPPED, "dark already"
        ),
        (GateState.TRIPPED, Event.ACKNOWLEDGED): _COLD,
        (GateState.TRIPPED, Event.RESUMED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.DISARMED): _LATCHED,
        (GateState.TRIPPED, Event.END_REQUESTED): _END,
        (GateState.TRIPPED, Event.HEARTBEAT_STALE): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.INTERLOCK_OPEN): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.PERMIT_LAPSED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.STEP_NOT_PERMITTED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.ANGLE_DISAGREES): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.READING_STALE): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.STAGE_TURNING): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.UNIT_SILENT): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.UNIT_NONSENSE): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.UNIT_STRANGE): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.UNIT_REFUSED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.PROOF_FAILED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.LIGHT_STUCK): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.LIGHT_DROPPED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.TICK_LATE): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.LEDGER_FAILED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.CHANNELS_DISAGREE): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.POWER_ABOVE_LIMIT): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.SETTINGS_CHANGED): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.HAND_STOP): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.CONTROLLER_FAULT): _LATCHED_TWICE,
        (GateState.TRIPPED, Event.GUARD_FAULT): _LATCHED_TWICE,
        #
        (GateState.ENDED, Event.ARMED): _OVER,
        (GateState.ENDED, Event.ARMING_REFUSED): _OVER,
        (GateState.ENDED, Event.LIGHT_REQUESTED): _OVER,
        (GateState.ENDED, Event.DARK_REQUESTED): _OVER,
        (GateState.ENDED, Event.ACKNOWLEDGED): _OVER,
        (GateState.ENDED, Event.RESUMED): _OVER,
        (GateState.ENDED, Event.DISARMED): _OVER,
        (GateState.ENDED, Event.END_REQUESTED): _OVER,
        (GateState.ENDED, Event.HEARTBEAT_STALE): _OVER,
        (GateState.ENDED, Event.INTERLOCK_OPEN): _OVER,
        (GateState.ENDED, Event.PERMIT_LAPSED): _OVER,
        (GateState.ENDED, Event.STEP_NOT_PERMITTED): _OVER,
        (GateState.ENDED, Event.ANGLE_DISAGREES): _OVER,
        (GateState.ENDED, Event.READING_STALE): _OVER,
        (GateState.ENDED, Event.STAGE_TURNING): _OVER,
        (GateState.ENDED, Event.UNIT_SILENT): _OVER,
        (GateState.ENDED, Event.UNIT_NONSENSE): _OVER,
        (GateState.ENDED, Event.UNIT_STRANGE): _OVER,
        (GateState.ENDED, Event.UNIT_REFUSED): _OVER,
        (GateState.ENDED, Event.PROOF_FAILED): _OVER,
        (GateState.ENDED, Event.LIGHT_STUCK): _OVER,
        (GateState.ENDED, Event.LIGHT_DROPPED): _OVER,
        (GateState.ENDED, Event.TICK_LATE): _OVER,
        (GateState.ENDED, Event.LEDGER_FAILED): _OVER,
        (GateState.ENDED, Event.CHANNELS_DISAGREE): _OVER,
        (GateState.ENDED, Event.POWER_ABOVE_LIMIT): _OVER,
        (GateState.ENDED, Event.SETTINGS_CHANGED): _OVER,
        (GateState.ENDED, Event.HAND_STOP): _OVER,
        (GateState.ENDED, Event.CONTROLLER_FAULT): _OVER,
        (GateState.ENDED, Event.GUARD_FAULT): _OVER,
    }
)

OUTPUTS: Mapping[GateState, Output] = MappingProxyType(
    {
        GateState.COLD: Output(emission=False),
        GateState.READY: Output(emission=False),
        GateState.LIT: Output(emission=True),
        GateState.TRIPPED: Output(emission=False),
        GateState.ENDED: Output(emission=False),
    }
)

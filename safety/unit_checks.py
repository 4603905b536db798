"""Whether the unit is the one that is meant, and what its failures are called."""

from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    AskedIllegal,
    DeviceRefused,
    DriverError,
    NoAnswerInTime,
)
from pitchsweep.safety.gate_table import Event
from pitchsweep.safety.guard_view import Fault
from pitchsweep.safety.guard_world import UnitLine
from pitchsweep.safety.permit import Permit, answers_challenge


def find_stranger(unit: UnitLine, identity: str) -> Fault | None:
    """UNIT_STRANGE when the unit states another identity; DriverError passes."""
    says = unit.identify()
    if says == identity:
        return None
    return Fault(
        Event.UNIT_STRANGE, f"the unit is '{says}', the bench file says '{identity}'"
    )


def find_no_proof(unit: UnitLine, permit: Permit, nonce: bytes) -> Fault | None:
    """PROOF_FAILED when the unit declines the challenge or does not know the key.

    A unit that says nothing at all to it (a bare relay) has no proof either. A permit
    without a key needs none.
    """
    if permit.key is None:
        return None
    try:
        answer = unit.prove(nonce)
    except (DeviceRefused, AnsweredNonsense, NoAnswerInTime) as error:
        return Fault(Event.PROOF_FAILED, f"no proof of the twin: {error}")
    if answers_challenge(permit, nonce, answer):
        return None
    return Fault(
        Event.PROOF_FAILED,
        "the unit does not know this rehearsal's key: not the twin of this run",
    )


def unit_fault(error: DriverError) -> Fault:
    """The gate's name for a failure of the unit or of its line."""
    if isinstance(error, DeviceRefused):
        return Fault(Event.UNIT_REFUSED, str(error))
    if isinstance(error, AnsweredNonsense | AskedIllegal):
        return Fault(Event.UNIT_NONSENSE, str(error))
    return Fault(Event.UNIT_SILENT, str(error))

"""What must be shown before every arming, with the shutter shut. Pure.

The keep-alive time-out runs out once in the dark and the unit counts it within
250 ms; a person opens and closes the interlock and every channel follows. What was
shown counts for one arming: after a trip it is shown anew.
"""

from dataclasses import dataclass, replace
from enum import Enum

from pitchsweep.drivers.emission_client import UnitState

DROP_OUT_LIMIT_S = 0.25
LOOKING_S = 0.02
"""What the guard's own looking, every 10 ms, may add to a drop-out that it times."""


class TimeOut(Enum):
    """How far the trial of the keep-alive time-out is."""

    NOT_TRIED = "not tried"
    RUNNING = "running"
    SHOWN = "shown"
    MISSED = "missed"
    FAILED = "failed"


class Want(Enum):
    """What is to be done next."""

    NOTHING = ""
    TRIAL = "trial"
    WAIT = "wait"
    OPEN = "open"
    CLOSE = "close"


@dataclass(frozen=True)
class ArmingProof:
    """What has been shown; times are monotonic seconds of the guard.

    ``asked_s`` and ``answered_s`` enclose the beginning of the trial, ``lapses`` is
    the unit's count then, ``took_s`` the longest that the unit can have taken.
    """

    time_out: TimeOut = TimeOut.NOT_TRIED
    asked_s: float = 0.0
    answered_s: float = 0.0
    lapses: int = 0
    took_s: float = float("nan")
    reason: str = ""
    was_closed: bool = False
    was_opened: bool = False
    was_cycled: bool = False


def trial_begun(
    proof: ArmingProof, *, asked_s: float, answered_s: float, says: UnitState
) -> ArmingProof:
    """``proof`` with the trial running from now."""
    return replace(
        proof,
        time_out=TimeOut.RUNNING,
        asked_s=asked_s,
        answered_s=answered_s,
        lapses=says.lapse_count,
        reason="",
    )


def observe_proof(
    proof: ArmingProof, *, asked_s: float, answered_s: float, says: UnitState
) -> ArmingProof:
    """``proof`` with one more answer of the unit taken in."""
    seen = _observe_interlock(proof, says)
    if seen.time_out is not TimeOut.RUNNING:
        return seen
    if says.light_on:
        return _failed(seen, "light came out while its time-out was tried")
    longest_s = answered_s - seen.asked_s
    if says.lapse_count != seen.lapses:
        once = says.lapse_count == seen.lapses + 1
        in_time = once and longest_s <= DROP_OUT_LIMIT_S + LOOKING_S
        return replace(
            seen,
            time_out=TimeOut.SHOWN if in_time else TimeOut.MISSED,
            took_s=longest_s,
        )
    if asked_s - seen.answered_s > DROP_OUT_LIMIT_S:
        return _failed(
            seen,
            f"no drop-out {asked_s - seen.answered_s:.3f} s after the last keep-alive,"
            f" allowed {DROP_OUT_LIMIT_S:g} s",
        )
    return seen


def next_want(proof: ArmingProof) -> Want:
    """What is to be done next; NOTHING when all is shown."""
    if proof.time_out is TimeOut.RUNNING:
        return Want.WAIT
    if proof.time_out is not TimeOut.SHOWN:
        return Want.TRIAL
    if proof.was_cycled:
        return Want.NOTHING
    return Want.CLOSE if proof.was_opened or not proof.was_closed else Want.OPEN


def why_not_proven(proof: ArmingProof) -> str | None:
    """None when all is shown, otherwise what is missing."""
    if proof.time_out is TimeOut.FAILED:
        return proof.reason
    if proof.time_out is not TimeOut.SHOWN:
        return "the keep-alive time-out is not shown yet, with the shutter shut"
    if not proof.was_cycled:
        return "nobody has opened and closed the interlock since the guard began"
    return None


def _observe_interlock(proof: ArmingProof, says: UnitState) -> ArmingProof:
    if says.light_on:
        return proof
    if says.interlock_open:
        return replace(proof, was_opened=proof.was_opened or proof.was_closed)
    if not says.interlock_closed:
        return proof
    return replace(
        proof, was_closed=True, was_cycled=proof.was_cycled or proof.was_opened
    )


def _failed(proof: ArmingProof, reason: str) -> ArmingProof:
    return replace(proof, time_out=TimeOut.FAILED, reason=reason)

"""What a fault is, and what the recipe wants done about it (pure)."""

from dataclasses import dataclass
from typing import Literal

from pitchsweep.acquire.acquire_errors import FaultMet
from pitchsweep.configs.fault_policies import FaultPolicies, Policy
from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    DriverError,
    LineBroke,
    NoAnswerInTime,
)

Device = Literal["stage", "camera"]

REFUSALS: dict[str, dict[str, str]] = {
    "stage": {
        "declined": "stage_refused",
        "not-homed": "stage_zero_lost",
        "stalled": "stage_stalled",
        "still-turning": "stage_stalled",
        "wrong-place": "stage_wrong_place",
    },
    "camera": {
        "declined": "camera_no_frame",
        "stale": "camera_stale",
        "identical": "camera_identical",
        "wrong-frame": "camera_wrong_frame",
        "black": "camera_black",
        "white": "camera_white",
    },
}
"""Device -> its reason for refusing -> the fault."""

MOST_PAUSES = 5
"""A person who was asked so often at one step cannot mend it in passing."""

AGAIN = ("retry", "re-home")


@dataclass(frozen=True)
class Reaction:
    """What is done now; ``words`` say it in journal, terminal and report."""

    does: Policy
    words: str


def fault_kind(error: Exception) -> str | None:
    """The fault's key in the recipe; None for what has no policy and ends the sweep."""
    if isinstance(error, FaultMet):
        return error.kind
    if not isinstance(error, DriverError):
        return None
    device = _device(error)
    if isinstance(error, DeviceRefused):
        return REFUSALS.get(device, {}).get(error.reason)
    if device == "camera":
        if isinstance(error, LineBroke):
            return "camera_gone"
        wrong = isinstance(error, AnsweredNonsense)
        return "camera_wrong_frame" if wrong else "camera_no_frame"
    if device == "stage":
        wrong = isinstance(error, AnsweredNonsense)
        return "stage_nonsense" if wrong else "stage_no_answer"
    return None


def reaction(policies: FaultPolicies, kind: str, tries: int) -> Reaction:
    """What follows from the fault ``kind`` where ``tries`` attempts failed before.

    A policy that takes the step again does so ``retries`` times; then ``then`` holds.
    """
    wanted: Policy = getattr(policies, kind)
    if "pause" in (wanted, policies.then) and tries >= policies.retries + MOST_PAUSES:
        return Reaction("stop", f"stop, after {MOST_PAUSES} pauses at this step")
    if wanted not in AGAIN:
        return Reaction(wanted, wanted)
    if tries < policies.retries:
        return Reaction(wanted, f"{wanted}, attempt {tries + 1} of {policies.retries}")
    return Reaction(
        policies.then, f"{policies.then}, after {policies.retries} times {wanted}"
    )


def _device(error: DriverError) -> str:
    if isinstance(error, AnsweredNonsense | NoAnswerInTime | DeviceRefused):
        return error.device
    if isinstance(error, LineBroke):
        return "camera" if error.line == "camera" else _of_line(error.line)
    return ""


def _of_line(line: str) -> str:
    # The twin's own door is no device; every other line here is the stage's port.
    return "" if line.startswith("twin") else "stage"

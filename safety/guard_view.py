"""What a decision of the guard rests on, and what it gives. Pure."""

from collections.abc import Callable
from dataclasses import dataclass

from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety.arming_proof import ArmingProof
from pitchsweep.safety.gate_table import Event
from pitchsweep.safety.guard_config import GuardLimits, UnitSettings
from pitchsweep.safety.permit import Permit
from pitchsweep.safety.permitted_steps import PermittedSteps


@dataclass(frozen=True)
class Beat:
    """The controller's last word, in the guard's monotonic seconds.

    ``sent_s`` when it was sent, ``read_at_s`` when the stage was read back,
    ``power_at_s`` when the power at the part (mW) was read or set. All of it is as good
    as the controller.
    """

    sent_s: float
    step: int | None = None
    commanded_deg: float = float("nan")
    readback_deg: float = float("nan")
    read_at_s: float = float("-inf")
    turning: bool = True
    power_mw: float = float("nan")
    power_at_s: float = float("-inf")


@dataclass(frozen=True)
class UnitReading:
    """What the unit answered, and when it was asked (monotonic seconds)."""

    at_s: float
    says: UnitState


@dataclass(frozen=True)
class View:
    """All that a decision may rest on.

    ``lit_step`` is the step that was asked to be lit, ``lit_since_s`` when and
    ``lit_lapses`` the unit's count of lapses then; ``light_was_seen`` whether the unit
    has shown light since; ``dark_since_s`` when dark was last commanded;
    ``last_tick_s`` when the guard last looked; ``disagree_since_s`` since when two
    interlock channels contradict each other; ``pressed_s`` when a person last pressed
    the key.
    """

    now_s: float
    utc_s: float
    utc_by_monotonic_s: float
    last_tick_s: float
    beat: Beat | None
    unit: UnitReading | None
    permit: Permit
    permitted: PermittedSteps
    limits: GuardLimits
    settings: UnitSettings
    lit_step: int | None
    lit_since_s: float
    lit_lapses: int
    light_was_seen: bool
    dark_since_s: float
    disagree_since_s: float | None
    proof: ArmingProof
    pressed_s: float


@dataclass(frozen=True)
class Fault:
    """An event of the gate table with its reason in words."""

    event: Event
    reason: str


Check = Callable[[View], Fault | None]

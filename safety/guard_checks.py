"""What the guard decides on every tick: a view in, the first fault or None out. Pure.

A check is a function of the view; which checks hold in which state is a table. The
order is the order in which faults are named when several come together.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.guard_config import GuardLimits
from pitchsweep.safety.permit import Permit, why_permit_lapsed
from pitchsweep.safety.permitted_steps import (
    PermittedSteps,
    why_angle_disagrees,
    why_reading_is_stale,
    why_step_is_not_permitted,
)


@dataclass(frozen=True)
class Beat:
    """The controller's last word, in the guard's monotonic seconds.

    ``sent_s`` when it was sent, ``read_at_s`` when the stage was read back.
    """

    sent_s: float
    step: int | None = None
    commanded_deg: float = float("nan")
    readback_deg: float = float("nan")
    read_at_s: float = float("-inf")
    turning: bool = True


@dataclass(frozen=True)
class UnitReading:
    """What the unit answered, and when it was asked (monotonic seconds)."""

    at_s: float
    says: UnitState


@dataclass(frozen=True)
class View:
    """All that a decision may rest on.

    ``lit_step`` is the step that was asked to be lit and ``lit_lapses`` the unit's
    count of lapses then; ``dark_since_s`` when dark was last commanded; ``last_tick_s``
    when the guard last looked.
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
    lit_step: int | None
    lit_lapses: int
    dark_since_s: float
    keep_alive_s: float
    has_shutter: bool


@dataclass(frozen=True)
class Fault:
    """An event of the gate table with its reason in words."""

    event: Event
    reason: str


Check = Callable[[View], Fault | None]


def tick_is_in_time(view: View) -> Fault | None:
    """TICK_LATE when the guard itself did not look for too long (stopped, starved)."""
    gap_s = view.now_s - view.last_tick_s
    if 0.0 <= gap_s <= view.limits.tick_limit_s:
        return None
    return Fault(
        Event.TICK_LATE,
        f"the guard did not look for {gap_s:.3f} s, allowed"
        f" {view.limits.tick_limit_s:g} s",
    )


def heartbeat_is_fresh(view: View) -> Fault | None:
    """HEARTBEAT_STALE when the controller has not been heard for too long."""
    limit_s = view.limits.heartbeat_limit_s
    if view.beat is None:
        return Fault(Event.HEARTBEAT_STALE, "no heartbeat was ever heard")
    age_s = view.now_s - view.beat.sent_s
    if 0.0 <= age_s <= limit_s:
        return None
    return Fault(
        Event.HEARTBEAT_STALE,
        f"last heartbeat {age_s:.3f} s ago, allowed {limit_s:g} s",
    )


def interlock_is_closed(view: View) -> Fault | None:
    """INTERLOCK_OPEN unless the unit said closed, within the tick limit."""
    if view.unit is None:
        return Fault(Event.INTERLOCK_OPEN, "the interlock was never read")
    if not view.unit.says.door_closed:
        return Fault(Event.INTERLOCK_OPEN, "the interlock is open")
    age_s = view.now_s - view.unit.at_s
    if not 0.0 <= age_s <= view.limits.tick_limit_s:
        return Fault(Event.INTERLOCK_OPEN, f"the interlock was read {age_s:.3f} s ago")
    return None


def permit_is_valid(view: View) -> Fault | None:
    """PERMIT_LAPSED outside the permit's window."""
    reason = why_permit_lapsed(
        view.permit, utc_s=view.utc_s, utc_by_monotonic_s=view.utc_by_monotonic_s
    )
    return None if reason is None else Fault(Event.PERMIT_LAPSED, reason)


def step_is_permitted(view: View) -> Fault | None:
    """STEP_NOT_PERMITTED for an unlisted step, or one changed with the light on."""
    step = None if view.beat is None else view.beat.step
    reason = why_step_is_not_permitted(view.permitted, step)
    if reason is None and view.lit_step is not None and step != view.lit_step:
        reason = f"step {view.lit_step} became {step} with the light on"
    return None if reason is None else Fault(Event.STEP_NOT_PERMITTED, reason)


def stage_is_at_rest(view: View) -> Fault | None:
    """STAGE_TURNING when the controller says that the stage turns."""
    if view.beat is not None and not view.beat.turning:
        return None
    return Fault(Event.STAGE_TURNING, "the stage turns")


def angle_agrees(view: View) -> Fault | None:
    """ANGLE_DISAGREES when command or read-back is not the step's angle."""
    beat = view.beat
    if beat is None or beat.step is None:
        return Fault(Event.ANGLE_DISAGREES, "no step was named")
    if beat.step not in view.permitted.angles_deg:
        return Fault(Event.ANGLE_DISAGREES, "no angle belongs to the step")
    reason = why_angle_disagrees(
        view.permitted, beat.step, beat.commanded_deg, beat.readback_deg
    )
    return None if reason is None else Fault(Event.ANGLE_DISAGREES, reason)


def reading_is_fresh(view: View) -> Fault | None:
    """READING_STALE when the stage was last read back too long ago."""
    if view.beat is None:
        return Fault(Event.READING_STALE, "the stage was never read")
    reason = why_reading_is_stale(view.permitted, view.now_s - view.beat.read_at_s)
    return None if reason is None else Fault(Event.READING_STALE, reason)


def light_is_on(view: View) -> Fault | None:
    """LIGHT_DROPPED when the unit is, or meanwhile was, dark by itself."""
    says = None if view.unit is None else view.unit.says
    if says is not None and says.light_on and says.lapse_count == view.lit_lapses:
        return None
    return Fault(Event.LIGHT_DROPPED, "the unit went dark by itself")


def light_is_off(view: View) -> Fault | None:
    """LIGHT_STUCK when light or shutter outlast 'dark' by more than the keep-alive."""
    if view.unit is None:
        return None
    says = view.unit.says
    if not (says.light_on or (view.has_shutter and says.shutter_open)):
        return None
    since_s = view.unit.at_s - view.dark_since_s
    if 0.0 <= since_s <= view.keep_alive_s:
        return None
    what = "the light is on" if says.light_on else "the shutter is not shut"
    return Fault(Event.LIGHT_STUCK, f"commanded dark {since_s:.3f} s ago and {what}")


BEFORE_LIGHT: tuple[Check, ...] = (
    tick_is_in_time,
    heartbeat_is_fresh,
    interlock_is_closed,
    permit_is_valid,
    light_is_off,
    stage_is_at_rest,
    step_is_permitted,
    angle_agrees,
    reading_is_fresh,
)
"""Must hold when light is asked for."""

CHECKS: Mapping[GateState, tuple[Check, ...]] = MappingProxyType(
    {
        GateState.COLD: (light_is_off,),
        GateState.READY: (
            tick_is_in_time,
            heartbeat_is_fresh,
            interlock_is_closed,
            permit_is_valid,
            light_is_off,
        ),
        GateState.LIT: (
            tick_is_in_time,
            heartbeat_is_fresh,
            interlock_is_closed,
            permit_is_valid,
            stage_is_at_rest,
            step_is_permitted,
            angle_agrees,
            reading_is_fresh,
            light_is_on,
        ),
        GateState.TRIPPED: (light_is_off,),
        GateState.ENDED: (light_is_off,),
    }
)
"""Must hold on every tick of a state."""

BEFORE_ARMING: tuple[Check, ...] = (
    heartbeat_is_fresh,
    interlock_is_closed,
    permit_is_valid,
    light_is_off,
)
"""Must hold when the gate is armed; a failure refuses and does not trip."""


def first_fault(view: View, checks: tuple[Check, ...]) -> Fault | None:
    """The first fault that ``checks`` find in ``view``, or None."""
    for check in checks:
        fault = check(view)
        if fault is not None:
            return fault
    return None

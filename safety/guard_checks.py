"""What the guard decides on every tick: a view in, the first fault or None out. Pure.

A check is a function of the view; which checks hold in which state is a table. The
order is the order in which faults are named when several come together.
"""

from collections.abc import Mapping
from types import MappingProxyType

from pitchsweep.safety.arming_proof import TimeOut, why_not_proven
from pitchsweep.safety.attended_permit import AttendedPermit, why_hold_is_released
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.guard_config import NETWORK_AGE_S
from pitchsweep.safety.guard_view import Check, Fault, View
from pitchsweep.safety.permit import power_ceiling_mw, why_permit_lapsed
from pitchsweep.safety.permitted_steps import (
    why_angle_disagrees,
    why_power_is_not_permitted,
    why_reading_is_stale,
    why_step_is_not_permitted,
)

DISAGREE_LIMIT_S = 0.5
"""Two interlock channels may differ for so long while a door moves."""


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
    """INTERLOCK_OPEN unless the unit said closed, and not long ago.

    Over a network the answer counts only when younger than 100 ms.
    """
    if view.unit is None:
        return Fault(Event.INTERLOCK_OPEN, "the interlock was never read")
    if not view.unit.says.door_closed:
        return Fault(Event.INTERLOCK_OPEN, "the interlock is open")
    age_s = view.now_s - view.unit.at_s
    limit_s = NETWORK_AGE_S if view.settings.over_network else view.limits.tick_limit_s
    if not 0.0 <= age_s <= limit_s:
        return Fault(
            Event.INTERLOCK_OPEN,
            f"the interlock was read {age_s:.3f} s ago, allowed {limit_s:g} s",
        )
    return None


def second_channel_is_closed(view: View) -> Fault | None:
    """INTERLOCK_OPEN when a second channel is open, or declared and not reported."""
    second = None if view.unit is None else view.unit.says.second_closed
    if second is False:
        return Fault(Event.INTERLOCK_OPEN, "the interlock's second channel is open")
    if second is None and view.settings.channels > 1:
        return Fault(
            Event.INTERLOCK_OPEN,
            "the bench declares two interlock channels, the unit reports one",
        )
    return None


def channels_agree(view: View) -> Fault | None:
    """CHANNELS_DISAGREE when two channels have contradicted each other for 0.5 s."""
    if view.disagree_since_s is None:
        return None
    for_s = view.now_s - view.disagree_since_s
    if for_s < DISAGREE_LIMIT_S:
        return None
    return Fault(
        Event.CHANNELS_DISAGREE,
        f"the two interlock channels contradict each other for {for_s:.2f} s",
    )


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


def power_is_permitted(view: View) -> Fault | None:
    """POWER_ABOVE_LIMIT for a power above the ceiling, unknown or read long ago."""
    if view.beat is None:
        return Fault(Event.POWER_ABOVE_LIMIT, "the power at the part is not known")
    reason = why_power_is_not_permitted(
        view.beat.power_mw,
        power_ceiling_mw(view.permit, view.permitted.power_ceiling_mw),
        view.now_s - view.beat.power_at_s,
        view.permitted.read_age_limit_s,
    )
    return None if reason is None else Fault(Event.POWER_ABOVE_LIMIT, reason)


def key_is_held(view: View) -> Fault | None:
    """DARK_REQUESTED under an attended permit once the key was let go; no trip."""
    if not isinstance(view.permit, AttendedPermit):
        return None
    reason = why_hold_is_released(view.pressed_s, view.now_s)
    return None if reason is None else Fault(Event.DARK_REQUESTED, reason)


def light_is_on(view: View) -> Fault | None:
    """LIGHT_DROPPED when the unit is, or meanwhile was, dark by itself.

    A relay may take its time until the light is first seen.
    """
    says = None if view.unit is None else view.unit.says
    if says is not None and says.lapse_count == view.lit_lapses:
        rises = view.now_s - view.lit_since_s <= view.settings.rises_within_s
        if says.light_on or (rises and not view.light_was_seen):
            return None
    return Fault(Event.LIGHT_DROPPED, "the unit went dark by itself")


def light_is_off(view: View) -> Fault | None:
    """LIGHT_STUCK when light or shutter outlast 'dark' by more than the keep-alive."""
    if view.unit is None:
        return None
    says = view.unit.says
    if not (says.light_on or (view.settings.has_shutter and says.shutter_open)):
        return None
    since_s = view.unit.at_s - view.dark_since_s
    if 0.0 <= since_s <= view.settings.keep_alive_ms / 1000.0:
        return None
    what = "the light is on" if says.light_on else "the shutter is not shut"
    return Fault(Event.LIGHT_STUCK, f"commanded dark {since_s:.3f} s ago and {what}")


def time_out_holds(view: View) -> Fault | None:
    """PROOF_FAILED when the unit did not drop out in its trial."""
    if view.proof.time_out is not TimeOut.FAILED:
        return None
    return Fault(Event.PROOF_FAILED, view.proof.reason)


def arming_is_proven(view: View) -> Fault | None:
    """ARMING_REFUSED until time-out and interlock were shown since the last trip."""
    reason = why_not_proven(view.proof)
    return None if reason is None else Fault(Event.ARMING_REFUSED, reason)


_ALWAYS: tuple[Check, ...] = (
    heartbeat_is_fresh,
    interlock_is_closed,
    second_channel_is_closed,
    channels_agree,
    permit_is_valid,
)
_STAGE: tuple[Check, ...] = (
    stage_is_at_rest,
    step_is_permitted,
    angle_agrees,
    reading_is_fresh,
    power_is_permitted,
)

BEFORE_LIGHT: tuple[Check, ...] = (
    tick_is_in_time,
    *_ALWAYS,
    light_is_off,
    *_STAGE,
    key_is_held,
)
"""Must hold when light is asked for."""

CHECKS: Mapping[GateState, tuple[Check, ...]] = MappingProxyType(
    {
        GateState.COLD: (light_is_off, channels_agree, time_out_holds),
        GateState.READY: (tick_is_in_time, *_ALWAYS, light_is_off),
        GateState.LIT: (tick_is_in_time, *_ALWAYS, *_STAGE, light_is_on, key_is_held),
        GateState.TRIPPED: (light_is_off, channels_agree),
        GateState.ENDED: (light_is_off,),
    }
)
"""Must hold on every tick of a state."""

ON_BEAT: tuple[Check, ...] = (heartbeat_is_fresh, *_STAGE)
"""Must hold of a heartbeat when it comes while lit; the tick looks at it again."""

BEFORE_ARMING: tuple[Check, ...] = (*_ALWAYS, light_is_off, arming_is_proven)
"""Must hold when the gate is armed; a failure refuses and does not trip."""


def first_fault(view: View, checks: tuple[Check, ...]) -> Fault | None:
    """The first fault that ``checks`` find in ``view``, or None."""
    for check in checks:
        fault = check(view)
        if fault is not None:
            return fault
    return None

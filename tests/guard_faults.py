"""What can go wrong while the light is on, each done to a rig in memory."""

from guard_builders import Rig

from pitchsweep.safety.gate_table import Event
from pitchsweep.safety.guard_messages import Request, read_command


def door(rig: Rig) -> None:
    rig.unit.door_closed = False
    rig.run(0.01)


def silence(rig: Rig) -> None:
    rig.run(0.35, beats=False)


def clock_forward(rig: Rig) -> None:
    rig.clock.utc_s += 7200.0
    rig.run(0.01)


def wrong_step(rig: Rig) -> None:
    rig.run(0.01, step=77)


def step_changed(rig: Rig) -> None:
    rig.run(0.01, step=2)


def stage_turned(rig: Rig) -> None:
    rig.run(0.01, turning=True)


def readback_off(rig: Rig) -> None:
    rig.run(0.01, readback_deg=0.02)


def command_off(rig: Rig) -> None:
    rig.run(0.01, commanded_deg=-0.02)


def readback_nan(rig: Rig) -> None:
    rig.run(0.01, readback_deg=float("nan"))


def reading_old(rig: Rig) -> None:
    rig.run(0.01, read_at_s=rig.clock.now_s - 6.0)


def lapse(rig: Rig) -> None:
    rig.unit.lapses += 1
    rig.run(0.01)


def unit_dark(rig: Rig) -> None:
    rig.unit.lit = False
    rig.run(0.01)


def guard_stopped(rig: Rig) -> None:
    rig.clock.advance(0.26)
    rig.heartbeat()
    rig.guard.tick()


def ledger_fails(rig: Rig) -> None:
    rig.ledger_failure = "disk full"
    rig.run(0.01)


def zero_order_lost(rig: Rig) -> None:
    rig.say(Request.TRIP, "zero order 9 mm from where it was predicted")


def old_message(rig: Rig) -> None:
    line = b'{"command":"beat","sent_s":%f,"step":null}' % (rig.clock.now_s - 0.5)
    command = read_command(line, rig.clock.now_s)
    rig.guard.handle(command)
    rig.clock.advance(0.01)
    rig.guard.tick()


def clock_back(rig: Rig) -> None:
    rig.clock.utc_s -= 3.0
    rig.run(0.01)


def power_high(rig: Rig) -> None:
    rig.run(0.01, power_mw=0.91)


def power_unknown(rig: Rig) -> None:
    rig.run(0.01, power_mw=float("nan"))


def power_old(rig: Rig) -> None:
    rig.run(0.01, power_at_s=rig.clock.now_s - 6.0)


def second_channel(rig: Rig) -> None:
    rig.unit.second_closed = False
    rig.run(0.01)


def settings_edited(rig: Rig) -> None:
    rig.settings_failure = "job.yaml was changed since the start"
    rig.run(0.01)


def told_dark(rig: Rig) -> None:
    rig.guard.fail(Event.HAND_STOP, "'pitchsweep dark' from a terminal")


FAULTS_WHILE_LIT = {
    clock_back: "permit-lapsed",
    power_high: "power-above-limit",
    power_unknown: "power-above-limit",
    power_old: "power-above-limit",
    second_channel: "interlock-open",
    settings_edited: "settings-changed",
    told_dark: "hand-stop",
    door: "interlock-open",
    silence: "heartbeat-stale",
    clock_forward: "permit-lapsed",
    wrong_step: "step-not-permitted",
    step_changed: "step-not-permitted",
    stage_turned: "stage-turning",
    readback_off: "angle-disagrees",
    command_off: "angle-disagrees",
    readback_nan: "angle-disagrees",
    reading_old: "reading-stale",
    lapse: "light-dropped",
    unit_dark: "light-dropped",
    guard_stopped: "tick-late",
    ledger_fails: "ledger-failed",
    zero_order_lost: "controller-fault",
    old_message: "heartbeat-stale",
}


def tripped(rig: Rig) -> Rig:
    rig.say(Request.TRIP, "for the test")
    rig.run(0.05)
    return rig


def trip_and_acknowledge(rig: Rig) -> None:
    tripped(rig)
    rig.unit.resets += 1
    rig.run(0.01)
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")
    assert rig.state == "cold"

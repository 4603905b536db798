"""What the guard does, with a unit in memory and a clock that is told the time."""

from typing import Any

import pytest
from guard_builders import Rig, guard_config
from guard_faults import (
    FAULTS_WHILE_LIT,
    clock_back,
    clock_forward,
    door,
    guard_stopped,
    lapse,
    power_high,
    readback_off,
    reading_old,
    second_channel,
    silence,
    stage_turned,
    step_changed,
    trip_and_acknowledge,
)

from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety import guard_checks
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.guard_messages import Request, read_command

UNIT_ERRORS = {
    "unit-silent": NoAnswerInTime("unit", "state", 0.1),
    "unit-nonsense": AnsweredNonsense("unit", b"?", "unknown"),
    "unit-refused": DeviceRefused("unit", "declined", "no"),
}


def test_a_guard_begins_cold_and_commands_dark() -> None:
    rig = Rig()
    assert rig.state == "cold"
    assert rig.unit.asked == ["dark", "identify"]


def test_armed_and_asked_the_unit_is_lit_and_held_by_keep_alives() -> None:
    rig = Rig().lit()
    rig.run(2.0)
    assert rig.state == "lit" and rig.unit.shows_light()
    assert 2.0 / 0.2 < rig.unit.asked.count("keep") < 2.0 / 0.02


def test_dark_is_done_at_once_and_not_at_the_next_tick() -> None:
    rig = Rig().lit()
    assert rig.say(Request.DARK)
    assert rig.state == "ready" and not rig.unit.lit


def test_dark_is_sent_even_where_it_is_dark_already() -> None:
    rig = Rig()
    before = rig.unit.asked.count("dark")
    assert rig.say(Request.DARK)
    assert rig.unit.asked.count("dark") == before + 1


def test_the_light_is_off_before_the_reason_is_told() -> None:
    rig = Rig().lit()
    seen: list[bool] = []
    rig.on_report = lambda event: seen.append(rig.unit.lit)
    rig.unit.door_closed = False
    rig.run(0.01)
    assert seen == [False]


def test_light_without_arming_is_refused() -> None:
    rig = Rig()
    assert not rig.light()
    assert rig.state == "cold" and not {"light", "keep"} & set(rig.unit.asked)


def test_arming_needs_a_heartbeat_but_does_not_trip_without() -> None:
    rig = Rig()
    assert not rig.say(Request.ARM)
    assert rig.state == "cold"
    assert rig.events[-1].event == "arming-refused"


def test_arming_is_refused_while_the_interlock_is_open() -> None:
    rig = Rig()
    assert rig.prove()
    rig.unit.door_closed = False
    rig.heartbeat()
    assert not rig.say(Request.ARM)
    assert rig.state == "cold"


def test_every_arming_challenges_anew() -> None:
    rig = Rig()
    nonces: list[bytes] = []
    prove = rig.unit.prove
    rig.unit.prove = lambda nonce: nonces.append(nonce) or prove(nonce)  # type: ignore
    assert rig.arm()
    trip_and_acknowledge(rig)
    assert rig.arm()
    assert len(set(nonces)) == 2 and all(len(nonce) == 16 for nonce in nonces)


@pytest.mark.parametrize("key", [None, b"another twin's key, 32 bytes long"])
def test_a_rehearsal_is_refused_by_a_unit_without_its_key(key: bytes | None) -> None:
    rig = Rig()
    rig.unit.key = key
    assert not rig.arm()
    assert (rig.state, rig.events[-1].event) == ("tripped", "proof-failed")


def test_another_units_identity_trips() -> None:
    rig = Rig()
    rig.unit.identity = "somebody else"
    assert not rig.arm()
    assert (rig.state, rig.events[-1].event) == ("tripped", "unit-strange")


@pytest.mark.parametrize("fault", FAULTS_WHILE_LIT, ids=lambda f: f.__name__)
def test_each_fault_while_lit_means_dark_and_latched(fault: Any) -> None:
    rig = Rig().lit()
    rig.run(0.05)
    assert rig.state == "lit"
    fault(rig)
    assert not rig.unit.lit and rig.state == "tripped"
    assert rig.events[-1].event == FAULTS_WHILE_LIT[fault]
    rig.unit.door_closed, rig.unit.second_closed = True, None
    rig.ledger_failure = rig.settings_failure = ""
    rig.clock.utc_s = 100.0 + rig.clock.utc_s
    rig.run(1.0)
    assert not rig.light() and not rig.arm() and rig.state == "tripped"


@pytest.mark.parametrize("event", UNIT_ERRORS)
@pytest.mark.parametrize("lit", [False, True])
def test_a_faulty_unit_trips_and_is_told_to_go_dark(event: str, lit: bool) -> None:
    rig = Rig().lit() if lit else Rig()
    assert lit or rig.arm()
    before = rig.unit.asked.count("dark")
    rig.unit.error = UNIT_ERRORS[event]
    rig.run(0.01)
    assert (rig.state, rig.events[-1].event) == ("tripped", event)
    assert not lit or rig.unit.asked.count("dark") > before


def test_a_broken_line_counts_as_silence() -> None:
    rig = Rig().lit()
    rig.unit.error = LineBroke("port", "reading", "gone")
    rig.run(0.01)
    assert (rig.state, rig.events[-1].event) == ("tripped", "unit-silent")


def test_light_that_outlasts_dark_trips_and_dark_is_repeated() -> None:
    rig = Rig().lit()
    rig.unit.stuck = True
    rig.say(Request.DARK)
    assert rig.state == "ready"
    rig.run(0.19)
    assert rig.state == "ready"
    rig.run(0.05)
    assert (rig.state, rig.events[-1].event) == ("tripped", "light-stuck")
    before = rig.unit.asked.count("dark")
    rig.run(0.1)
    assert rig.unit.asked.count("dark") == before + 10


def test_light_that_nobody_asked_for_trips() -> None:
    rig = Rig()
    assert rig.arm()
    rig.run(0.5)
    rig.unit.lit, rig.unit.lit_until_s = True, float("inf")
    rig.run(0.01)
    assert (rig.state, rig.events[-1].event) == ("tripped", "light-stuck")
    assert not rig.unit.lit


@pytest.mark.parametrize(
    ("change", "event"),
    [
        ({"step": 9}, "step-not-permitted"),
        ({"readback_deg": 0.5}, "angle-disagrees"),
        ({"turning": True}, "stage-turning"),
        ({"read_at_s": 0.0}, "reading-stale"),
        ({"sent_s": 0.0}, "heartbeat-stale"),
    ],
)
def test_a_wrong_light_request_trips_and_never_lights(
    change: dict[str, object], event: str
) -> None:
    rig = Rig()
    assert rig.arm()
    assert not rig.light(**change)  # type: ignore[arg-type]
    assert (rig.state, rig.events[-1].event) == ("tripped", event)
    assert not {"light", "keep"} & set(rig.unit.asked)


def test_while_ready_the_stage_may_turn_anywhere() -> None:
    rig = Rig()
    assert rig.arm()
    rig.run(1.0, step=None, turning=True)
    assert rig.state == "ready"


def test_the_end_is_dark_and_for_good() -> None:
    rig = Rig().lit()
    rig.guard.end("the controller is gone")
    assert rig.state == "ended" and not rig.unit.lit
    assert not rig.arm() and not rig.light()
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")


def test_the_ledger_gets_one_entry_a_step_with_its_light_time() -> None:
    rig = Rig()
    assert rig.arm()
    for step in (0, 0, 0, 1, 1):
        assert rig.light(step)
        rig.run(0.1, step=step)
        assert rig.say(Request.DARK)
        rig.run(0.05, step=step)
    rig.guard.end("done")
    light = [data for kind, data in rig.recorded if kind == "light"]
    assert [(row["step"], row["times"]) for row in light] == [(0, 3), (1, 2)]
    assert [row["light_s"] for row in light] == pytest.approx([0.3, 0.2])
    moves = [data["event"] for kind, data in rig.recorded if kind == "gate"]
    assert moves == ["armed", "end-requested"]


def test_a_unit_without_shutter_may_report_it_clear() -> None:
    rig = Rig()
    standing = rig.unit._standing
    rig.unit._standing = lambda: UnitState(  # type: ignore[method-assign]
        False, True, True, 0, 0
    )
    rig.run(0.5)
    assert (rig.state, rig.events[-1].event) == ("tripped", "light-stuck")
    config = guard_config()
    plain = type(config.unit)(**{**vars(config.unit), "has_shutter": False})
    other = Rig(config=type(config)(**{**vars(config), "unit": plain}))
    other.unit._standing = rig.unit._standing  # type: ignore[method-assign]
    other.run(0.5)
    assert other.state == "cold" and standing().door_closed


def without(check: Any) -> Any:
    """The guard's checks with one of them skipped everywhere."""
    from pitchsweep.safety.guard_world import GuardChecks

    whole = GuardChecks()
    return GuardChecks(
        by_state={
            state: tuple(c for c in checks if c is not check)
            for state, checks in whole.by_state.items()
        },
        before_light=tuple(c for c in whole.before_light if c is not check),
        on_beat=tuple(c for c in whole.on_beat if c is not check),
        before_arming=tuple(c for c in whole.before_arming if c is not check),
    )


@pytest.mark.parametrize(
    ("check", "fault"),
    [
        (guard_checks.heartbeat_is_fresh, silence),
        (guard_checks.permit_is_valid, clock_forward),
        (guard_checks.permit_is_valid, clock_back),
        (guard_checks.interlock_is_closed, door),
        (guard_checks.second_channel_is_closed, second_channel),
        (guard_checks.power_is_permitted, power_high),
        (guard_checks.stage_is_at_rest, stage_turned),
        (guard_checks.angle_agrees, readback_off),
        (guard_checks.reading_is_fresh, reading_old),
        (guard_checks.step_is_permitted, step_changed),
        (guard_checks.tick_is_in_time, guard_stopped),
        (guard_checks.light_is_on, lapse),
    ],
    ids=lambda value: value.__name__,
)
def test_skipping_a_check_leaves_the_light_on(check: Any, fault: Any) -> None:
    """Each fault above is caught by its own check and by no other.

    The same faults with the whole set of checks are dark in the test above, so that a
    guard in which one check went missing fails there.
    """
    rig = Rig(checks=without(check)).lit()
    rig.run(0.05)
    fault(rig)
    if check is guard_checks.tick_is_in_time:
        assert rig.events[-1].event == "light-dropped"  # the unit's own keep-alive
    else:
        assert rig.state == "lit" and rig.unit.lit


def test_every_state_is_checked_and_light_by_all_that_must_hold() -> None:
    g = guard_checks
    assert set(g.CHECKS) == set(GateState)
    always = {
        g.tick_is_in_time,
        g.heartbeat_is_fresh,
        g.interlock_is_closed,
        g.permit_is_valid,
        g.second_channel_is_closed,
        g.channels_agree,
    }
    stage = {
        g.step_is_permitted,
        g.angle_agrees,
        g.reading_is_fresh,
        g.stage_is_at_rest,
        g.power_is_permitted,
    }
    assert set(g.CHECKS[GateState.LIT]) == always | stage | {
        g.light_is_on,
        g.key_is_held,
    }
    assert set(g.BEFORE_LIGHT) == always | stage | {g.light_is_off, g.key_is_held}
    assert set(g.CHECKS[GateState.READY]) == always | {g.light_is_off}


@pytest.mark.parametrize(
    "line",
    [
        b"",
        b"no json",
        b"[1]",
        b'{"command":"open"}',
        b'{"command":"ack"}',
        b'{"command":"trip","reason":""}',
        b'{"command":"light","sent_s":1}',
        b'{"command":"beat","sent_s":"1","step":null}',
        b'{"command":"beat","sent_s":NaN,"step":null}',
        b'{"command":"beat","sent_s":1,"step":1.5}',
        b'{"command":"arm","id":true}',
    ],
)
def test_an_unreadable_message_is_refused(line: bytes) -> None:
    with pytest.raises(ValueError):
        read_command(line, 1.0)


def test_a_message_from_the_future_counts_as_sent_when_received() -> None:
    command = read_command(b'{"command":"beat","sent_s":9e9,"step":null}', 5.0)
    assert command.beat is not None and command.beat.sent_s == 5.0


def test_every_event_of_the_table_can_come_from_somewhere() -> None:
    told = set(FAULTS_WHILE_LIT.values()) | set(UNIT_ERRORS)
    told |= {"unit-strange", "proof-failed", "light-stuck", "guard-fault"}
    told |= {"channels-disagree"}
    from pitchsweep.safety.gate_table import FAULTS

    assert {event.value for event in FAULTS} == told
    assert Event.GUARD_FAULT in FAULTS

"""What is shown before arming: time-out in the dark, interlock, two channels."""

import pytest
from guard_builders import Rig, guard_config

from pitchsweep.safety.arming_proof import Want
from pitchsweep.safety.guard_messages import Command, Request


def wants(rig: Rig) -> str:
    return rig.guard.handle(Command(Request.PROOF, 1)).wants


def test_arming_asks_for_trial_then_door_then_nothing() -> None:
    rig = Rig()
    seen = [wants(rig)]
    assert rig.say(Request.TRIAL)
    seen.append(wants(rig))
    rig.run(0.25)
    seen.append(wants(rig))
    rig.unit.door_closed = False
    rig.run(0.02)
    seen.append(wants(rig))
    rig.unit.door_closed = True
    rig.run(0.02)
    seen.append(wants(rig))
    assert seen == ["trial", "wait", "open", "close", ""]
    assert [Want(word) for word in seen]
    rig.heartbeat()
    assert rig.say(Request.ARM)
    assert not {"light", "keep"} & set(rig.unit.asked)


@pytest.mark.parametrize("missing", ["trial", "door"])
def test_arming_is_refused_without_its_proofs(missing: str) -> None:
    rig = Rig()
    if missing == "door":
        rig.say(Request.TRIAL)
    rig.run(0.3)
    if missing == "trial":
        for closed in (False, True):
            rig.move_door(closed)
            rig.run(0.02)
    rig.heartbeat()
    assert not rig.say(Request.ARM)
    assert (rig.state, rig.events[-1].event) == ("cold", "arming-refused")


def test_what_was_shown_counts_for_one_arming_only() -> None:
    rig = Rig().lit()
    rig.say(Request.TRIP, "for the test")
    rig.unit.resets += 1
    rig.run(0.05)
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")
    rig.heartbeat()
    assert not rig.say(Request.ARM)
    assert wants(rig) == "trial"


def test_a_unit_that_does_not_drop_out_within_250_ms_trips() -> None:
    rig = Rig()
    rig.unit.keep_alive_s = 0.4
    rig.say(Request.TRIAL)
    rig.run(0.45)
    assert (rig.state, rig.events[-1].event) == ("tripped", "proof-failed")


def test_light_during_the_trial_trips() -> None:
    rig = Rig()
    rig.say(Request.TRIAL)
    rig.unit.lit, rig.unit.lit_until_s = True, float("inf")
    rig.run(0.02)
    assert rig.state == "tripped" and not rig.unit.lit


def test_a_drop_out_seen_late_by_a_busy_guard_is_tried_again() -> None:
    rig = Rig()
    rig.say(Request.TRIAL)
    rig.clock.advance(0.24)
    rig.clock.advance(0.06)
    rig.guard.tick()
    assert rig.state == "cold" and wants(rig) == "trial"


def test_a_door_that_was_never_seen_closed_is_no_cycle() -> None:
    rig = Rig(begin=False)
    rig.unit.door_closed = False
    rig.guard.begin()
    rig.say(Request.TRIAL)
    rig.run(0.25)
    assert wants(rig) == "close"
    rig.unit.door_closed = True
    rig.run(0.02)
    assert wants(rig) == "open"


def two_channels() -> Rig:
    rig = Rig(config=guard_config(channels=2), begin=False)
    rig.unit.second_closed = True
    rig.guard.begin()
    return rig


def test_two_channels_that_follow_together_arm() -> None:
    assert two_channels().lit().state == "lit"


def test_a_declared_second_channel_that_is_not_reported_refuses() -> None:
    rig = two_channels()
    rig.unit.second_closed = None
    assert not rig.arm()
    assert "two interlock channels" in rig.events[-1].reason


def test_a_second_channel_that_stays_latches_after_half_a_second() -> None:
    rig = two_channels()
    rig.say(Request.TRIAL)
    rig.run(0.25)
    rig.unit.door_closed = False
    rig.run(0.48)
    assert rig.state == "cold"
    rig.run(0.05)
    assert (rig.state, rig.events[-1].event) == ("tripped", "channels-disagree")


def test_channels_that_differ_for_less_are_a_door_that_moves() -> None:
    rig = two_channels()
    rig.say(Request.TRIAL)
    rig.run(0.25)
    for first, second in ((False, True), (False, False), (True, False), (True, True)):
        rig.unit.door_closed, rig.unit.second_closed = first, second
        rig.run(0.4)
    rig.heartbeat()
    assert rig.say(Request.ARM)


def test_after_a_disagreement_the_reset_input_is_not_enough() -> None:
    rig = two_channels().lit()
    rig.unit.second_closed = False
    rig.run(0.01)
    assert (rig.state, rig.events[-1].event) == ("tripped", "interlock-open")
    rig.run(0.6)
    assert rig.events[-1].event == "channels-disagree"
    rig.unit.second_closed = True
    rig.unit.resets += 1
    rig.run(0.05)
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")
    for closed in (False, True):
        rig.move_door(closed)
        rig.run(0.05)
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")
    assert "opened and closed" in rig.events[-1].reason


def test_over_a_network_the_interlock_counts_for_100_ms_only() -> None:
    for port, lit in (("/dev/ttyS0", True), ("socket://bench:4001", False)):
        rig = Rig(config=guard_config(port=port)).lit()
        state = rig.unit.state

        def slow(rig: Rig = rig, state: object = state) -> object:
            says = state()  # type: ignore[operator]
            rig.clock.advance(0.12)
            rig.heartbeat()
            return says

        rig.unit.state = slow  # type: ignore[method-assign, assignment]
        rig.run(0.01)
        assert (rig.state == "lit") is lit
        assert lit or "read 0.1" in rig.events[-1].reason

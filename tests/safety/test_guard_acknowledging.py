"""After a trip nothing restarts by itself: what acknowledging takes."""

import pytest
from guard_builders import Rig, guard_config
from guard_faults import door, trip_and_acknowledge, tripped

from pitchsweep.safety.guard_messages import Request


def test_a_resumed_run_begins_tripped() -> None:
    rig = Rig(config=guard_config(resumed=True))
    assert rig.state == "tripped"
    rig.run(0.1)
    assert not rig.arm()
    rig.unit.resets += 1
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")
    assert rig.arm() and rig.light()


def test_acknowledging_needs_more_than_a_name() -> None:
    rig = tripped(Rig().lit())
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")
    assert rig.state == "tripped"


@pytest.mark.parametrize("name", ["", "  ", "x" * 101, "A\nB"])
def test_acknowledging_needs_a_name(name: str) -> None:
    rig = tripped(Rig().lit())
    rig.unit.resets += 1
    rig.run(0.01)
    assert not rig.say(Request.ACKNOWLEDGE, name)
    assert rig.state == "tripped"


def test_a_reset_before_the_trip_does_not_count() -> None:
    rig = Rig().lit()
    rig.unit.resets += 1
    rig.run(0.05)
    tripped(rig)
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")


def test_a_reset_right_after_the_trip_counts() -> None:
    rig = Rig().lit()
    rig.say(Request.TRIP, "for the test")
    rig.unit.resets += 1
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")


def test_a_reset_count_that_fell_does_not_count() -> None:
    rig = Rig()
    rig.unit.resets = 7
    rig.run(0.05)
    tripped(rig)
    rig.unit.resets = 0
    rig.run(0.05)
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")


def test_opening_and_closing_the_interlock_after_the_trip_counts() -> None:
    rig = tripped(Rig().lit())
    rig.unit.door_closed = False
    rig.run(0.05)
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")
    rig.unit.door_closed = True
    rig.run(0.05)
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")
    assert "A. Person" in rig.events[-1].reason


def test_the_opening_that_tripped_does_not_count() -> None:
    rig = Rig().lit()
    door(rig)
    rig.run(0.05)
    rig.unit.door_closed = True
    rig.run(0.05)
    assert not rig.say(Request.ACKNOWLEDGE, "A. Person")
    rig.unit.door_closed = False
    rig.run(0.05)
    rig.unit.door_closed = True
    rig.run(0.05)
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")


def test_acknowledging_leads_to_cold_and_light_needs_arming_again() -> None:
    rig = Rig().lit()
    trip_and_acknowledge(rig)
    assert not rig.light()
    assert rig.arm() and rig.light()

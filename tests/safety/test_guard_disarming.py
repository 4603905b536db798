"""A person is asked to the bench: the gate is taken down, and armed anew afterwards."""

import pytest
from guard_builders import Rig

from pitchsweep.safety.guard_messages import Request, read_command


def taken_down() -> Rig:
    rig = Rig().lit()
    assert rig.say(Request.DISARM)
    return rig


def test_disarming_ends_the_light_at_once() -> None:
    rig = taken_down()
    assert rig.state == "cold" and not rig.unit.lit


def test_a_disarmed_gate_lets_people_open_the_door_for_as_long_as_they_like() -> None:
    rig = taken_down()
    rig.move_door(closed=False)
    rig.run(30.0, beats=False)
    rig.move_door(closed=True)
    assert rig.state == "cold" and not rig.unit.lit
    assert rig.unit.asked.count("light") == 1


def test_an_armed_gate_trips_at_the_same_door() -> None:
    rig = Rig().lit()
    assert rig.say(Request.DARK)
    rig.move_door(closed=False)
    rig.run(0.05)
    assert rig.state == "tripped"


def test_a_disarmed_gate_gives_no_light_before_everything_is_shown_anew() -> None:
    rig = taken_down()
    assert not rig.light()
    assert not rig.say(Request.ARM)
    assert rig.arm() and rig.light()


@pytest.mark.parametrize("state", ["cold", "tripped"])
def test_disarming_changes_nothing_where_nothing_is_armed(state: str) -> None:
    rig = Rig()
    if state == "tripped":
        rig.say(Request.TRIP, "a fault")
    assert not rig.say(Request.DISARM)
    assert rig.state == state


def test_the_request_is_read_from_its_line() -> None:
    command = read_command(b'{"command": "disarm", "id": 3}', 1.0)
    assert (command.request, command.number) == (Request.DISARM, 3)

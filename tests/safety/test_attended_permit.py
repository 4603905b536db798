"""The attended permit: hold to run, an hour at most, 1 mW, never unattended."""

from typing import Any

import pytest
from guard_builders import KEY, POWER_MW, UTC_S, Rig, guard_config

from pitchsweep.safety.attended_permit import AttendedPermit
from pitchsweep.safety.guard_messages import Command, Request, read_command
from pitchsweep.safety.permit import (
    NoPermit,
    permit_as_mapping,
    permit_from_mapping,
    power_ceiling_mw,
)


def permit(**changes: Any) -> AttendedPermit:
    fields: dict[str, Any] = {
        "holder": "A. Person",
        "role": "user",
        "eyewear": "OD 2 at 633 nm, worn",
        "valid_from_utc_s": UTC_S - 5.0,
        "valid_until_utc_s": UTC_S + 600.0,
        "key": KEY,
    }
    return AttendedPermit(**{**fields, **changes})


def rig_for(held: AttendedPermit) -> Rig:
    return Rig(config=guard_config(permit=held))


def press(rig: Rig) -> None:
    rig.guard.handle(Command(Request.PRESS, sent_s=rig.clock.now_s))


def test_light_needs_a_pressed_key_and_goes_out_two_seconds_after_the_last() -> None:
    rig = rig_for(permit())
    assert rig.arm()
    assert not rig.light()
    assert rig.state == "ready" and not {"light", "keep"} & set(rig.unit.asked)
    press(rig)
    assert rig.light()
    for _ in range(5):
        rig.run(1.5)
        press(rig)
    assert rig.state == "lit"
    rig.run(1.99)
    assert rig.state == "lit"
    rig.run(0.03)
    assert rig.state == "ready" and not rig.unit.lit
    assert rig.events[-1].event == "dark-requested"
    press(rig)
    assert rig.light()


def test_a_press_that_waited_in_the_pipe_keeps_its_age() -> None:
    command = read_command(b'{"command":"press","sent_s":3.0}', 9.0)
    assert command.sent_s == 3.0
    assert read_command(b'{"command":"press","sent_s":99.0}', 9.0).sent_s == 9.0
    rig = rig_for(permit())
    assert rig.arm()
    rig.guard.handle(Command(Request.PRESS, sent_s=rig.clock.now_s - 2.1))
    assert not rig.light()


def test_all_other_checks_hold_as_for_any_permit() -> None:
    rig = rig_for(permit())
    assert rig.arm()
    press(rig)
    assert rig.light()
    rig.unit.door_closed = False
    rig.run(0.01)
    assert (rig.state, rig.events[-1].event) == ("tripped", "interlock-open")


def test_it_ends_with_its_window() -> None:
    rig = rig_for(permit(valid_until_utc_s=UTC_S + 2.0))
    assert rig.arm()
    press(rig)
    assert rig.light()
    rig.run(1.9)
    assert (rig.state, rig.events[-1].event) == ("tripped", "permit-lapsed")


def test_more_than_1_mw_needs_the_officer() -> None:
    assert permit().power_ceiling_mw == 1.0
    with pytest.raises(ValueError, match="safety officer"):
        permit(power_ceiling_mw=1.5)
    assert permit(power_ceiling_mw=5.0, ceiling_by="B. Officer").power_ceiling_mw == 5.0
    assert power_ceiling_mw(permit(power_ceiling_mw=0.5), 10.0) == 0.5
    assert power_ceiling_mw(permit(), 0.9) == 0.9
    low = rig_for(permit(power_ceiling_mw=POWER_MW / 2))
    assert low.arm()
    press(low)
    assert not low.light()
    assert (low.state, low.events[-1].event) == ("tripped", "power-above-limit")


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"valid_until_utc_s": UTC_S + 3600.0}, "allowed above 0 to 3600"),
        ({"valid_until_utc_s": float("inf")}, "allowed above 0"),
        ({"holder": " "}, "holder"),
        ({"role": ""}, "role"),
        ({"eyewear": ""}, "eyewear"),
        ({"power_ceiling_mw": 0.0}, "power ceiling"),
        ({"power_ceiling_mw": float("nan")}, "power ceiling"),
    ],
)
def test_what_an_attended_permit_must_hold(change: dict[str, Any], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        permit(**change)


def test_it_travels_as_json() -> None:
    for kept in (permit(), permit(key=None), NoPermit()):
        assert permit_from_mapping(permit_as_mapping(kept)) == kept


def test_a_guard_without_a_permit_acknowledges_and_never_arms() -> None:
    from dataclasses import replace

    config = replace(guard_config(resumed=True), permit=NoPermit())
    rig = Rig(config=config)
    rig.unit.resets += 1
    rig.run(0.05)
    assert rig.say(Request.ACKNOWLEDGE, "A. Person")
    assert not rig.arm()
    assert "only acknowledges" in rig.events[-1].reason

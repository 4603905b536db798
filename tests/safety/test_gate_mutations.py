"""A guard from which a check went missing is caught by the tests of the whole one."""

from collections.abc import Callable

import pytest
from guard_builders import Rig

from pitchsweep.safety import guard_checks, guard_world
from pitchsweep.safety.guard_view import Check


def controller_falls_silent(rig: Rig) -> None:
    rig.run(0.4, beats=False)


def permit_ends(rig: Rig) -> None:
    rig.clock.utc_s += 7200.0
    rig.run(0.05)


def first_channel_opens(rig: Rig) -> None:
    rig.unit.door_closed = False
    rig.run(0.05)


def second_channel_opens(rig: Rig) -> None:
    rig.unit.second_closed = False
    rig.run(0.05)


MUTATIONS = {
    "heartbeat check skipped": (
        guard_checks.heartbeat_is_fresh,
        controller_falls_silent,
    ),
    "expiry ignored": (guard_checks.permit_is_valid, permit_ends),
    "first interlock channel ignored": (
        guard_checks.interlock_is_closed,
        first_channel_opens,
    ),
    "second interlock channel ignored": (
        guard_checks.second_channel_is_closed,
        second_channel_opens,
    ),
}
Fault = Callable[[Rig], None]


def light_goes_out(fault: Fault) -> None:
    """The invariant: after ``fault`` it is dark, and stays so until acknowledged."""
    rig = Rig(begin=False)
    rig.unit.second_closed = True
    rig.guard.begin()
    rig.lit()
    rig.run(0.1)
    assert rig.state == "lit"
    fault(rig)
    assert not rig.unit.lit and rig.state == "tripped"
    assert not rig.light() and not rig.unit.lit


def skip(check: Check, patch: pytest.MonkeyPatch) -> None:
    """Takes ``check`` out of every table of the guard."""
    tables = {
        state: tuple(c for c in checks if c is not check)
        for state, checks in guard_checks.CHECKS.items()
    }
    patch.setattr(guard_world, "CHECKS", tables)
    for name in ("BEFORE_LIGHT", "BEFORE_ARMING"):
        kept = tuple(c for c in getattr(guard_checks, name) if c is not check)
        patch.setattr(guard_world, name, kept)


@pytest.mark.parametrize("name", MUTATIONS)
def test_the_whole_guard_goes_dark(name: str) -> None:
    light_goes_out(MUTATIONS[name][1])


@pytest.mark.parametrize("name", MUTATIONS)
def test_the_mutated_guard_is_caught(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    check, fault = MUTATIONS[name]
    skip(check, monkeypatch)
    with pytest.raises(AssertionError):
        light_goes_out(fault)

"""Hold to run: presses from a script and from a real terminal, time by hand."""

import os
import pty
import termios
from collections.abc import Iterator
from dataclasses import dataclass, field

import pytest
from guard_builders import KEY, UTC_S, Rig, guard_config

from pitchsweep.acquire.held_key import TerminalKeys
from pitchsweep.acquire.hold_to_run import HOLD, LATE_S, Held, HoldWorld, hold_to_run
from pitchsweep.acquire.stop_signals import StopRequested
from pitchsweep.safety.attended_permit import HOLD_S, AttendedPermit
from pitchsweep.safety.guard_messages import Command, Request
from pitchsweep.safety.safety_errors import GateRefused, GateTripped

Look = tuple[float, str]
"""Seconds until this look, and what had been pressed by then."""


@dataclass
class ScriptedKeys:
    """Plays looks on the rig's clock, the guard ticking meanwhile; then leaves."""

    rig: Rig
    looks: list[Look]
    dropped: int = 0

    def read(self, wait_s: float) -> str:
        passes_s, pressed = self.looks.pop(0) if self.looks else (0.05, "q")
        self.rig.run(passes_s)
        return pressed

    def drop(self) -> None:
        self.dropped += 1


@dataclass
class RigLight:
    """The guard of a rig as the loop sees it."""

    rig: Rig
    still_count: int = 0

    @property
    def lit(self) -> bool:
        return self.rig.state == "lit"

    def press(self) -> None:
        now_s = self.rig.clock.now_s
        self.rig.guard.handle(Command(Request.PRESS, sent_s=now_s))

    def light_on(self) -> None:
        if not self.rig.light():
            raise GateRefused(self.rig.events[-1].reason, "x")

    def still(self) -> None:
        self.still_count += 1
        self.rig.beat()

    def dark(self) -> None:
        self.rig.say(Request.DARK)

    def check(self) -> None:
        if self.rig.state == "tripped":
            raise GateTripped("x", self.rig.events[-1].reason)


@dataclass
class Bench:
    """A rig under an attended permit, armed, and what the loop was told to show."""

    rig: Rig = field(default_factory=lambda: Rig(config=guard_config(permit=permit())))
    shown: list[tuple[float, bool, str]] = field(default_factory=list)
    up_at_s: float = float("inf")
    stop: str = ""

    def hold(self, *looks: Look) -> Held:
        keys = ScriptedKeys(self.rig, list(looks))
        world = HoldWorld(
            keys=keys,
            now=lambda: self.rig.clock.now_s,
            look=lambda lit, why: self.shown.append((self.now_s, lit, why)),
            time_is_up=lambda: self.now_s > self.up_at_s,
            check_stop=self.check_stop,
        )
        held = hold_to_run(RigLight(self.rig), world, "rnq")
        assert keys.dropped == 1
        return held

    @property
    def now_s(self) -> float:
        return self.rig.clock.now_s

    def check_stop(self) -> None:
        if self.stop:
            raise StopRequested(self.stop)

    def lit_at(self, place: int) -> bool:
        return self.shown[place][1]


def permit() -> AttendedPermit:
    return AttendedPermit("ada", "technician", "OD 2", UTC_S - 1, UTC_S + 600, key=KEY)


@pytest.fixture
def bench() -> Bench:
    made = Bench()
    assert made.rig.arm()
    return made


def pressed(seconds: float) -> list[Look]:
    """A key held for so long, repeating twenty times a second."""
    return [(0.05, HOLD)] * round(seconds / 0.05)


def let_go(seconds: float) -> list[Look]:
    return [(0.05, "")] * round(seconds / 0.05)


def test_held_is_light_and_let_go_is_dark_within_two_seconds(bench: Bench) -> None:
    held = bench.hold(*pressed(4.0), *let_go(HOLD_S - 0.1))
    assert all(lit for _, lit, _ in bench.shown[:-1])
    assert held.key == "q" and held.lit_s == pytest.approx(5.9, abs=0.15)
    assert not bench.rig.unit.lit and bench.rig.state == "ready"
    bench.shown.clear()
    bench.hold(*pressed(1.0), *let_go(HOLD_S + 0.1))
    assert bench.lit_at(19) and not bench.lit_at(-2)
    assert bench.rig.events[-1].event == "dark-requested"


def test_pressed_again_lights_again_without_any_acknowledging(bench: Bench) -> None:
    bench.hold(*pressed(0.5), *let_go(2.5), *pressed(0.5))
    lit = [lit for _, lit, _ in bench.shown]
    assert lit[5] and not lit[55] and lit[62]
    assert bench.rig.state == "ready"


def test_presses_of_unknown_age_do_not_count(bench: Bench) -> None:
    """A controller that was held up finds a full buffer, and the hand may be gone."""
    bench.hold((LATE_S + 0.1, HOLD * 100), *let_go(0.2))
    assert not any(lit for _, lit, _ in bench.shown)
    bench.shown.clear()
    bench.hold(*pressed(0.2), (1.9, HOLD * 60), (0.2, ""))
    assert not bench.lit_at(-2)


def test_other_keys_give_no_light_and_the_end_keys_end_it_dark(bench: Bench) -> None:
    for key in "rnqR":
        bench.shown.clear()
        held = bench.hold((0.05, "x\n\x1b[A"), *pressed(0.3), (0.05, f"  {key}"))
        assert held.key == key.lower() and not bench.lit_at(0)
        assert not bench.rig.unit.lit


def test_it_ends_when_time_is_up_and_when_it_is_told_to_stop(bench: Bench) -> None:
    bench.up_at_s = bench.now_s + 1.0
    assert bench.hold(*pressed(5.0)).key == ""
    assert not bench.rig.unit.lit
    bench.stop = "SIGTERM"
    with pytest.raises(StopRequested):
        bench.hold(*pressed(5.0))
    assert not bench.rig.unit.lit


def test_a_trip_ends_it_and_a_refusal_is_shown(bench: Bench) -> None:
    bench.rig.unit.door_closed = False
    with pytest.raises(GateTripped, match="interlock is open"):
        bench.hold(*pressed(1.0))
    assert not bench.rig.unit.lit and bench.rig.state == "tripped"


@pytest.fixture
def terminal() -> Iterator[tuple[int, int]]:
    """(the person's end, the program's end) of a real terminal."""
    person, program = pty.openpty()
    yield person, program
    for handle in (person, program):
        try:
            os.close(handle)
        except OSError:
            pass


def echoes(handle: int) -> bool:
    return bool(termios.tcgetattr(handle)[3] & termios.ECHO)


def test_a_terminal_gives_presses_without_enter_and_is_put_back(
    terminal: tuple[int, int],
) -> None:
    person, program = terminal
    assert echoes(program)
    with TerminalKeys(program) as keys:
        assert not echoes(program)
        assert keys.read(0.0) == ""
        os.write(person, b"  ")
        assert keys.read(5.0) == "  "
        os.write(person, b" r")
        assert keys.read(5.0) == " r"
        # Ctrl-C is still a signal, not a key.
        assert termios.tcgetattr(program)[3] & termios.ISIG
    assert echoes(program)


def test_what_was_typed_before_is_dropped(terminal: tuple[int, int]) -> None:
    person, program = terminal
    with TerminalKeys(program) as keys:
        os.write(person, b"   ")
        keys.drop()
        assert keys.read(0.05) == ""


def test_a_terminal_that_is_gone_holds_no_key(terminal: tuple[int, int]) -> None:
    person, program = terminal
    with TerminalKeys(program) as keys:
        os.close(person)
        assert keys.read(1.0) == "q"

"""Light while a person holds a key down: the loop, its clock handed in. Acts (gate).

A held key repeats; every look that finds a press tells the guard so, and the guard
makes it dark two seconds after the last. A look that came late drops its presses, for
nobody knows when they were made. Letting go is no trip: pressing again lights again.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

from pitchsweep.acquire.held_key import Keys
from pitchsweep.safety.safety_errors import GateRefused

LOOK_S = 0.05
LATE_S = 0.5
"""A look this long after the one before does not count its presses."""
STAGE_EVERY_S = 0.5
HOLD = " "


class HeldLight(Protocol):
    """The gate of an attended permit: told of presses, asked for light."""

    @property
    def lit(self) -> bool: ...

    def press(self) -> None: ...

    def light_on(self) -> None: ...

    def still(self) -> None: ...

    def dark(self) -> None: ...

    def check(self) -> None: ...


@dataclass(frozen=True)
class Held:
    """How a hold ended: the key that ended it (empty: time is up), seconds of light."""

    key: str
    lit_s: float


@dataclass(frozen=True)
class HoldWorld:
    """What a hold works with: ``now`` in seconds, ``look`` is told every look.

    ``look`` gets whether there is light and a refusal in words (mostly empty);
    ``time_is_up`` says that the permit's window ends.
    """

    keys: Keys
    now: Callable[[], float]
    look: Callable[[bool, str], None]
    time_is_up: Callable[[], bool]
    check_stop: Callable[[], None]


def hold_to_run(light: HeldLight, world: HoldWorld, ends: str) -> Held:
    """Light while the space bar is held, until one of the keys ``ends`` is pressed.

    It is dark when this returns. Raises GateTripped, and what ``check_stop`` raises.
    """
    lit_s, seen_s, told_s = 0.0, world.now(), float("-inf")
    world.keys.drop()
    try:
        while True:
            typed = world.keys.read(LOOK_S)
            now_s = world.now()
            since_s, seen_s = now_s - seen_s, now_s
            world.check_stop()
            light.check()
            was_lit, refused = light.lit, ""
            if was_lit:
                lit_s += since_s
                if now_s - told_s >= STAGE_EVERY_S:
                    light.still()
                    told_s = now_s
            if HOLD in typed and since_s <= LATE_S:
                light.press()
                if not was_lit:
                    refused = _light(light)
                    told_s = world.now()
            world.look(light.lit, refused)
            ended = next((key for key in typed.lower() if key in ends), None)
            if ended is not None or world.time_is_up():
                return Held(ended or "", lit_s)
    finally:
        light.dark()


def _light(light: HeldLight) -> str:
    try:
        light.light_on()
    except GateRefused as error:
        return error.what
    return ""

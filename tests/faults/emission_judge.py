"""What the unit's log says of a fault: how long to dark, and that it stayed dark."""

import json
import os
import signal
import subprocess
import sys
import time
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from emulated_unit import EmulatedUnit
from faults.emission_scenes import CLOCK, HEARTBEAT_S, KEEP_ALIVE_S, told
from faults.emission_world import Scene, config_for, lit
from guard_builders import KEY, POWER_MW

from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety import guard_client
from pitchsweep.safety.guard_client import GuardClient
from pitchsweep.safety.guard_config import config_as_mapping
from pitchsweep.safety.safety_errors import SafetyError

HERE = Path(__file__).parent
CONTROLLER = HERE.parent / "lighting_controller.py"
CLOCK_GUARD = HERE / "guard_with_set_clock.py"
STAYS_DARK_S = 0.3

CONTROLLER_FAULTS = {
    "controller killed": (KEEP_ALIVE_S, (signal.SIGKILL, None)),
    "controller stopped": (HEARTBEAT_S + 0.25, (signal.SIGSTOP, None)),
    "both killed": (KEEP_ALIVE_S, (signal.SIGKILL, signal.SIGKILL)),
    "both stopped (suspended)": (KEEP_ALIVE_S, (signal.SIGSTOP, signal.SIGSTOP)),
}


@dataclass(frozen=True)
class Verdict:
    """What the unit's log says: seconds to dark, and whether light came back."""

    name: str
    dark_s: float
    bound_s: float
    stayed_dark: bool
    refused: bool

    @property
    def holds(self) -> bool:
        """Dark within the bound, for good, and nothing went on by itself."""
        return self.dark_s <= self.bound_s and self.stayed_dark and self.refused


class DarkAlready(Exception):
    """The light was out before the fault came: a computer too busy to hold it."""


MOST_TRIES = 5


def judge(scene: Scene, folder: Path, wait_s: float) -> Verdict:
    """Plays ``scene`` ``wait_s`` after the light came on; the log's verdict.

    Where the light went out by itself before that, the scene is played again.
    """
    for number in range(MOST_TRIES):
        place = folder / f"try-{number}"
        place.mkdir()
        with suppress(DarkAlready, SafetyError):
            return _play(scene, place, wait_s)
    raise AssertionError(f"'{scene.name}': the light could not be held, {MOST_TRIES} x")


def _play(scene: Scene, folder: Path, wait_s: float) -> Verdict:
    with lit(scene, folder) as world:
        time.sleep(wait_s)
        began_s = scene.act(world)
        _await_dark(world.unit, began_s + scene.bound_s + 2.0)
        refused = _is_refused(world.guard)
        time.sleep(STAYS_DARK_S)
        return verdict(scene, world.unit, began_s, refused)


def verdict(scene: Scene, unit: EmulatedUnit, began_s: float, refused: bool) -> Verdict:
    """From the rows of the log alone: the first dark after the fault, and what came."""
    rows = unit.rows("light")
    before = [value for at, value, _ in rows if at < began_s]
    if before[-1:] != ["on"]:
        raise DarkAlready
    after = [(at, value) for at, value, _ in rows if at >= began_s]
    off = [at for at, value in after if value == "off"]
    dark_s = off[0] - began_s if off else float("inf")
    return Verdict(
        scene.name,
        dark_s,
        scene.bound_s,
        stayed_dark=bool(rows) and rows[-1][1] == "off" and len(off) == 1,
        refused=refused,
    )


def _await_dark(unit: EmulatedUnit, until_s: float) -> None:
    while unit.rows("light")[-1][1] == "on" and time.monotonic() < until_s:
        time.sleep(0.005)


def _is_refused(guard: GuardClient) -> bool:
    """Whether light is refused now, as it is to a run that would just go on."""
    try:
        guard.light_on(1, 0.0, 0.0, POWER_MW)
    except (SafetyError, DriverError):
        return True
    return False


def judge_clock(folder: Path, wait_s: float) -> Verdict:
    """A guard whose clock is set back by an hour while it runs."""
    usual = guard_client.GUARD_COMMAND
    (folder / "clock").write_text("0")
    guard_client.GUARD_COMMAND = [
        sys.executable,
        str(CLOCK_GUARD),
        str(folder / "clock"),
    ]
    try:
        return judge(CLOCK, folder, wait_s)
    finally:
        guard_client.GUARD_COMMAND = usual


def judge_controller(name: str, folder: Path, wait_s: float) -> Verdict:
    """A controller in a process of its own that is killed or stopped while lit.

    Whoever was stopped goes on later, and must not light again.
    """
    for number in range(MOST_TRIES):
        place = folder / f"try-{number}"
        place.mkdir()
        with suppress(DarkAlready):
            return _play_controller(name, place, wait_s)
    raise AssertionError(f"'{name}': the light could not be held, {MOST_TRIES} times")


def _play_controller(name: str, folder: Path, wait_s: float) -> Verdict:
    bound_s, (to_controller, to_guard) = CONTROLLER_FAULTS[name]
    scene = Scene(name, bound_s, lambda world: 0.0)
    unit = EmulatedUnit(folder / "unit.log", KEY)
    controller, guard_pid = lighting_controller(unit, scene)
    try:
        time.sleep(wait_s)
        began_s = time.monotonic()
        if to_guard is not None:
            os.kill(guard_pid, to_guard)
        os.kill(controller.pid, to_controller)
        _await_dark(unit, began_s + bound_s + 2.0)
        for pid in (guard_pid, controller.pid):
            with suppress(ProcessLookupError):
                os.kill(pid, signal.SIGCONT)
        time.sleep(STAYS_DARK_S)
        return verdict(scene, unit, began_s, refused=True)
    finally:
        _finish(controller)
        unit.end()


def lighting_controller(
    unit: EmulatedUnit, scene: Scene
) -> "tuple[subprocess.Popen[bytes], int]":
    """A controller that has lit the unit, and the process number of its guard."""
    controller = subprocess.Popen(
        [sys.executable, str(CONTROLLER)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        start_new_session=True,
    )
    assert controller.stdin is not None and controller.stdout is not None
    message = json.dumps(config_as_mapping(config_for(unit, scene, unit.port)))
    controller.stdin.write(message.encode() + b"\n")
    controller.stdin.flush()
    try:
        for asked in ("open", "close"):
            if controller.stdout.readline().decode().strip() != asked:
                raise DarkAlready
            unit.tell(asked)
        return controller, int(controller.stdout.readline() or b"x")
    except (ValueError, DarkAlready):
        _finish(controller)
        unit.end()
        raise DarkAlready from None


def _finish(controller: "subprocess.Popen[bytes]") -> None:
    controller.kill()
    controller.wait()
    for pipe in (controller.stdin, controller.stdout):
        assert pipe is not None
        pipe.close()


def judge_stuck_shutter(folder: Path, word: str) -> tuple[str, bool]:
    """The light outlasts 'dark': what the gate says, and whether it then refuses."""
    with lit(Scene("shutter stuck", 0.0, lambda w: 0.0), folder) as world:
        told(world, word, "shutter")
        world.guard.dark()
        world.guard.tripped.wait(5.0)
        return world.guard.events[-1].event, _is_refused(world.guard)

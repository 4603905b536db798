"""Faults while the light is on, each in a world of three processes.

Unit, guard and (where it is killed) controller are processes of their own. What counts
is the unit's log: when the light went out, and that it stayed out.
"""

import json
import os
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parent.parent))

from emulated_unit import EmulatedUnit  # noqa: E402
from guard_builders import KEY, POWER_MW, guard_config  # noqa: E402

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping  # noqa: E402
from pitchsweep.drivers.driver_errors import DriverError  # noqa: E402
from pitchsweep.safety import guard_client  # noqa: E402
from pitchsweep.safety.file_watch import file_sha256  # noqa: E402
from pitchsweep.safety.guard_client import GuardClient, start_guard  # noqa: E402
from pitchsweep.safety.guard_config import (  # noqa: E402
    GuardConfig,
    config_as_mapping,
)
from pitchsweep.safety.running_guards import find_guards, tell_dark  # noqa: E402
from pitchsweep.safety.safety_errors import SafetyError  # noqa: E402
from pitchsweep.safety.stage_report import StageReport  # noqa: E402

HERE = Path(__file__).parent
CONTROLLER = HERE.parent / "lighting_controller.py"
CLOCK_GUARD = HERE / "guard_with_set_clock.py"

KEEP_ALIVE_S = 0.25
"""The unit's own drop-out, whatever else fails."""
HEARTBEAT_S = 0.3 + 0.05
"""Age at which a heartbeat is stale, and how often one is sent."""
FILES_S = 0.25 + 0.05
"""How often watched files are looked at."""
STAYS_DARK_S = 0.3


@dataclass
class Lit:
    """A lit unit with its guard; ``wire`` is the line between them, if it is ours."""

    unit: EmulatedUnit
    guard: GuardClient
    folder: Path
    config: GuardConfig
    wire: "Wire | None" = None


@dataclass(frozen=True)
class Scene:
    """A fault: ``act`` brings it about and gives the moment it began."""

    name: str
    bound_s: float
    act: Callable[[Lit], float]
    line: str = "keep-alive"
    channels: int = 1
    settings: dict[str, Any] = field(default_factory=dict)


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


class Wire:
    """A socket between guard and unit that can be cut, closed or spoilt."""

    def __init__(self, url: str) -> None:
        host, _, port = url.removeprefix("socket://").partition(":")
        self.cut = threading.Event()
        self._far = socket.create_connection((host, int(port)))
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.url = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        self._near: socket.socket | None = None
        threading.Thread(target=self._serve, daemon=True).start()

    def garbage(self) -> None:
        """Bytes that no unit ever says."""
        assert self._near is not None
        self._near.sendall(b"\x00\xff~~nonsense~~\n")

    def close(self) -> None:
        """Both ends are gone."""
        for end in (self._near, self._far, self._listener):
            if end is not None:
                with suppress(OSError):
                    end.shutdown(socket.SHUT_RDWR)
                end.close()

    def _serve(self) -> None:
        self._near, _ = self._listener.accept()
        threading.Thread(
            target=self._carry, args=(self._near, self._far), daemon=True
        ).start()
        self._carry(self._far, self._near)

    def _carry(self, source: socket.socket, sink: socket.socket) -> None:
        with suppress(OSError):
            while data := source.recv(4096):
                if not self.cut.is_set():
                    sink.sendall(data)


def config_for(unit: EmulatedUnit, scene: Scene, port: str) -> GuardConfig:
    """The guard's configuration for ``scene``, with the unit at ``port``."""
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    job = unit.log.parent / "job.yaml"
    job.write_text("power_mw: 0.9\n")
    return guard_config(
        port=port,
        dialect=dialect,
        ledger=unit.log.parent / "ledger.jsonl",
        utc_s=time.time(),
        line="pulses" if scene.line == "pulses" else "keep-alive",
        channels=scene.channels,
        watched={str(job): file_sha256(job)},
        **scene.settings,
    )


@contextmanager
def lit(scene: Scene, folder: Path) -> Iterator[Lit]:
    """The light is on at step 1 inside the block; everything ends with it."""
    unit = EmulatedUnit(
        folder / "unit.log", KEY, line=scene.line, channels=scene.channels
    )
    wire = Wire(unit.port) if scene.line == "socket" else None
    config = config_for(unit, scene, unit.port if wire is None else wire.url)
    try:
        with start_guard(config) as guard:
            guard.arm(unit)
            guard.light_on(1, 0.0, 0.0, POWER_MW)
            yield Lit(unit, guard, folder, config, wire)
    finally:
        if wire is not None:
            wire.close()
        unit.end()


def judge(scene: Scene, folder: Path, wait_s: float) -> Verdict:
    """Plays ``scene`` ``wait_s`` after the light came on; the log's verdict."""
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


def _now() -> float:
    return time.monotonic()


def _told(world: Lit, word: str, what: str) -> float:
    before = len(world.unit.rows(what))
    world.unit.tell(word)
    while len(world.unit.rows(what)) == before:
        time.sleep(0.001)
    return world.unit.rows(what)[-1][0]


def _signal_guard(number: signal.Signals) -> Callable[[Lit], float]:
    def act(world: Lit) -> float:
        began_s = _now()
        os.kill(world.guard.pid, number)
        if number is signal.SIGSTOP:
            time.sleep(0.6)
            os.kill(world.guard.pid, signal.SIGCONT)
            world.guard.tripped.wait(5.0)
        return began_s

    return act


def _says(**changes: Any) -> Callable[[Lit], float]:
    """The controller reports a stage or a power that is not permitted."""

    def act(world: Lit) -> float:
        fields: dict[str, Any] = {
            "step": 1,
            "commanded_deg": 0.0,
            "readback_deg": 0.0,
            "read_at_s": _now(),
            "turning": False,
            "power_mw": POWER_MW,
        }
        world.guard.report_stage(StageReport(**{**fields, **changes}))
        return _now()

    return act


def _late_heartbeats(world: Lit) -> float:
    world.guard._now = lambda: time.monotonic() - 0.5
    return _now()


def _no_heartbeats(world: Lit) -> float:
    world.guard._ending.set()
    return _now()


def _cable_pulled(world: Lit) -> float:
    assert world.wire is not None
    world.wire.cut.set()
    return _now()


def _garbage(world: Lit) -> float:
    assert world.wire is not None
    world.wire.garbage()
    return _now()


def _port_closed(world: Lit) -> float:
    assert world.wire is not None
    began_s = _now()
    world.wire.close()
    return began_s


def _another_program(world: Lit) -> float:
    """Another program takes the port although it is locked, talks and listens."""
    began_s = _now()
    thief = os.open(world.unit.port, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
    try:
        while _now() < began_s + 0.5:
            os.write(thief, b"hello\n")
            time.sleep(0.02)
            with suppress(BlockingIOError):
                os.read(thief, 4096)
    finally:
        os.close(thief)
    return began_s


def _settings_edited(world: Lit) -> float:
    began_s = _now()
    (world.folder / "job.yaml").write_text("power_mw: 9.0\n")
    return began_s


def _ledger_lost(world: Lit) -> float:
    """The next step's entry cannot be written."""
    ledger = world.folder / "ledger.jsonl"
    ledger.rename(world.folder / "elsewhere")
    ledger.mkdir()
    world.guard.dark()
    began_s = _now()
    with suppress(SafetyError):
        world.guard.light_on(2, 10.0, 10.0, POWER_MW)
    return began_s


def _clock_set_back(world: Lit) -> float:
    (world.folder / "clock").write_text("3600")
    return _now()


def _told_dark(world: Lit) -> float:
    began_s = _now()
    for guard in find_guards():
        if guard.pid == world.guard.pid:
            tell_dark(guard)
    return began_s


def _permit_ends(world: Lit) -> float:
    ends_utc_s = world.config.permit.valid_until_utc_s  # type: ignore[union-attr]
    return _now() + ends_utc_s - time.time()


SCENES = (
    Scene("guard killed", KEEP_ALIVE_S, _signal_guard(signal.SIGKILL)),
    Scene("guard stopped", KEEP_ALIVE_S, _signal_guard(signal.SIGSTOP)),
    Scene("guard told to end", KEEP_ALIVE_S, _signal_guard(signal.SIGTERM)),
    Scene("door opened", KEEP_ALIVE_S, lambda w: _told(w, "open", "door")),
    Scene(
        "one channel only",
        KEEP_ALIVE_S,
        lambda w: _told(w, "open-2", "door"),
        channels=2,
    ),
    Scene("heartbeat missing", HEARTBEAT_S + 0.25, _no_heartbeats),
    Scene("heartbeat stale", HEARTBEAT_S, _late_heartbeats),
    Scene("stage elsewhere", HEARTBEAT_S, _says(readback_deg=0.3)),
    Scene("stage turns", HEARTBEAT_S, _says(turning=True)),
    Scene("stage read long ago", HEARTBEAT_S, _says(read_at_s=0.0)),
    Scene("other step", HEARTBEAT_S, _says(step=2)),
    Scene("power above limit", HEARTBEAT_S, _says(power_mw=POWER_MW * 1.01)),
    Scene("cable pulled", KEEP_ALIVE_S, _cable_pulled, line="socket"),
    Scene("garbage on the line", KEEP_ALIVE_S, _garbage, line="socket"),
    Scene("port closed", KEEP_ALIVE_S, _port_closed, line="socket"),
    Scene("port taken by another", KEEP_ALIVE_S, _another_program),
    Scene("settings edited", FILES_S + 0.2, _settings_edited),
    Scene("ledger not writable", KEEP_ALIVE_S, _ledger_lost),
    Scene("told dark", KEEP_ALIVE_S, _told_dark),
    Scene("permit ends", KEEP_ALIVE_S, _permit_ends, settings={"valid_for_s": 2.5}),
    Scene(
        "door opened, pulses",
        KEEP_ALIVE_S,
        lambda w: _told(w, "open", "door"),
        line="pulses",
    ),
    Scene(
        "guard killed, pulses",
        KEEP_ALIVE_S,
        _signal_guard(signal.SIGKILL),
        line="pulses",
    ),
    Scene(
        "guard stopped, pulses",
        KEEP_ALIVE_S,
        _signal_guard(signal.SIGSTOP),
        line="pulses",
    ),
)
CLOCK = Scene("clock set back", KEEP_ALIVE_S, _clock_set_back)


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


CONTROLLER_FAULTS = {
    "controller killed": (KEEP_ALIVE_S, (signal.SIGKILL, None)),
    "controller stopped": (HEARTBEAT_S + 0.25, (signal.SIGSTOP, None)),
    "both killed": (KEEP_ALIVE_S, (signal.SIGKILL, signal.SIGKILL)),
    "both stopped (suspended)": (KEEP_ALIVE_S, (signal.SIGSTOP, signal.SIGSTOP)),
}


def judge_controller(name: str, folder: Path, wait_s: float) -> Verdict:
    """A controller in a process of its own that is killed or stopped while lit.

    Whoever was stopped goes on later, and must not light again.
    """
    bound_s, (to_controller, to_guard) = CONTROLLER_FAULTS[name]
    scene = Scene(name, bound_s, lambda world: 0.0)
    unit = EmulatedUnit(folder / "unit.log", KEY)
    controller, guard_pid = lighting_controller(unit, scene)
    try:
        time.sleep(wait_s)
        began_s = _now()
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
    for asked in ("open", "close"):
        assert controller.stdout.readline().decode().strip() == asked
        unit.tell(asked)
    return controller, int(controller.stdout.readline())


def _finish(controller: "subprocess.Popen[bytes]") -> None:
    controller.kill()
    controller.wait()
    for pipe in (controller.stdin, controller.stdout):
        assert pipe is not None
        pipe.close()


def judge_stuck_shutter(folder: Path, word: str) -> tuple[str, bool]:
    """The light outlasts 'dark': what the gate says, and whether it then refuses."""
    with lit(Scene("shutter stuck", 0.0, lambda w: 0.0), folder) as world:
        _told(world, word, "shutter")
        world.guard.dark()
        world.guard.tripped.wait(5.0)
        return world.guard.events[-1].event, _is_refused(world.guard)

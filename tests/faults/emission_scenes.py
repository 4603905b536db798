"""Faults while the light is on: each brings itself about and says when it began.

Bounds: the unit's own drop-out whatever else fails, and the age at which a heartbeat is
stale or a watched file has been looked at.
"""

import os
import signal
import time
from collections.abc import Callable
from contextlib import suppress
from typing import Any

from faults.emission_world import Lit, Scene
from guard_builders import POWER_MW

from pitchsweep.safety.running_guards import find_guards, tell_dark
from pitchsweep.safety.safety_errors import SafetyError
from pitchsweep.safety.stage_report import StageReport

KEEP_ALIVE_S = 0.25
"""The unit's own drop-out."""
HEARTBEAT_S = 0.3 + 0.05
"""Age at which a heartbeat is stale, and how often one is sent."""
FILES_S = 0.25 + 0.05
"""How often watched files are looked at."""
CLOCKS_AGREE_S = 0.002
"""How well the two clocks can be compared here."""


def _now() -> float:
    return time.monotonic()


def told(world: Lit, word: str, what: str) -> float:
    """When the log says that the person at the bench did ``word``."""
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
        began_s = _now()
        world.guard.report_stage(StageReport(**{**fields, **changes}))
        return began_s

    return act


def _late_heartbeats(world: Lit) -> float:
    began_s = _now()
    world.guard._now = lambda: time.monotonic() - 0.5
    return began_s


def _no_heartbeats(world: Lit) -> float:
    began_s = _now()
    world.guard._ending.set()
    return began_s


def _cable_pulled(world: Lit) -> float:
    assert world.wire is not None
    began_s = _now()
    world.wire.cut.set()
    return began_s


def _garbage(world: Lit) -> float:
    assert world.wire is not None
    began_s = _now()
    world.wire.garbage()
    return began_s


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
            with suppress(BlockingIOError):
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
    with suppress(SafetyError):
        world.guard.light_on(2, 10.0, 10.0, POWER_MW)
    lit_s = [at for at, value, _ in world.unit.rows("light") if value == "on"]
    return lit_s[-1] + 1e-6


def _clock_set_back(world: Lit) -> float:
    began_s = _now()
    (world.folder.parent / "clock").write_text("3600")
    return began_s


def _told_dark(world: Lit) -> float:
    began_s = _now()
    for guard in find_guards():
        if guard.pid == world.guard.pid:
            tell_dark(guard)
    return began_s


def _permit_ends(world: Lit) -> float:
    ends_utc_s = world.config.permit.valid_until_utc_s  # type: ignore[union-attr]
    return _now() + ends_utc_s - time.time() - CLOCKS_AGREE_S


SCENES = (
    Scene("guard killed", KEEP_ALIVE_S, _signal_guard(signal.SIGKILL)),
    Scene("guard stopped", KEEP_ALIVE_S, _signal_guard(signal.SIGSTOP)),
    Scene("guard told to end", KEEP_ALIVE_S, _signal_guard(signal.SIGTERM)),
    Scene("door opened", KEEP_ALIVE_S, lambda w: told(w, "open", "door")),
    Scene(
        "one channel only",
        KEEP_ALIVE_S,
        lambda w: told(w, "open-2", "door"),
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
        lambda w: told(w, "open", "door"),
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

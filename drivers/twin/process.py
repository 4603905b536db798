"""The twin's process: starts everything, watches its controller, ends in the dark.

The first line on stdin is the configuration; one line on stdout says where the ports
are. After that stdin is only watched: the line ``end`` is the orderly end, its closing
means that the controller is gone.
"""

import json
import os
import select
import signal
import sys
import threading
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.kept_state import write_durably
from pitchsweep.drivers.twin.lot_truths import draw_lot, truths_said
from pitchsweep.drivers.twin.one_at_a_time import (
    FolderInUse,
    hold_folder,
    successor_waits,
)
from pitchsweep.drivers.twin.pty_port import PtyPort
from pitchsweep.drivers.twin.relay import TimeOutRelay
from pitchsweep.drivers.twin.relay_port import RelayPort
from pitchsweep.drivers.twin.stage_firmware import StageFirmware
from pitchsweep.drivers.twin.truth import Truth, draw_truth, twin_settings
from pitchsweep.drivers.twin.unit_firmware import RelayBoxFirmware, UnitFirmware
from pitchsweep.drivers.twin.unit_log import UnitLog
from pitchsweep.drivers.twin.world import World
from pitchsweep.drivers.twin.world_server import WorldServer

STAYS_AFTER_DARK_S = 5.0
POLL_S = 0.02
SWITCH_INTERVAL_S = 0.0005
"""Threads take turns this often, so that rendering does not hold up the unit."""


@dataclass(frozen=True)
class TwinConfiguration:
    """What the launcher says on the first line."""

    directory: Path
    bench: Bench
    part: Part
    lot: tuple[Part, ...]
    seed: int
    key: bytes
    token: str
    faults: FaultSchedule

    @classmethod
    def from_line(cls, line: str) -> "TwinConfiguration":
        """The configuration that ``line`` (JSON) holds; ValueError if it is wrong."""
        values = json.loads(line)
        return cls(
            directory=Path(values["directory"]),
            bench=Bench.model_validate_json(json.dumps(values["bench"])),
            part=Part.model_validate_json(json.dumps(values["part"])),
            lot=tuple(
                Part.model_validate_json(json.dumps(part)) for part in values["lot"]
            ),
            seed=int(values["seed"]),
            key=bytes.fromhex(values["key"]),
            token=str(values["token"]),
            faults=FaultSchedule.from_json(values["faults"]),
        )


def main() -> int:
    """Runs the twin to its end; returns the exit code."""
    sys.setswitchinterval(SWITCH_INTERVAL_S)
    asked_to_end = threading.Event()
    for number in (signal.SIGTERM, signal.SIGINT, signal.SIGHUP):
        signal.signal(number, lambda *_: asked_to_end.set())
    try:
        configuration = TwinConfiguration.from_line(sys.stdin.readline())
        hold_folder(configuration.directory)
    except (FolderInUse, ValueError, KeyError, OSError) as error:
        _say({"refused": str(error)})
        return 2
    _run(configuration, asked_to_end)
    return 0


def _run(configuration: TwinConfiguration, asked_to_end: threading.Event) -> None:
    bench, directory = configuration.bench, configuration.directory
    log = UnitLog(directory / "unit.log")
    log.write("unit", "start", f"process {os.getpid()}")
    unit = EmissionUnit(
        log,
        keep_alive_s=bench.emission.keep_alive_ms * 1e-3,
        has_shutter=bench.emission.switches == "head-shutter",
        channels=bench.emission.interlock_channels,
    )
    truth, lot = _truths(configuration)
    said = truths_said(truth, configuration.lot, lot)
    truth_text = json.dumps(said, indent=1) + "\n"
    write_durably(directory / "twin_truth.json", truth_text.encode("utf-8"))
    settings = twin_settings(bench)
    faults = configuration.faults.and_also(settings.faults)
    world = World(
        truth,
        bench,
        unit,
        faults=faults,
        state_path=directory / "state.json",
        lot=lot,
    )
    stage_port = PtyPort(
        StageFirmware(world, identity="twin-stage", faults=faults), name="stage"
    )
    unit_port = _unit_port(configuration, unit)
    server = WorldServer(world, token=configuration.token, directory=directory)
    _say(
        {
            "stage_port": stage_port.path,
            "unit_port": unit_port.path,
            "address": list(server.address),
        }
    )
    why = _watch_controller(unit, directory, asked_to_end)
    unit.dark(why)
    server.close()
    stage_port.close()
    unit_port.close()
    world.save()
    log.write("unit", "end", why)
    log.close()


def _truths(configuration: TwinConfiguration) -> tuple[Truth, tuple[Truth, ...]]:
    """The truth of the part that the run is about, and of each of a lot as seated."""
    bench, part, seed = configuration.bench, configuration.part, configuration.seed
    if not configuration.lot:
        return draw_truth(bench, part, seed), ()
    truths = draw_lot(bench, part, configuration.lot, seed)
    return truths[configuration.lot.index(part)], truths


def _unit_port(
    configuration: TwinConfiguration, unit: EmissionUnit
) -> PtyPort | RelayPort:
    emission = configuration.bench.emission
    identity, faults = emission.unit_identity, configuration.faults
    if emission.line == "pulses":
        box = RelayBoxFirmware(identity, configuration.key, faults)
        return RelayPort(TimeOutRelay(unit), box)
    firmware = UnitFirmware(
        unit, identity=identity, key=configuration.key, faults=faults
    )
    return PtyPort(firmware, name="unit")


def _watch_controller(
    unit: EmissionUnit, directory: Path, asked_to_end: threading.Event
) -> str:
    """Returns when the twin is to end, and says why."""
    held = b""
    while not asked_to_end.is_set():
        if not select.select([sys.stdin], [], [], POLL_S)[0]:
            continue
        data = os.read(sys.stdin.fileno(), 4096)
        if not data:
            return _outlive_controller(unit, directory, asked_to_end)
        held = (held + data)[-4096:]
        if b"end\n" in held:
            return "ended by the controller"
    return "ended by a signal"


def _outlive_controller(
    unit: EmissionUnit, directory: Path, asked_to_end: threading.Event
) -> str:
    """Stays until the keep-alive has run out and 5 s more, or a successor waits."""
    lapse_s = time.monotonic() + unit.keep_alive_s
    while not asked_to_end.wait(POLL_S):
        over_s = time.monotonic() - lapse_s
        if over_s >= STAYS_AFTER_DARK_S:
            break
        if over_s >= 0.0 and not unit.is_lit() and successor_waits(directory):
            return "controller gone, successor waits"
    return "controller gone"


def _say(values: dict[str, Any]) -> None:
    sys.stdout.write(json.dumps(values) + "\n")
    sys.stdout.flush()

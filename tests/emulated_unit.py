"""An emission unit on a pseudo-terminal in a process of its own, for fault tests.

``python emulated_unit.py LOG KEY_HEX LINE CHANNELS``: prints the port's path, then
obeys words on stdin (open, close, reset, stick, ...) until it ends. Its log is the judge of emission.
"""

import json
import subprocess
import sys
from pathlib import Path

from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.pty_port import PtyPort
from pitchsweep.drivers.twin.relay import TimeOutRelay
from pitchsweep.drivers.twin.relay_port import RelayPort
from pitchsweep.drivers.twin.unit_firmware import RelayBoxFirmware, UnitFirmware
from pitchsweep.drivers.twin.unit_log import UnitLog

IDENTITY = "bench-unit-1"
KEEP_ALIVE_S = 0.2


class EmulatedUnit:
    """The process as the test holds it."""

    def __init__(
        self, log: Path, key: bytes, *, line: str = "keep-alive", channels: int = 1
    ) -> None:
        self.log = log
        self.process = subprocess.Popen(
            [sys.executable, __file__, str(log), key.hex(), line, str(channels)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            start_new_session=True,
        )
        assert self.process.stdout is not None
        self.port = self.process.stdout.readline().decode().strip()

    def tell(self, word: str) -> None:
        assert self.process.stdin is not None
        self.process.stdin.write(word.encode() + b"\n")
        self.process.stdin.flush()

    patience_s = 10.0

    def open_interlock(self) -> None:
        """The person at the bench opens the door."""
        self.tell("open")

    def close_interlock(self) -> None:
        """The person at the bench closes the door."""
        self.tell("close")

    def rows(self, what: str) -> list[tuple[float, str, str]]:
        """(monotonic seconds, value, why) of every change of ``what``."""
        rows = map(json.loads, self.log.read_text().splitlines())
        return [
            (r["monotonic_s"], r["value"], r["why"]) for r in rows if r["what"] == what
        ]

    def end(self) -> None:
        for pipe in (self.process.stdin, self.process.stdout):
            if pipe is not None:
                pipe.close()
        self.process.wait(10.0)


def open_port(unit: EmissionUnit, key: bytes, line: str) -> PtyPort | RelayPort:
    faults = FaultSchedule()
    if line == "pulses":
        return RelayPort(TimeOutRelay(unit), RelayBoxFirmware(IDENTITY, key, faults))
    firmware = UnitFirmware(unit, identity=IDENTITY, key=key, faults=faults)
    return PtyPort(firmware, name="unit")


def main() -> None:
    log = UnitLog(Path(sys.argv[1]))
    unit = EmissionUnit(
        log,
        keep_alive_s=KEEP_ALIVE_S,
        has_shutter=True,
        channels=int(sys.argv[4]),
    )
    key = bytes.fromhex(sys.argv[2])
    port = open_port(unit, key, sys.argv[3])
    print(port.path, flush=True)
    acts = {
        "open": lambda: unit.set_door(closed=False),
        "close": lambda: unit.set_door(closed=True),
        "reset": unit.press_reset,
        "stick": unit.stick,
        "jam": unit.jam_shutter,
        "open-2": lambda: unit.set_door(closed=False, channel=2),
        "close-2": lambda: unit.set_door(closed=True, channel=2),
    }
    for line in sys.stdin:
        acts[line.strip()]()
    port.close()
    log.close()


if __name__ == "__main__":
    main()

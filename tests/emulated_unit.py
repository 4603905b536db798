"""An emission unit on a pseudo-terminal in a process of its own, for fault tests.

``python emulated_unit.py LOG KEY_HEX LINE CHANNELS``: prints the port's path, then
obeys words on stdin (open, close, reset, stick, ...) until it ends. Its log is the
judge of emission.
"""

import contextlib
import json
import socket
import subprocess
import sys
import threading
from collections.abc import Callable
from pathlib import Path

from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.firmware_lines import Firmware, Reply
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


class RealUnit:
    """Firmware of a unit that is no twin: it declines every challenge."""

    def __init__(self, firmware: Firmware) -> None:
        self._firmware = firmware

    def receive(self, data: bytes) -> list[Reply]:
        asked = data.split()
        if b"PROVE" in asked:
            return [Reply(asked[0] + b" DECLINED NO-KEY\n")]
        return self._firmware.receive(data)

    def due_in_s(self) -> float | None:
        return self._firmware.due_in_s()


class Silence:
    """The data wires of a bare relay: nobody answers."""

    def receive(self, data: bytes) -> list[Reply]:
        return []

    def due_in_s(self) -> float | None:
        return None


class SocketPort:
    """A unit behind a plain loopback socket, one caller at a time."""

    def __init__(self, firmware: Firmware) -> None:
        self._firmware = firmware
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.path = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        threading.Thread(target=self._serve, daemon=True).start()

    def close(self) -> None:
        self._listener.close()

    def _serve(self) -> None:
        self._listener.settimeout(0.01)
        while True:
            self._firmware.due_in_s()
            try:
                caller, _ = self._listener.accept()
            except TimeoutError:
                continue
            except OSError:
                return
            caller.settimeout(0.01)
            with caller, contextlib.suppress(OSError):
                while self._answer(caller):
                    self._firmware.due_in_s()

    def _answer(self, caller: socket.socket) -> bool:
        try:
            data = caller.recv(4096)
        except TimeoutError:
            return True
        for reply in self._firmware.receive(data):
            caller.sendall(reply.data)
        return bool(data)


def open_port(
    unit: EmissionUnit, key: bytes, line: str
) -> PtyPort | RelayPort | SocketPort:
    faults = FaultSchedule()
    box = RelayBoxFirmware(IDENTITY, key, faults)
    firmware = UnitFirmware(unit, identity=IDENTITY, key=key, faults=faults)
    ports: dict[str, Callable[[], PtyPort | RelayPort | SocketPort]] = {
        "keep-alive": lambda: PtyPort(firmware, name="unit"),
        "pulses": lambda: RelayPort(TimeOutRelay(unit), box),
        "bare relay": lambda: RelayPort(TimeOutRelay(unit), Silence()),
        "real": lambda: PtyPort(RealUnit(firmware), name="unit"),
        "socket": lambda: SocketPort(firmware),
        "real on a socket": lambda: SocketPort(RealUnit(firmware)),
    }
    return ports[line]()


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

"""What both simulated devices share: lines in, numbered lines out (pure).

Written from the wire format alone, without the controller's dialect code, so that
the two check each other.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

from pitchsweep.drivers.twin.fault_schedule import Fault, FaultSchedule

LONGEST_LINE_BYTES = 200


@dataclass(frozen=True)
class Reply:
    """Bytes that leave the device ``after_s`` from now, on the real clock."""

    data: bytes
    after_s: float = 0.0


class Firmware(Protocol):
    """A device behind a port: bytes in, replies out, and its own deadline."""

    def receive(self, data: bytes) -> list[Reply]: ...

    def due_in_s(self) -> float | None:
        """Does what is due; seconds until something is due again, or None."""
        ...


class LineCutter:
    """Cuts what arrives into lines and answers each, after the fault schedule."""

    def __init__(
        self, at: str, faults: FaultSchedule, answer: Callable[[list[str]], str | None]
    ) -> None:
        self._at = at
        self._faults = faults
        self._answer = answer
        self._held = b""

    def receive(self, data: bytes) -> list[Reply]:
        """The replies to the lines that ``data`` completes."""
        *lines, self._held = (self._held + data).split(b"\n")
        self._held = self._held[-LONGEST_LINE_BYTES:]
        replies = (self._reply(line) for line in lines)
        return [reply for reply in replies if reply is not None]

    def _reply(self, line: bytes) -> Reply | None:
        words = line.decode("ascii", "replace").split()
        fault = self._faults.due(self._at)
        if not words or words[0][:1] != "N" or not words[0][1:].isdigit():
            return Reply(b"N0 DECLINED UNREADABLE\n")
        said = self._answer(words[1:])
        if said is None:
            return None
        return _disturbed(fault, f"{words[0]} {said}\n".encode("ascii"))


def _disturbed(fault: Fault | None, line: bytes) -> Reply | None:
    if fault is None:
        return Reply(line)
    if fault.does == "silent":
        return None
    if fault.does == "declined":
        return Reply(line.split(b" ", 1)[0] + b" DECLINED STALLED\n")
    if fault.does == "garbage":
        return Reply(bytes(byte ^ 0x95 for byte in line[:-1]) + b"\n")
    return Reply(line, fault.late_s)

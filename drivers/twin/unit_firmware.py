"""Firmware of the simulated emission unit: lines in, lines out."""

import hashlib
import hmac
from collections.abc import Callable

from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.firmware_lines import LineCutter, Reply

LONGEST_CHALLENGE_BYTES = 32


class UnitFirmware:
    """Answers WHO, PROVE, LIGHT, KEEP, TRY, DARK and STATE."""

    def __init__(
        self, unit: EmissionUnit, *, identity: str, key: bytes, faults: FaultSchedule
    ) -> None:
        self._unit = unit
        self._identity = identity
        self._key = key
        self._faults = faults
        self._lines = LineCutter("unit-ask", faults, self._answer)

    def receive(self, data: bytes) -> list[Reply]:
        """Replies to what arrived."""
        return self._lines.receive(data)

    def due_in_s(self) -> float | None:
        """Goes dark when due; seconds until that is due."""
        return self._unit.lapse_due_in_s()

    def _answer(self, words: list[str]) -> str | None:
        if words == ["KEEP"]:
            return self._hold(self._unit.keep, "DARK")
        if len(words) == 2 and words[0] == "LIGHT" and words[1].isdecimal():
            return self._hold(lambda: self._unit.light_up(int(words[1])), "TOO-LATE")
        if words == ["DARK"]:
            self._unit.dark()
            return self._unit.standing()
        if words == ["TRY"]:
            tried = self._unit.try_time_out()
            return self._unit.standing() if tried else "DECLINED LIT"
        if words == ["STATE"]:
            return self._unit.standing()
        if words == ["WHO"]:
            return f"NAMED {self._identity}"
        if len(words) == 2 and words[0] == "PROVE":
            return prove(self._key, words[1])
        return "DECLINED UNREADABLE"

    def _hold(self, act: Callable[[], bool], why_not: str) -> str | None:
        fault = self._faults.due("unit-keep")
        does = "" if fault is None else fault.does
        if does == "door-opens":
            self._unit.set_door(closed=False)
        if does == "one-channel-opens":
            self._unit.set_door(closed=False, channel=2)
        if not act():
            return f"DECLINED {why_not}"
        if does == "light-stuck":
            self._unit.stick()
        if does == "shutter-stuck":
            self._unit.jam_shutter()
        return None if does == "silent" else self._unit.standing()


class RelayBoxFirmware:
    """What the box of a pulse-fed relay says on its data wires: WHO and PROVE alone."""

    def __init__(self, identity: str, key: bytes, faults: FaultSchedule) -> None:
        self._identity = identity
        self._key = key
        self._lines = LineCutter("unit-ask", faults, self._answer)

    def receive(self, data: bytes) -> list[Reply]:
        """Replies to what arrived."""
        return self._lines.receive(data)

    def due_in_s(self) -> float | None:
        """Nothing is ever due here."""
        return None

    def _answer(self, words: list[str]) -> str | None:
        if words == ["WHO"]:
            return f"NAMED {self._identity}"
        if len(words) == 2 and words[0] == "PROVE":
            return prove(self._key, words[1])
        return "DECLINED UNREADABLE"


def prove(key: bytes, challenge: str) -> str:
    """The answer to a challenge in hexadecimal."""
    try:
        nonce = bytes.fromhex(challenge)
    except ValueError:
        return "DECLINED UNREADABLE"
    if not 0 < len(nonce) <= LONGEST_CHALLENGE_BYTES:
        return "DECLINED UNREADABLE"
    return "PROOF " + hmac.new(key, nonce, hashlib.sha256).hexdigest()

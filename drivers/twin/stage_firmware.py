"""Firmware of the simulated rotation stage: lines in, lines out."""

import re
from typing import Protocol

from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.firmware_lines import LineCutter, Reply

_B_WORD = re.compile(r"B(-?\d+(?:\.\d+)?)")
_F_WORD = re.compile(r"F(\d+(?:\.\d+)?)")


class StageWorld(Protocol):
    """What the firmware needs of the shared world; angles are readings."""

    def stage_place(self) -> tuple[float, bool, bool, bool]:
        """Reading in degrees, turning, stalled, zero known."""
        ...

    def stage_travel_deg(self) -> tuple[float, float]: ...

    def stage_move(self, angle_deg: float, feed_deg_per_min: float) -> None: ...

    def stage_seek_zero(self) -> None: ...

    def stage_halt(self) -> None: ...


class StageFirmware:
    """Answers WHO, WHERE, SEEK-ZERO, HALT and G90 G1 moves."""

    def __init__(
        self, world: StageWorld, *, identity: str, faults: FaultSchedule
    ) -> None:
        self._world = world
        self._identity = identity
        self._lines = LineCutter("stage-ask", faults, self._answer)

    def receive(self, data: bytes) -> list[Reply]:
        """Replies to what arrived."""
        return self._lines.receive(data)

    def due_in_s(self) -> float | None:
        """Nothing is ever due: the stage lives on bench time."""
        return None

    def _answer(self, words: list[str]) -> str:
        if words == ["WHERE"]:
            angle_deg, turning, stalled, homed = self._world.stage_place()
            motion = "STALLED" if stalled else "TURNING" if turning else "RESTING"
            zero = "ZERO-KNOWN" if homed else "ZERO-LOST"
            return f"PLACE B{angle_deg:.4f} {motion} {zero}"
        if words == ["WHO"]:
            return f"NAMED {self._identity}"
        if words == ["SEEK-ZERO"]:
            self._world.stage_seek_zero()
            return "TAKEN"
        if words == ["HALT"]:
            self._world.stage_halt()
            return "TAKEN"
        if len(words) == 4 and words[:2] == ["G90", "G1"]:
            return self._move(_B_WORD.fullmatch(words[2]), _F_WORD.fullmatch(words[3]))
        return "DECLINED UNREADABLE"

    def _move(self, b: re.Match[str] | None, f: re.Match[str] | None) -> str:
        if b is None or f is None or float(f[1]) <= 0.0:
            return "DECLINED UNREADABLE"
        if not self._world.stage_place()[3]:
            return "DECLINED ZERO-LOST"
        lowest_deg, highest_deg = self._world.stage_travel_deg()
        if not lowest_deg <= float(b[1]) <= highest_deg:
            return "DECLINED OUTSIDE-TRAVEL"
        self._world.stage_move(float(b[1]), float(f[1]))
        return "TAKEN"

"""Fakes for the drivers' tests: a bench clock, an in-process stage, a scripted peer."""

from collections.abc import Callable

from pitchsweep.drivers.dialect_files import shipped_dialect
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.transport import FakeTransport
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.stage_firmware import StageFirmware
from pitchsweep.drivers.twin.stage_mechanics import Rest, StageMechanics

Peer = Callable[[bytes], list[tuple[float, bytes]]]


class FakeBenchClock:
    """Bench time that advances only by waits, which it remembers."""

    def __init__(self) -> None:
        self.time_s = 0.0

    def now_s(self) -> float:
        return self.time_s

    def wait(self, seconds: float) -> None:
        self.time_s += seconds


class FakeStageWorld:
    """A stage without a twin: the mechanics, a clock, and moves as they were asked."""

    def __init__(self, clock: FakeBenchClock) -> None:
        self.clock = clock
        self.mechanics = StageMechanics(Rest(3.0, 0.0, False, 3.0), backlash_deg=0.1)
        self.moves_deg: list[float] = []
        self.astray_deg = 0.0
        self.stalls = False

    def stage_place(self) -> tuple[float, bool, bool, bool]:
        now_s = self.clock.now_s()
        turning = self.mechanics.turning(now_s)
        stalled = self.mechanics.stalled and not turning
        homed = self.mechanics.homed(now_s)
        return self.mechanics.reading_deg(now_s), turning, stalled, homed

    def stage_travel_deg(self) -> tuple[float, float]:
        return -180.0, 180.0

    def stage_move(self, angle_deg: float, feed_deg_per_min: float) -> None:
        self.moves_deg.append(angle_deg)
        goal_deg = angle_deg + self.astray_deg
        self.mechanics.move(goal_deg, feed_deg_per_min / 60.0, self.clock.now_s())
        self.mechanics.stalled = self.stalls

    def stage_seek_zero(self) -> None:
        self.mechanics.seek_zero(10.0, self.clock.now_s())

    def stage_halt(self) -> None:
        self.mechanics.halt(self.clock.now_s())


def stage_line(world: FakeStageWorld) -> LineClient:
    """A line client to the twin's stage firmware, all in this process."""
    firmware = StageFirmware(world, identity="fake-stage", faults=FaultSchedule())

    def peer(data: bytes) -> list[tuple[float, bytes]]:
        return [(r.after_s, r.data) for r in firmware.receive(data)]

    return line_to(peer, "rotary-line")


def line_to(peer: Peer, dialect: str = "rotary-line") -> LineClient:
    """A line client to a scripted peer; numbers start at 1, time is the fake's."""
    transport = FakeTransport(peer)
    return LineClient(
        transport,
        shipped_dialect(dialect),
        device="stage",
        clock=transport.now_s,
        first_number=0,
    )

"""Asking people at the terminal, and what sensors and people do at a real bench."""

import os
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import pytest

from pitchsweep.acquire.hardware_world import HardwareWorld, Sensors
from pitchsweep.acquire.people_at_bench import TerminalPeople
from pitchsweep.acquire.stop_signals import StopRequested
from pitchsweep.drivers.bench_clock import MonotonicBenchClock
from pitchsweep.drivers.devices import AirReading, Label
from pitchsweep.drivers.driver_errors import AskedIllegal, NoAnswerInTime


@pytest.fixture
def terminal(monkeypatch: pytest.MonkeyPatch) -> Iterator[int]:
    """A terminal at standard input; what is written to it has been typed."""
    import pty

    near, far = pty.openpty()
    with os.fdopen(far, "r", closefd=True) as keyboard:
        monkeypatch.setattr("sys.stdin", keyboard)
        yield near
    os.close(near)


def test_whoever_has_done_it_types_a_name(terminal: int) -> None:
    said: list[str] = []
    os.write(terminal, b"\n  Ada   L. \n")
    name = TerminalPeople(said.append).ask("seat the part", lambda: None)
    assert name == "Ada L."
    assert said == [
        "dark; at the bench: seat the part; then type your name here, and Enter",
        "a name is needed: who has done it?",
    ]


def test_a_stop_is_heard_while_nobody_answers(terminal: int) -> None:
    def check() -> None:
        raise StopRequested("SIGINT")

    with pytest.raises(StopRequested, match="SIGINT"):
        TerminalPeople(lambda _: None).ask("seat the part", check)


def test_without_a_terminal_the_run_stops_and_says_why(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    with open(os.devnull) as nothing:
        monkeypatch.setattr("sys.stdin", nothing)
        with pytest.raises(StopRequested, match="no terminal to ask at"):
            TerminalPeople(lambda _: None).ask("seat the part", lambda: None)


@dataclass
class FakeGate:
    """Remembers what it was told."""

    told: list[str] = field(default_factory=list)

    def disarm(self) -> None:
        self.told.append("disarm")

    def arm(self, person: Any) -> None:
        self.told.append("arm")


@dataclass
class FakeSensor:
    """An air sensor and a power sensor; ``mw`` None is silent."""

    mw: float | None = 0.9

    def read(self) -> AirReading:
        if self.mw is None:
            raise NoAnswerInTime("air sensor", "air", 2.0)
        return AirReading(20.5, 1001.0, 40.0, 21.0)

    def read_mw(self) -> float:
        if self.mw is None:
            raise NoAnswerInTime("power sensor", "power", 2.0)
        return self.mw


def world(gate: FakeGate, sensors: Sensors) -> HardwareWorld:
    people: Any = None
    return HardwareWorld(gate, people, sensors, lambda: None)


def test_sensors_that_are_not_there_read_nothing() -> None:
    reading = world(FakeGate(), Sensors()).sense("red", 0.0)
    assert reading.air is None and reading.power_mw is None


def test_sensors_are_read() -> None:
    sensor = FakeSensor()
    reading = world(FakeGate(), Sensors(sensor, sensor)).sense("red", 0.0)
    assert reading.air == sensor.read() and reading.power_mw == 0.9


def test_a_silent_air_sensor_is_missing_and_a_silent_power_sensor_a_fault() -> None:
    silent = FakeSensor(None)
    assert world(FakeGate(), Sensors(air=silent)).sense("red", 0.0).air is None
    with pytest.raises(NoAnswerInTime):
        world(FakeGate(), Sensors(power=silent)).sense("red", 0.0)


def test_no_real_bench_tells_spots() -> None:
    with pytest.raises(AskedIllegal, match="frames, on a bench with ports"):
        world(FakeGate(), Sensors()).spots(Label(0, "red", 0, 0, 0))


def test_the_bench_clock_goes_on_where_the_run_stood_and_hears_a_stop() -> None:
    now_s, slept = [1000.0], []

    def sleep(seconds: float) -> None:
        slept.append(seconds)
        now_s[0] += seconds

    asked: list[bool] = []
    clock = MonotonicBenchClock(
        7.0, check=lambda: asked.append(True), now=lambda: now_s[0], sleep=sleep
    )
    clock.wait(0.25)
    assert clock.now_s() == pytest.approx(7.25)
    assert sum(slept) == pytest.approx(0.25) and len(asked) == len(slept) == 3

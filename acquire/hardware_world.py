"""What only people and sensors do at a real bench: seat the part, read the air. Acts.

Light is never asked for while a person works at the bench: the gate is taken down
first, so that the door may be opened, and armed anew afterwards.
"""

from collections.abc import Callable, Sequence
from contextlib import suppress
from dataclasses import dataclass
from typing import Protocol

from pitchsweep.acquire.people_at_bench import People
from pitchsweep.drivers.devices import AirReading, BenchReading, Label, SpotReading
from pitchsweep.drivers.driver_errors import AskedIllegal, DriverError
from pitchsweep.drivers.sensor_client import ReadsAir, ReadsPower
from pitchsweep.safety.guard_client import Person


class PersonsGate(Protocol):
    """The guard, as far as people are concerned."""

    def disarm(self) -> None: ...

    def arm(self, person: Person) -> None: ...


@dataclass(frozen=True)
class Sensors:
    """The sensors that the bench has."""

    air: ReadsAir | None = None
    power: ReadsPower | None = None


class HardwareWorld:
    """A World. ``check`` raises when a stop was asked for."""

    def __init__(
        self,
        gate: PersonsGate,
        people: People,
        sensors: Sensors,
        check: Callable[[], None],
    ) -> None:
        self._gate = gate
        self._people = people
        self._sensors = sensors
        self._check = check

    def seat_part(
        self, mount: int, mount_deg: float, face_deg: float = 0.0, part: int = 0
    ) -> None:
        """Nothing: the person who was asked has seated the part."""

    def spots(self, label: Label) -> Sequence[SpotReading]:
        """No real bench tells spots; frames are recorded there. Raises AskedIllegal."""
        raise AskedIllegal("record", "spots", "frames, on a bench with ports")

    def sense(self, laser: str, planned_s: float) -> BenchReading:
        """What the sensors say now. A silent air sensor gives None for the air.

        Raises DriverError for a silent power sensor: without it light is not watched.
        """
        air: AirReading | None = None
        if self._sensors.air is not None:
            with suppress(DriverError):
                air = self._sensors.air.read()
        if self._sensors.power is None:
            return BenchReading(air)
        return BenchReading(air, self._sensors.power.read_mw())

    def ask_person(self, what: str) -> str:
        """Waits, the gate taken down, until somebody has done it; who it was.

        Raises StopRequested, GateTripped, and GateRefused where nobody moves the door.
        """
        self._gate.disarm()
        name = self._people.ask(what, self._check)
        self._gate.arm(self._people)
        return name

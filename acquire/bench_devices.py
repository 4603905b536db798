"""What a sweep works with: the shapes of gate, world and finder (no device here)."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from pitchsweep.acquire.journal_rows import GateRow, StepSpots
from pitchsweep.drivers.devices import (
    BenchClock,
    BenchReading,
    Camera,
    Label,
    SpotReading,
    Stage,
)

Frame = NDArray[np.uint16]


@dataclass(frozen=True)
class Shot:
    """One frame and what it was taken with."""

    exposure_ms: float
    label: Label
    frame: Frame


FindSpots = Callable[[int, Sequence[Shot], Sequence[Shot]], StepSpots]
"""(step, light shots, dark shots) -> spots on the nominal screen."""


class Gate(Protocol):
    """The guard as the controller sees it. Every method may be called by any thread."""

    def light_on(
        self, *, step: int, commanded_deg: float, readback_deg: float
    ) -> None: ...

    def still_at(
        self, *, step: int, commanded_deg: float, readback_deg: float
    ) -> None: ...

    def dark(self) -> None: ...

    def trip(self, reason: str) -> None: ...

    def end(self) -> None: ...


class World(Protocol):
    """What a person or the bench does on request: re-seat the part, tell spots."""

    def seat_part(
        self, mount: int, mount_deg: float, face_deg: float = 0.0, part: int = 0
    ) -> None: ...

    def spots(self, label: Label) -> Sequence[SpotReading]: ...

    def sense(self, laser: str, planned_s: float) -> BenchReading: ...

    def ask_person(self, what: str) -> str: ...


@dataclass(frozen=True)
class BenchDevices:
    """An open bench, armed and dark; ``gate_history`` gives the gate's new events.

    ``lasers_by_hand``: a person lets another laser through when its turn comes.
    """

    stage: Stage
    camera: Camera
    clock: BenchClock
    world: World
    gate: Gate
    gate_history: Callable[[], Sequence[GateRow]]
    lasers_by_hand: bool = False

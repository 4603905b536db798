"""What a bench offers the controller: the shapes every device client has.

Clients of real ports and of the twin have the same shape, so that the sweep cannot
tell them apart. Angles in degrees, times in seconds, frames as uint16 arrays
(row, column) in digital numbers.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Label:
    """Names one exposure of a run; equal labels mean the same exposure, repeated.

    ``planned_s`` is the bench time at which the plan places the step, so that slow
    processes of a twin depend on the plan and not on interruptions. ``face_deg`` is
    how far the part is turned in its own plane.
    """

    mount: int
    laser: str
    repeat: int
    step: int
    exposure: int
    planned_s: float = 0.0
    face_deg: float = 0.0


@dataclass(frozen=True)
class StageReading:
    """Where the stage says it is, and whether it still turns."""

    angle_deg: float
    turning: bool
    homed: bool


@dataclass(frozen=True)
class SpotReading:
    """A position from the spots door, in nominal screen millimetres."""

    x_mm: float
    y_mm: float
    ux_mm: float
    uy_mm: float
    brightness: float


@dataclass(frozen=True)
class AirReading:
    """Air beside the part and the part's own temperature."""

    temperature_C: float
    pressure_hPa: float
    humidity_percent: float
    part_temperature_C: float


@dataclass(frozen=True)
class BenchReading:
    """What the sensors beside the part say at a step; None where there is none."""

    air: AirReading | None = None
    power_mw: float | None = None


FrameToCome = Callable[[], NDArray[np.uint16]]
"""Waits for the readout and gives the frame; raises DriverError."""


class BenchClock(Protocol):
    """Bench time: motion, settling, exposure. Never used for safety."""

    def now_s(self) -> float: ...

    def wait(self, seconds: float) -> None: ...


class Stage(Protocol):
    """A rotation stage; ``move_to`` returns when at rest and says where."""

    def identify(self) -> str: ...

    def home(self) -> None: ...

    def where(self) -> StageReading: ...

    def move_to(self, angle_deg: float) -> StageReading: ...

    def close(self) -> None: ...


class Camera(Protocol):
    """A camera; ``expose`` starts now and returns the frame after readout."""

    def identify(self) -> dict[str, Any]: ...

    def expose(self, exposure_ms: float, label: Label) -> NDArray[np.uint16]: ...

    def close(self) -> None: ...


@runtime_checkable
class ReadsOutLater(Protocol):
    """A camera that says when its exposure is over, before it has read out.

    Only where all pixels end their exposure at once: from then on the light may go and
    the stage may turn. The next exposure waits until the camera is free.
    """

    def begin(self, exposure_ms: float, label: Label) -> FrameToCome: ...

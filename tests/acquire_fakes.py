"""A bench of values only: no process, no port, no real time.

Its spots follow the law of reflection and the grating equation in the plane; frames
are small. Every call of any device is counted and can be made to fail at the n-th.
"""

from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.journal_rows import GateRow
from pitchsweep.acquire.sweep_session import BenchRequest
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_job
from pitchsweep.drivers.devices import (
    AirReading,
    BenchReading,
    Label,
    SpotReading,
    StageReading,
)
from pitchsweep.safety.safety_errors import GateTripped


class Killed(BaseException):
    """Stands for kill -9: nothing catches it on purpose."""


def small_job(**recipe: Any) -> Job:
    """The shipped shim job with a short sweep and a camera of few pixels."""
    job = read_job("demo:shims").job
    changes: dict[str, Any] = {
        "start_deg": -20.0,
        "stop_deg": 20.0,
        "step_deg": 5.0,
        "record": "spots",
        "dark_every_steps": 4,
    }
    camera = job.bench.camera.model_copy(
        update={
            "width_px": 320,
            "height_px": 100,
            "mm_per_px": 1.25,
            "centre_column_px": 159.5,
            "centre_row_px": 49.5,
        }
    )
    bench = job.bench.model_copy(update={"camera": camera})
    settings = job.recipe.model_copy(update={**changes, **recipe})
    return job.model_copy(update={"bench": bench, "recipe": settings})


@dataclass
class FakeBench:
    """What the devices share; ``fail_at`` names the call that raises ``failure``."""

    job: Job
    fail_at: int | None = None
    failure: Callable[[], BaseException] = Killed
    shift_mm: float = 0.0
    calls: int = 0
    log: list[str] = field(default_factory=list)
    lit: bool = False
    angle_deg: float = 7.0
    homed: bool = False
    mount_deg: float = 0.0
    part_in: int = 0
    clock_s: float = 0.0
    lit_moves: int = 0
    resumed: bool | None = None
    trips: list[str] = field(default_factory=list)
    asked: list[str] = field(default_factory=list)
    on_call: Callable[[str], None] | None = None

    def count(self, what: str) -> None:
        """Notes a call; fails if it is its turn."""
        self.calls += 1
        self.log.append(what)
        if self.on_call is not None:
            self.on_call(what)
        if self.calls == self.fail_at:
            raise self.failure()

    # The stage.

    def identify(self) -> Any:
        return "fake"

    def home(self) -> None:
        self.count("home")
        self.homed = True
        self.angle_deg = 0.0

    def where(self) -> StageReading:
        self.count("where")
        return StageReading(self.angle_deg, False, self.homed)

    def move_to(self, angle_deg: float) -> StageReading:
        self.count("move")
        self.lit_moves += self.lit
        self.angle_deg = angle_deg
        return StageReading(angle_deg, False, self.homed)

    def close(self) -> None:
        self.count("close")

    # The clock.

    def now_s(self) -> float:
        return self.clock_s

    def wait(self, seconds: float) -> None:
        self.count("wait")
        self.clock_s += seconds

    # The person, the spots door, the camera.

    def seat_part(
        self, mount: int, mount_deg: float, face_deg: float = 0.0, part: int = 0
    ) -> None:
        self.count(f"seat {mount}")
        assert not self.lit
        self.mount_deg = mount_deg
        self.part_in = part

    def spots(self, label: Label) -> Sequence[SpotReading]:
        self.count(f"spots {label.step}")
        if not self.lit:
            return []
        noise = np.random.default_rng([label.mount, label.step, label.exposure])
        return [
            SpotReading(x + 0.1 * noise.normal(), 0.1 * noise.normal(), 0.1, 0.1, 1.0)
            for x in self.places_mm(label.laser)
        ]

    def sense(self, laser: str, planned_s: float) -> BenchReading:
        self.count("sense")
        air = AirReading(20.0, 1013.0, 50.0, 20.0)
        return BenchReading(air, self.job.bench.lasers[laser].power_mw)

    def ask_person(self, what: str) -> str:
        self.count("person")
        self.asked.append(what)
        assert not self.lit
        return "somebody"

    def expose(self, exposure_ms: float, label: Label) -> NDArray[np.uint16]:
        self.count(f"expose {label.step}.{label.exposure}")
        camera = self.job.bench.camera
        noise = np.random.default_rng([7, label.mount, label.step, label.exposure])
        rows, columns = np.mgrid[0 : camera.height_px, 0 : camera.width_px]
        image = 64.0 + 2.0 * noise.normal(size=rows.shape)
        for x_mm in self.places_mm(label.laser) if self.lit else ():
            column = camera.centre_column_px + x_mm / camera.mm_per_px
            square = (columns - column) ** 2 + (rows - camera.centre_row_px) ** 2
            image += 30.0 * exposure_ms * np.exp(-0.5 * square / 4.0)
        return np.clip(np.round(image), 0, 4095).astype(np.uint16)

    def places_mm(self, laser: str) -> list[float]:
        """Where the orders -1, 0, +1 meet the screen, hole and edge left out."""
        bench, part = self.job.bench, self.job.seated[self.part_in]
        a = np.radians(bench.stage.direction * (self.angle_deg - self.mount_deg))
        wave_nm = bench.lasers[laser].vacuum_wavelength_nm / 1.00027
        places = []
        for order in (-1, 0, 1):
            sin_b = np.sin(a) + order * wave_nm / (1.004 * part.nominal_pitch_nm)
            if abs(sin_b) >= 1.0 or abs(a + np.arcsin(sin_b)) > 1.5:
                continue
            x = bench.screen.distance_mm * np.tan(a + np.arcsin(sin_b)) + self.shift_mm
            if 5.0 < abs(x) < 190.0:
                places.append(float(x))
        return places

    # The gate.

    def light_on(self, *, step: int, commanded_deg: float, readback_deg: float) -> None:
        self.count(f"light {step}")
        assert commanded_deg == readback_deg
        if self.trips:
            raise GateTripped("controller-fault", self.trips[-1])
        self.lit = True

    def still_at(self, *, step: int, commanded_deg: float, readback_deg: float) -> None:
        assert self.lit

    def dark(self) -> None:
        self.lit = False

    def trip(self, reason: str) -> None:
        self.lit = False
        self.trips.append(reason)

    def end(self) -> None:
        self.lit = False
        self.log.append("end")


def opener(fake: FakeBench) -> Callable[[BenchRequest], Any]:
    """Opens ``fake`` for a session."""

    @contextmanager
    def open_bench(request: BenchRequest) -> Iterator[BenchDevices]:
        fake.resumed = request.resumed
        rows = [GateRow("2026-01-01T00:00:00Z", None, "ready", "armed", "")]

        def take() -> list[GateRow]:
            taken = list(rows)
            rows.clear()
            return taken

        try:
            yield BenchDevices(fake, fake, fake, fake, fake, take)
        finally:
            fake.lit = False
            fake.log.append("closed")

    return open_bench


class QuietProgress:
    """Remembers what would be shown."""

    def __init__(self) -> None:
        self.said: list[str] = []
        self.shown: list[Any] = []

    def say(self, text: str) -> None:
        self.said.append(text)

    def show(self, shown: Any) -> None:
        self.shown.append(shown)

    def end(self) -> None:
        return

"""A small bench with a twin, and clients on its ports, for tests of the process."""

import json
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from builders import demo_job

from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.camera_client import TwinCameraClient
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.dialect_files import shipped_dialect
from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.drivers.emission_client import EmissionClient
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.serial_transport import open_serial
from pitchsweep.drivers.stage_client import StageClient
from pitchsweep.drivers.twin.fault_schedule import Fault
from pitchsweep.drivers.twin_launcher import TwinHandle, start_twin
from pitchsweep.drivers.twin_world_client import TwinWorldClient

UNIT_TIMEOUT_S = 2.0
"""Longer than the guard's, so that a busy machine does not fail these tests."""

Found = TypeVar("Found")


@dataclass(frozen=True)
class Clients:
    """A running twin and one client for each of its devices."""

    handle: TwinHandle
    job: Job
    stage: StageClient
    unit: EmissionClient
    camera: TwinCameraClient
    world: TwinWorldClient


def small_job(speed: str = "rehearsal") -> Job:
    """The shipped shim, a small camera, and a keep-alive well within its bounds.

    150 ms leaves a busy machine room on both sides: to hold the light, and to see it
    lapse within 250 ms.
    """
    job = demo_job("shims-spots")
    emission = job.bench.emission.model_copy(update={"keep_alive_ms": 150})
    camera = job.bench.camera
    smaller = {
        "width_px": 320,
        "height_px": 128,
        "mm_per_px": camera.mm_per_px * camera.width_px / 320,
        "centre_column_px": 160.0,
        "centre_row_px": 64.0,
    }
    camera = camera.model_copy(update=smaller)
    return demo_job(
        "shims-spots",
        bench={"camera": camera, "emission": emission},
        twin={"speed": speed},
    )


def short_job(speed: str = "rehearsal") -> Job:
    """The small job with five angles."""
    job = small_job(speed)
    recipe = job.recipe.model_copy(
        update={"start_deg": -20.0, "stop_deg": 20.0, "step_deg": 10.0}
    )
    return job.model_copy(update={"recipe": recipe})


@contextmanager
def running_twin(
    directory: Path, *faults: Fault, seed: int = 5, speed: str = "rehearsal"
) -> Iterator[Clients]:
    """A twin with clients on real ports; all closed, and the twin ended, at exit."""
    job = small_job(speed)
    with start_twin(directory, job.bench, job.part, seed, faults=faults) as handle:
        world = TwinWorldClient(handle.address)
        camera = TwinCameraClient(handle.address)
        stage = StageClient(
            LineClient(
                open_serial(handle.stage_port),
                shipped_dialect("rotary-line"),
                device="stage",
            ),
            world,
            job.bench.stage,
        )
        unit = EmissionClient(
            LineClient(
                open_serial(handle.unit_port),
                shipped_dialect("emission-line"),
                device="unit",
            ),
            timeout_s=UNIT_TIMEOUT_S,
        )
        try:
            yield Clients(handle, job, stage, unit, camera, world)
        finally:
            for client in (stage, unit, camera, world):
                client.close()


def unit_log(directory: Path) -> list[dict[str, Any]]:
    """The rows of the unit's log."""
    text = (directory / "unit.log").read_text(encoding="utf-8")
    return [json.loads(line) for line in text.splitlines()]


def label(step: int = 0, exposure: int = 0) -> Label:
    """A label of mount 0, the job's first laser."""
    laser = small_job().recipe.lasers[0]
    return Label(0, laser, 0, step, exposure, 3.0 * step)


@contextmanager
def _held(unit: EmissionClient) -> Iterator[None]:
    """Keep-alives from a thread of their own; nobody else may use ``unit``."""
    ended = threading.Event()

    def hold() -> None:
        with suppress(DriverError):
            while not ended.wait(0.03):
                unit.keep_lit()

    thread = threading.Thread(target=hold)
    thread.start()
    try:
        yield
    finally:
        ended.set()
        thread.join()


def while_lit(
    unit: EmissionClient,
    act: Callable[[], Found],
    first: Callable[[], None] = lambda: None,
) -> Found:
    """What ``act`` gives under light; done again where a busy machine lost it.

    ``first`` is done before the light is asked for, each time.
    """
    for _ in range(100):
        first()
        light_anew(unit)
        lapses = unit.state().lapse_count
        with _held(unit):
            found = act()
        after = unit.state()
        if after.light_on and after.lapse_count == lapses:
            return found
    raise AssertionError("the light could not be held")


def light_anew(unit: EmissionClient) -> None:
    """Lights the unit, or holds it lit, for one keep-alive time."""
    unit.state()
    unit.light_up()

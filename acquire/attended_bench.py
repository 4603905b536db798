"""Opens what attended light needs: the unit through its guard, and the stage. Acts.

The same guard as for a sweep, with an attended permit: light only while a key is held.
On a simulated bench the twin is started first; its person moves the door and its meter
says what reaches the part. On a bench with ports people do both.
"""

import time
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path

from pitchsweep.acquire.bench_session import (
    BAUD,
    STAGE_DIALECT,
    UNIT_DIALECT,
    TwinPerson,
    unit_settings,
)
from pitchsweep.acquire.hardware_bench import (
    check_stage,
    device_line,
    refuse_same_device,
)
from pitchsweep.acquire.people_at_bench import TerminalPeople
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.ports_model import Ports, SerialPort
from pitchsweep.drivers.bench_clock import MonotonicBenchClock
from pitchsweep.drivers.devices import BenchClock
from pitchsweep.drivers.dialect_files import shipped_dialect
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.sensor_client import PowerSensorClient
from pitchsweep.drivers.serial_transport import open_serial
from pitchsweep.drivers.stage_client import StageClient
from pitchsweep.drivers.twin_launcher import start_twin
from pitchsweep.drivers.twin_world_client import TwinWorldClient
from pitchsweep.safety.gate_table import GateState
from pitchsweep.safety.guard_client import GuardClient, Person, StageReport, start_guard
from pitchsweep.safety.guard_config import GuardConfig, GuardLimits
from pitchsweep.safety.permit import Permit
from pitchsweep.safety.permitted_steps import PermittedSteps

READ_AGE_LIMIT_S = 5.0
Say = Callable[[str], None]


@dataclass(frozen=True)
class Place:
    """Where light is asked for: a step of the plan, its angle, the power there (mW)."""

    laser: str
    step: int
    stage_deg: float
    power_mw: float


@dataclass(frozen=True)
class AttendedRequest:
    """What attended light is opened for.

    ``permit_for`` makes the permit of the twin's key (None on a bench with ports);
    ``watched`` are files that must stay as they are, or absent (empty).
    """

    job: Job
    folder: Path
    ledger: Path
    name: str
    places: tuple[Place, ...]
    permit_for: Callable[[bytes | None], Permit]
    watched: dict[str, str]
    stop: StopSignals
    say: Say


class AttendedLight:
    """The gate of one place, told of presses; the stage stands there already."""

    def __init__(self, guard: GuardClient, stage: StageClient, place: Place) -> None:
        self._guard = guard
        self._stage = stage
        self._place = place

    @property
    def lit(self) -> bool:
        """Whether the gate holds light now."""
        return self._guard.state is GateState.LIT

    def press(self) -> None:
        """A person pressed the key, just now."""
        self._guard.press()

    def light_on(self) -> None:
        """Asks for light. Raises GateRefused, GateTripped."""
        place, read_deg = self._place, self._stage.where().angle_deg
        self._guard.light_on(place.step, place.stage_deg, read_deg, place.power_mw)

    def still(self) -> None:
        """A fresh reading of the stage for the next heartbeats."""
        place, reading = self._place, self._stage.where()
        self._guard.report_stage(
            StageReport(
                place.step,
                place.stage_deg,
                reading.angle_deg,
                time.monotonic(),
                turning=reading.turning,
                power_mw=place.power_mw,
            )
        )

    def dark(self) -> None:
        """Dark, returned from when the unit was asked."""
        self._guard.dark()

    def check(self) -> None:
        """Raises GateTripped after a trip."""
        self._guard.check()


@dataclass(frozen=True)
class AttendedBench:
    """An open bench, armed and dark; ``meter``: laser -> mW, where one can be read."""

    guard: GuardClient
    stage: StageClient
    meter: Callable[[str], float] | None

    def light_at(self, place: Place) -> AttendedLight:
        """Turns the stage to ``place``, in the dark, and gives its gate."""
        self.guard.dark()
        if not self.stage.where().homed:
            self.stage.home()
        self.stage.move_to(place.stage_deg)
        return AttendedLight(self.guard, self.stage, place)


@contextmanager
def open_attended_bench(request: AttendedRequest) -> Iterator[AttendedBench]:
    """The bench of ``request``, armed and dark; everything ends with the block.

    Raises DriverError, GateRefused, GateTripped.
    """
    with ExitStack() as stack:
        bench = request.job.bench
        if bench.ports is None:
            opened = _open_twin(request, stack)
        else:
            opened = _open_ports(request, stack, bench.ports)
        yield opened


def _open_twin(request: AttendedRequest, stack: ExitStack) -> AttendedBench:
    job = request.job
    request.say("starting the simulated bench")
    seed = job.bench.twin.seed if job.bench.twin else 0
    twin = stack.enter_context(
        start_twin(request.folder / "twin", job.bench, job.part, seed)
    )
    world = TwinWorldClient(twin.address)
    stack.callback(world.close)
    unit = SerialPort(port=twin.unit_port, dialect=UNIT_DIALECT, baud=BAUD)
    guard = _guard(request, stack, unit, twin.proof_key)
    at = SerialPort(port=twin.stage_port, dialect=STAGE_DIALECT, baud=BAUD)
    stage = _stage(request, stack, at, world)
    _arm(request, guard, TwinPerson(world))
    return AttendedBench(guard, stage, world.read_meter)


def _open_ports(
    request: AttendedRequest, stack: ExitStack, ports: Ports
) -> AttendedBench:
    refuse_same_device(request.job.job, ports)
    guard = _guard(request, stack, ports.unit, None)
    clock = MonotonicBenchClock(check=request.stop.check)
    stage = _stage(request, stack, ports.stage, clock)
    check_stage(stage, ports)
    _arm(request, guard, TerminalPeople(request.say))
    if ports.power is None:
        return AttendedBench(guard, stage, None)
    sensor = PowerSensorClient(device_line(ports.power, "power sensor", stack))
    return AttendedBench(guard, stage, lambda laser: sensor.read_mw())


def _guard(
    request: AttendedRequest,
    stack: ExitStack,
    unit: SerialPort,
    key: bytes | None,
) -> GuardClient:
    bench = request.job.bench
    config = GuardConfig(
        unit=unit_settings(bench, unit.port, unit.dialect, unit.baud),
        permit=request.permit_for(key),
        limits=GuardLimits(),
        permitted=PermittedSteps(
            angles_deg={p.step: p.stage_deg for p in request.places},
            tolerance_deg=bench.stage.angle_tolerance_deg,
            read_age_limit_s=READ_AGE_LIMIT_S,
            power_ceiling_mw=max(p.power_mw for p in request.places),
        ),
        ledger_path=str(request.ledger),
        run=request.name,
        resumed=False,
        watched=request.watched,
    )
    guard = stack.enter_context(start_guard(config))
    request.stop.on_request = guard.dark
    return guard


def _stage(
    request: AttendedRequest,
    stack: ExitStack,
    port: SerialPort,
    clock: BenchClock,
) -> StageClient:
    line = LineClient(
        open_serial(port.port, baud=port.baud),
        shipped_dialect(port.dialect),
        device="stage",
    )
    stage = StageClient(line, clock, request.job.bench.stage)
    stack.callback(stage.close)
    return stage


def _arm(request: AttendedRequest, guard: GuardClient, person: Person) -> None:
    request.stop.check()
    guard.arm(person)

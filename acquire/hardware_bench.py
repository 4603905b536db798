"""Opens a bench with ports for a session: guard, stage, camera, sensors. Acts.

Only under a sign-off in force; nothing here knows of a rehearsal. The camera is looked
at first, in the dark; then the guard takes the emission line (nobody else ever opens
it), shows its time-out and the door, and only then the other ports are opened.
"""

import os
import time
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager

from pitchsweep.acquire.acquire_errors import JobRefused
from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.bench_session import (
    GateHistory,
    GuardGate,
    guard_config,
    unit_settings,
)
from pitchsweep.acquire.bench_work import step_lasers, step_powers_mw
from pitchsweep.acquire.hardware_world import HardwareWorld, Sensors
from pitchsweep.acquire.people_at_bench import People, TerminalPeople
from pitchsweep.acquire.power_watch import PowerWatch
from pitchsweep.acquire.run_permit import entered
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_session import BenchRequest, OpenBench
from pitchsweep.configs.ports_model import Ports, SerialPort
from pitchsweep.drivers.bench_clock import MonotonicBenchClock
from pitchsweep.drivers.camera_opening import open_camera
from pitchsweep.drivers.dialect_files import shipped_dialect
from pitchsweep.drivers.driver_errors import DeviceRefused
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.sensor_client import AirSensorClient, PowerSensorClient
from pitchsweep.drivers.serial_transport import open_serial
from pitchsweep.drivers.stage_client import StageClient
from pitchsweep.safety.guard_client import GuardClient, Person, start_guard
from pitchsweep.safety.safety_errors import GateRefused

TIME_ZERO = "bench_time_zero_utc_s"


def hardware_opener(people: People) -> OpenBench:
    """What opens a bench with ports and asks ``people`` for what hands must do."""

    @contextmanager
    def open_bench(request: BenchRequest) -> Iterator[BenchDevices]:
        ports = _ports(request)
        with ExitStack() as stack:
            yield _open(request, ports, people, stack)

    return open_bench


@contextmanager
def open_hardware_bench(request: BenchRequest) -> Iterator[BenchDevices]:
    """The bench with its guard armed and dark; people are asked at the terminal.

    Raises GateRefused without a sign-off or where the gate cannot be armed, DriverError
    where a device does not answer or is not fit, JobRefused for ports given twice.
    """
    with hardware_opener(TerminalPeople(request.say))(request) as devices:
        yield devices


def bench_clock(request: BenchRequest) -> MonotonicBenchClock:
    """Bench time of this run: of its first session's start, by the wall between them.

    A run taken up again goes on counting, and never back.
    """
    journal, now_s = request.journal, time.time()
    zero = journal.meta().get(TIME_ZERO)
    if zero is None:
        journal.set_meta(TIME_ZERO, repr(now_s))
        return MonotonicBenchClock(check=request.stop.check)
    last_s = max((row.bench_s or 0.0 for row in journal.intents()), default=0.0)
    start_s = max(last_s, now_s - float(zero))
    return MonotonicBenchClock(start_s, check=request.stop.check)


class _Doorway:
    """The guard while people are at the bench: a stop ends it, and thereby the wait."""

    def __init__(self, guard: GuardClient, stop: StopSignals) -> None:
        self._guard = guard
        self._stop = stop

    def disarm(self) -> None:
        """Dark and cold, so that the door may be opened. Raises GateTripped."""
        self._guard.disarm()

    def arm(self, person: Person) -> None:
        """Arms once the door was moved. Raises StopRequested and as the guard does."""
        self._stop.on_request = self._guard.stop
        self._stop.check()
        self._guard.arm(person)
        self._stop.on_request = self._guard.dark


def _ports(request: BenchRequest) -> Ports:
    job = request.folder.job
    if job.bench.ports is None:
        raise JobRefused(job.job, f"bench '{job.bench.bench}' has no ports")
    if request.permit.kept is None:
        raise GateRefused(
            f"bench '{job.bench.bench}' has ports: light there needs a sign-off",
            "pitchsweep signoff JOB",
        )
    refuse_same_device(job.job, job.bench.ports)
    return job.bench.ports


def refuse_same_device(job: str, ports: Ports) -> None:
    """Two names of one device would let the controller open the emission line."""
    unit = os.path.realpath(ports.unit.port)
    for name in ("stage", "air", "power"):
        port: SerialPort | None = getattr(ports, name)
        if port is not None and os.path.realpath(port.port) == unit:
            raise JobRefused(
                job,
                f"ports.{name} and ports.unit are the same device, {unit}",
                "give the emission unit a port of its own",
            )


def _open(
    request: BenchRequest, ports: Ports, people: People, stack: ExitStack
) -> BenchDevices:
    job, folder, stop = request.folder.job, request.folder, request.stop
    bench, clock = job.bench, bench_clock(request)
    request.say(f"opening bench '{bench.bench}'")
    camera = open_camera(bench, clock, probe_ms=min(job.recipe.exposures_ms))
    stack.callback(camera.close)
    stop.check()
    history = GateHistory()
    stack.enter_context(entered(request.permit, folder, request.journal, folder.ledger))
    unit = unit_settings(bench, ports.unit.port, ports.unit.dialect, ports.unit.baud)
    config = guard_config(request, unit, None)
    guard = stack.enter_context(start_guard(config, on_event=history.add))
    stage_line = device_line(ports.stage, "stage", stack)
    stage = StageClient(stage_line, clock, bench.stage)
    check_stage(stage, ports)
    sensors = Sensors(
        air=AirSensorClient(device_line(ports.air, "air sensor", stack))
        if ports.air
        else None,
        power=PowerSensorClient(device_line(ports.power, "power sensor", stack))
        if ports.power
        else None,
    )
    doorway = _Doorway(guard, stop)
    doorway.arm(people)
    return BenchDevices(
        stage=stage,
        camera=camera,
        clock=clock,
        world=HardwareWorld(doorway, people, sensors, stop.check),
        gate=_gate(request, guard, sensors, stack),
        gate_history=history.take,
        lasers_by_hand=True,
    )


def _gate(
    request: BenchRequest, guard: GuardClient, sensors: Sensors, stack: ExitStack
) -> GuardGate:
    """The guard as the sweep's gate; what reads the power tells it while lit."""
    plan, bench = request.plan, request.folder.job.bench
    gate = GuardGate(
        guard,
        request.journal,
        request.folder.ledger,
        step_powers_mw(plan, bench),
        step_lasers(plan),
    )
    power = sensors.power
    if power is not None:
        watch = PowerWatch(lambda laser: power.read_mw(), gate.power_read)
        gate.watch = stack.enter_context(watch)
    return gate


def device_line(port: SerialPort, device: str, stack: ExitStack) -> LineClient:
    """The line to what ``port`` names, closed with ``stack``. Raises LineBroke."""
    transport = open_serial(port.port, baud=port.baud)
    stack.callback(transport.close)
    return LineClient(transport, shipped_dialect(port.dialect), device=device)


def check_stage(stage: StageClient, ports: Ports) -> None:
    """Raises DeviceRefused when another stage answers than the bench file names."""
    wanted, found = ports.stage.identity, stage.identify()
    if wanted is not None and found != wanted:
        raise DeviceRefused(
            "stage",
            "wrong-device",
            f"'{found}' answers, the bench file says '{wanted}'",
        )

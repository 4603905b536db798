"""Opens a simulated bench for a session: twin, guard, stage, camera. Acts (processes).

The twin is started before the guard; the guard proves on the emission line that it
speaks to this very twin: the permit, signed or a rehearsal, carries the key made then.
"""

import math
import threading
import time
from collections.abc import Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager
from pathlib import Path

from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.bench_work import (
    permitted_steps,
    step_lasers,
    step_powers_mw,
)
from pitchsweep.acquire.journal_rows import GateRow
from pitchsweep.acquire.power_watch import PowerWatch
from pitchsweep.acquire.run_folder import JOB
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.run_permit import entered
from pitchsweep.acquire.sweep_session import BenchRequest
from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.camera_client import TwinCameraClient
from pitchsweep.drivers.dialect_files import shipped_dialect, shipped_dialect_mapping
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.serial_transport import open_serial
from pitchsweep.drivers.stage_client import StageClient
from pitchsweep.drivers.twin_launcher import start_twin
from pitchsweep.drivers.twin_world_client import TwinWorldClient
from pitchsweep.safety.file_watch import file_sha256
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.guard_client import GuardClient, StageReport, start_guard
from pitchsweep.safety.guard_config import GuardConfig, GuardLimits, UnitSettings
from pitchsweep.safety.ledger import verify
from pitchsweep.safety.safety_errors import GateRefused, GateTripped

STAGE_DIALECT = "rotary-line"
UNIT_DIALECT = "emission-line"
BAUD = 115200
PERSON = "rehearsal"
LOOK_AGAIN_S = 0.05
ACKNOWLEDGE_WITHIN_S = 3.0


class GateHistory:
    """Collects the gate's events from the guard's thread until the journal asks."""

    def __init__(self) -> None:
        self._rows: list[GateRow] = []
        self._lock = threading.Lock()

    def add(self, event: GateEvent) -> None:
        """Takes in one event; called by the guard client's reading thread."""
        row = GateRow(event.utc, None, event.state, event.event, event.reason)
        with self._lock:
            self._rows.append(row)

    def take(self) -> Sequence[GateRow]:
        """What came in since the last call."""
        with self._lock:
            rows, self._rows = self._rows, []
        return rows


class TwinPerson:
    """The twin's person, who opens and closes the door when asked."""

    patience_s = 5.0

    def __init__(self, world: TwinWorldClient) -> None:
        self._world = world

    def open_interlock(self) -> None:
        """Opens the door."""
        self._world.set_door(closed=False)

    def close_interlock(self) -> None:
        """Closes the door."""
        self._world.set_door(closed=True)


class GuardGate:
    """The guard as a sweep's gate; the ledger's head goes into the journal.

    ``powers_mw``: step -> power at the part as the bench file has it, told until (and
    unless) a sensor reads it; ``lasers``: step -> the laser lit there, for ``watch``,
    which reads that sensor.
    """

    def __init__(
        self,
        guard: GuardClient,
        journal: RunJournal,
        ledger: Path,
        powers_mw: Mapping[int, float],
        lasers: Mapping[int, str] | None = None,
    ) -> None:
        self.watch: PowerWatch | None = None
        self._powers_mw = powers_mw
        self._lasers = lasers or {}
        self._read: tuple[float, float] | None = None
        self._guard = guard
        self._journal = journal
        self._ledger = ledger

    def light_on(self, *, step: int, commanded_deg: float, readback_deg: float) -> None:
        """Light at ``step``. Raises GateTripped or GateRefused."""
        power_mw, self._read = self._powers_mw.get(step, math.nan), None
        self._guard.light_on(step, commanded_deg, readback_deg, power_mw)
        if self.watch is not None:
            self.watch.lit(self._lasers.get(step, ""))

    def still_at(self, *, step: int, commanded_deg: float, readback_deg: float) -> None:
        """A fresh reading of the stage, for the next heartbeats."""
        self._guard.check()
        declared = (self._powers_mw.get(step, math.nan), time.monotonic())
        power_mw, power_at_s = self._read or declared
        self._guard.report_stage(
            StageReport(
                step,
                commanded_deg,
                readback_deg,
                time.monotonic(),
                turning=False,
                power_mw=power_mw,
                power_at_s=power_at_s,
            )
        )

    def dark(self) -> None:
        """Dark, returned from when the unit was asked. Raises GateTripped."""
        if self.watch is not None:
            self.watch.dark()
        self._guard.dark()

    def trip(self, reason: str) -> None:
        """Dark and latched."""
        self._guard.trip(reason)

    def end(self) -> None:
        """Dark, and the guard ends; its ledger's count and head are noted."""
        self._guard.stop()
        found = verify(self._ledger)
        self._journal.set_meta("ledger_entries", str(found.count))
        self._journal.set_meta("ledger_head", found.head)

    def power_read(self, power_mw: float) -> None:
        """The power at the part as a sensor has just read it."""
        self._read = (power_mw, time.monotonic())
        self._guard.report_power(power_mw)


@contextmanager
def open_twin_bench(request: BenchRequest) -> Iterator[BenchDevices]:
    """A twin with its guard armed and dark; both end with the block.

    Raises DriverError where a device does not answer, GateRefused or GateTripped where
    the gate cannot be armed.
    """
    job, folder = request.folder.job, request.folder
    bench = job.bench
    with ExitStack() as stack:
        request.say("starting the simulated bench")
        seed = bench.twin.seed if bench.twin else 0
        twin = stack.enter_context(
            start_twin(folder.twin, bench, job.part, seed, lot=job.lot)
        )
        world = TwinWorldClient(twin.address)
        stack.callback(world.close)
        camera = TwinCameraClient(twin.address)
        stack.callback(camera.close)
        request.stop.check()
        history, ledger = GateHistory(), folder.ledger
        stack.enter_context(entered(request.permit, folder, request.journal, ledger))
        unit = unit_settings(bench, twin.unit_port, UNIT_DIALECT, BAUD)
        config = guard_config(request, unit, twin.proof_key)
        guard = stack.enter_context(start_guard(config, on_event=history.add))
        request.stop.on_request = guard.dark
        if request.resumed and guard.tripped.is_set():
            acknowledge_by_twin(guard, world, PERSON)
        guard.arm(TwinPerson(world))
        line = LineClient(
            open_serial(twin.stage_port, baud=BAUD),
            shipped_dialect(STAGE_DIALECT),
            device="stage",
        )
        stage = StageClient(line, world, bench.stage)
        stack.callback(stage.close)
        gate = GuardGate(
            guard,
            request.journal,
            ledger,
            step_powers_mw(request.plan, bench),
            step_lasers(request.plan),
        )
        if bench.power_sensor is not None:
            # A line of its own: the other one may wait for bench time to pass.
            sensor = TwinWorldClient(twin.address)
            stack.callback(sensor.close)
            watch = PowerWatch(sensor.read_meter, gate.power_read)
            gate.watch = stack.enter_context(watch)
        yield BenchDevices(
            stage=stage,
            camera=camera,
            clock=world,
            world=world,
            gate=gate,
            gate_history=history.take,
        )


def guard_config(
    request: BenchRequest, unit: UnitSettings, proof_key: bytes | None
) -> GuardConfig:
    """What the guard works from: unit, permit, permitted steps, files to watch.

    ``proof_key`` is the twin's, None on a bench with ports.
    """
    folder, signed = request.folder, request.permit
    return GuardConfig(
        unit=unit,
        permit=signed.for_guard(proof_key),
        limits=GuardLimits(),
        permitted=permitted_steps(request.plan, folder.job.bench),
        ledger_path=str(folder.ledger),
        run=folder.path.name,
        resumed=request.resumed,
        watched={
            str(folder.path / JOB): file_sha256(folder.path / JOB),
            **signed.watched,
        },
    )


def unit_settings(bench: Bench, port: str, dialect: str, baud: int) -> UnitSettings:
    """The bench's emission unit on ``port``, as the guard is told of it."""
    emission = bench.emission
    words = shipped_dialect_mapping(dialect)
    if not isinstance(words, dict):
        raise GateRefused(f"dialect {dialect} is no mapping", "reinstall")
    return UnitSettings(
        port=port,
        baud=baud,
        dialect=words,
        identity=emission.unit_identity,
        keep_alive_ms=emission.keep_alive_ms,
        has_shutter=emission.switches == "head-shutter",
        line=emission.line,
        channels=emission.interlock_channels,
    )


def acknowledge_by_twin(guard: GuardClient, world: TwinWorldClient, name: str) -> None:
    """The twin's person presses the reset button, then the trip is acknowledged."""
    deadline_s = time.monotonic() + ACKNOWLEDGE_WITHIN_S
    while True:
        # The guard counts a press only if it saw the button's counter before it.
        time.sleep(LOOK_AGAIN_S)
        world.press_reset()
        time.sleep(LOOK_AGAIN_S)
        try:
            guard.acknowledge(name)
        except GateTripped:
            raise
        except GateRefused:
            if time.monotonic() > deadline_s:
                raise
        else:
            return

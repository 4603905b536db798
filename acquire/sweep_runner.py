"""The sweep itself: a loop short enough to read aloud. This module acts (devices)."""

from dataclasses import dataclass

from pitchsweep.acquire.bench_devices import BenchDevices, Shot
from pitchsweep.acquire.resume import Standing
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.step_keeper import StepKeeper, TakenStep
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_plan import Step, SweepPlan
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import Label, SpotReading

SLICE_S = 0.5
"""Longest wait between two looks at the stop flag."""


@dataclass(frozen=True)
class SweepContext:
    """What a sweep needs besides its devices."""

    job: Job
    plan: SweepPlan
    journal: RunJournal
    session: int
    stop: StopSignals


class SweepRunner:
    """Takes the remaining steps of a run, one after the other."""

    def __init__(
        self, context: SweepContext, devices: BenchDevices, keeper: StepKeeper
    ) -> None:
        self._context = context
        self._devices = devices
        self._keeper = keeper
        self._zero_checks = 0

    def run(self, standing: Standing) -> None:
        """Homes, checks the zero order, takes every remaining step; dark at the end.

        Raises StopRequested, GateTripped, DriverError, StorageFailed; the gate was
        asked for dark by then.
        """
        self._zero_checks = standing.zero_checks
        self._find_what_was_not_found(standing)
        try:
            self._devices.gate.dark()
            self._devices.stage.home()
            seat: tuple[int, str] | None = None
            for step in standing.remaining:
                if (step.mount, step.laser) != seat:
                    seat = self._begin_group(step, seat)
                self._take(step, step.first_frame)
            self._keeper.drain()
        finally:
            self._devices.gate.dark()

    def _find_what_was_not_found(self, standing: Standing) -> None:
        """Finds spots of steps that an earlier session kept but had no time for."""
        for row in standing.done.values():
            if self._context.journal.spots(row.intent) is None:
                self._keeper.find_again(row)

    def _begin_group(self, step: Step, seat: tuple[int, str] | None) -> tuple[int, str]:
        """Seats the part, then waits until the zero order was found where it should."""
        self._keeper.drain()
        if seat is None or seat[0] != step.mount:
            self._devices.world.seat_part(step.mount, step.mount_deg)
        check = self._context.plan.zero_check_for(step)
        number = self._context.plan.frames + self._zero_checks * len(check.exposures_ms)
        self._zero_checks += 1
        self._take(check, number)
        self._keeper.drain()
        return step.mount, step.laser

    def _take(self, step: Step, first_frame: int) -> None:
        self._context.stop.check()
        devices = self._devices
        intent = self._context.journal.intend(self._context.session, step)
        darks = self._dark_shots(step)
        devices.stage.move_to(step.stage_deg)
        self._wait(self._context.job.bench.stage.settle_s)
        reading = devices.stage.where()
        self._keeper.raise_failure()
        try:
            devices.gate.light_on(
                step=step.step,
                commanded_deg=step.stage_deg,
                readback_deg=reading.angle_deg,
            )
            lights, readings = self._expose(step)
            # A stop during the last exposure made it dark: it must not count.
            self._context.stop.check()
        finally:
            devices.gate.dark()
        self._keeper.put(
            TakenStep(
                step=step,
                intent=intent,
                readback_deg=reading.angle_deg,
                bench_s=devices.clock.now_s(),
                first_frame=first_frame,
                darks=darks,
                lights=lights,
                readings=readings,
            )
        )

    def _wait(self, seconds: float) -> None:
        left_s = seconds
        while left_s > 0.0:
            self._devices.clock.wait(min(left_s, SLICE_S))
            left_s -= SLICE_S
            self._context.stop.check()

    def _dark_shots(self, step: Step) -> tuple[Shot, ...]:
        if not step.dark_due or self._context.job.recipe.record != "frames":
            return ()
        first = len(step.exposures_ms)
        return tuple(
            self._shot(step, exposure_ms, number)
            for number, exposure_ms in enumerate(step.exposures_ms, first)
        )

    def _expose(
        self, step: Step
    ) -> tuple[tuple[Shot, ...], tuple[SpotReading, ...] | None]:
        """Light shots, or readings of the spots door; the gate is lit."""
        if self._context.job.recipe.record == "spots":
            self._context.stop.check()
            return (), tuple(self._devices.world.spots(label_for(step, 0)))
        shots = []
        for number, exposure_ms in enumerate(step.exposures_ms):
            if number:
                self._tell_stage(step)
            shots.append(self._shot(step, exposure_ms, number))
        return tuple(shots), None

    def _tell_stage(self, step: Step) -> None:
        """Keeps what the gate knows of the stage fresh between long exposures."""
        reading = self._devices.stage.where()
        self._devices.gate.still_at(
            step=step.step,
            commanded_deg=step.stage_deg,
            readback_deg=reading.angle_deg,
        )

    def _shot(self, step: Step, exposure_ms: float, number: int) -> Shot:
        self._context.stop.check()
        label = label_for(step, number)
        return Shot(exposure_ms, label, self._devices.camera.expose(exposure_ms, label))


def label_for(step: Step, exposure: int) -> Label:
    """The label of one exposure: equal whenever the step is repeated.

    Light exposures count from 0, dark ones go on after them.
    """
    return Label(
        mount=step.mount,
        laser=step.laser,
        repeat=0,
        step=step.step,
        exposure=exposure,
        planned_s=step.planned_s,
    )

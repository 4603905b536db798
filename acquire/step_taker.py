"""One step: move, settle, light, expose, sense, dark, hand over. Acts (devices)."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from pitchsweep.acquire.acquire_errors import FaultMet
from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.bench_watch import Sensed, after_reading
from pitchsweep.acquire.disk_room import free_bytes, why_nearly_full
from pitchsweep.acquire.exposures import Exposures, ShotToCome, wait_for
from pitchsweep.acquire.fault_policy import reaction
from pitchsweep.acquire.live_judge import LaserJumped
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.step_keeper import SpoiltStep, StepKeeper, TakenStep
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_plan import Step, SweepPlan
from pitchsweep.acquire.sweep_reporter import SweepReporter
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import BenchReading, Label, SpotReading
from pitchsweep.drivers.driver_errors import DriverError

SLICE_S = 0.5
"""Longest wait between two looks at the stop flag."""


@dataclass(frozen=True)
class SweepContext:
    """What a sweep needs besides its devices.

    ``why_over`` is asked before every step and says why the sweep ends here, if it
    does; ``jumps`` is asked likewise for jumps of a laser's wavelength; ``soaked_s`` is
    how long the bench was left to settle before the first step.
    """

    job: Job
    plan: SweepPlan
    journal: RunJournal
    session: int
    stop: StopSignals
    report: SweepReporter
    why_over: Callable[[Step], str | None] = lambda step: None
    jumps: Callable[[Step], Sequence[LaserJumped]] = lambda step: ()
    soaked_s: float = 0.0


class StepTaker:
    """Takes one step at a time, once; whatever happens it is dark afterwards.

    The last frame of a step is read out while the stage turns to the next one, and
    must be there before the next light.
    """

    def __init__(
        self,
        context: SweepContext,
        devices: BenchDevices,
        keeper: StepKeeper,
        exposures: Exposures,
    ) -> None:
        self._context = context
        self._devices = devices
        self._keeper = keeper
        self._exposures = exposures
        self._sensed = Sensed()
        self._last: TakenStep | None = None
        self._lost: list[SpoiltStep] = []

    def take(self, step: Step, first_frame: int | None = None, tries: int = 0) -> None:
        """Takes ``step`` and hands it to the keeper.

        Its frames are numbered from ``first_frame``, or from a number that nothing else
        has. Raises DriverError or FaultMet, the intent being noted as failed. What is
        wrong with the last frame of a step shows in ``take_lost``.
        """
        context, devices = self._context, self._devices
        context.stop.check()
        intent = context.journal.intend(context.session, step)
        try:
            self._check_disk(step)
            darks = self._dark_shots(step)
            devices.stage.move_to(step.stage_deg)
            self._wait(context.job.bench.stage.settle_s)
            reading = devices.stage.where()
            self._keeper.raise_failure()
            self.wait_for_frames()
            try:
                devices.gate.light_on(
                    step=step.step,
                    commanded_deg=step.stage_deg,
                    readback_deg=reading.angle_deg,
                )
                lights, readings = self._expose(step)
                sensed = self._sense(step)
                # A stop during the last exposure made it dark: it must not count.
                context.stop.check()
            finally:
                devices.gate.dark()
            wait_for((*darks, *(lights[:-1] if step.kind == "step" else lights)))
        except (DriverError, FaultMet) as error:
            context.journal.fail(intent, " ".join(str(error).split()))
            raise
        if first_frame is None:
            # A number that no other step, check or attempt has.
            most = 2 * len(step.exposures_ms)
            first_frame = context.plan.frames + intent * most
        self._last = TakenStep(
            step=step,
            intent=intent,
            readback_deg=reading.angle_deg,
            bench_s=devices.clock.now_s(),
            first_frame=first_frame,
            darks=darks,
            lights=lights,
            readings=readings,
            sensed=sensed,
            tries=tries,
        )
        self._keeper.put(self._last)

    def wait_for_frames(self) -> None:
        """Returns when every frame exposed so far is there, or known to be lost."""
        last, self._last = self._last, None
        if last is None:
            return
        try:
            wait_for(last.lights)
        except DriverError as error:
            lost = SpoiltStep(last.step, last.intent, error, last.tries, lost=True)
            self._lost.append(lost)

    def take_lost(self) -> list[SpoiltStep]:
        """Steps whose last frame was lost, since the last call."""
        lost, self._lost = self._lost, []
        return lost

    def _check_disk(self, step: Step) -> None:
        folder = self._context.journal.path.parent
        why = why_nearly_full(self._context.job, step, free_bytes(folder))
        if why is not None:
            raise FaultMet("disk_low", why)

    def _sense(self, step: Step) -> BenchReading:
        """What the sensors say while the light is on; raises FaultMet by policy."""
        bench, report = self._context.job.bench, self._context.report
        if bench.air_sensor is None and bench.power_sensor is None:
            return BenchReading()
        planned_s = step.planned_s + self._context.soaked_s
        reading = self._devices.world.sense(step.laser, planned_s)
        part = self._context.job.part_in(step.mount)
        found = after_reading(self._sensed, reading, bench=bench, part=part, step=step)
        self._sensed = found.state
        if found.warning:
            report.warning(step, found.warning)
        if found.fault is None:
            return reading
        policies = self._context.job.recipe.faults
        does = reaction(policies, found.fault.kind, 0)
        if does.does != "note":
            raise found.fault
        report.fault(step, found.fault.kind, found.fault.detail, does)
        return reading

    def _wait(self, seconds: float) -> None:
        left_s = seconds
        while left_s > 0.0:
            self._devices.clock.wait(min(left_s, SLICE_S))
            left_s -= SLICE_S
            self._context.stop.check()

    def _dark_shots(self, step: Step) -> tuple[ShotToCome, ...]:
        if not step.dark_due or self._context.job.recipe.record != "frames":
            return ()
        first = len(step.exposures_ms)
        return tuple(
            self._shot(step, exposure_ms, number)
            for number, exposure_ms in enumerate(step.exposures_ms, first)
        )

    def _expose(
        self, step: Step
    ) -> tuple[tuple[ShotToCome, ...], tuple[SpotReading, ...] | None]:
        """Light shots, or readings of the spots door; the gate is lit."""
        if self._context.job.recipe.record == "spots":
            self._context.stop.check()
            label = label_for(step, 0, self._context.soaked_s)
            return (), tuple(self._devices.world.spots(label))
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

    def _shot(self, step: Step, exposure_ms: float, number: int) -> ShotToCome:
        self._context.stop.check()
        label = label_for(step, number, self._context.soaked_s)
        return self._exposures.take(exposure_ms, label)


def label_for(step: Step, exposure: int, soaked_s: float = 0.0) -> Label:
    """The label of one exposure: equal whenever the step is repeated.

    Light exposures count from 0, dark ones go on after them.
    """
    return Label(
        mount=step.mount,
        laser=step.laser,
        repeat=step.repeat,
        step=step.step,
        exposure=exposure,
        planned_s=step.planned_s + soaked_s,
    )

"""Keeps what a step gave while the stage moves on. This module acts (thread, disk).

One worker thread takes exposed steps from a bounded queue: frames durable, then the
step acknowledged, then its spots found and recorded, then the zero order watched. A
failure there reaches the sweep at its next call.
"""

import queue
import threading
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Self

from pitchsweep.acquire.acquire_errors import FaultMet
from pitchsweep.acquire.bench_devices import FindSpots, Gate, Shot
from pitchsweep.acquire.bench_watch import spots_fault
from pitchsweep.acquire.exposures import ShotToCome, wait_for
from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_rows import (
    FrameRow,
    GateRow,
    IntentRow,
    ReadingRow,
    SpotRow,
    StepSpots,
)
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.stored_spots import dark_shots, light_shots
from pitchsweep.acquire.sweep_plan import Step, group_of
from pitchsweep.acquire.zero_order_watch import (
    WatchState,
    ZeroPrediction,
    after_exposure,
    predict_zero_order,
)
from pitchsweep.analysis.pixel_map import screen_from_pixels
from pitchsweep.analysis.records import Rejection
from pitchsweep.configs.bench_model import Camera
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import BenchReading, SpotReading
from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety.safety_errors import GateTripped

NO_LIGHT = (Rejection.TOO_FAINT.value, Rejection.ON_MARK.value)
DEPTH = 1
"""Steps that may wait, besides one being kept and one being taken: bounds memory."""


@dataclass(frozen=True)
class TakenStep:
    """What was exposed at a step; ``readings`` is None unless spots were recorded.

    Frames may still be on their way.
    """

    step: Step
    intent: int
    readback_deg: float
    bench_s: float
    first_frame: int
    darks: tuple[ShotToCome, ...]
    lights: tuple[ShotToCome, ...]
    readings: tuple[SpotReading, ...] | None
    sensed: BenchReading = BenchReading()
    tries: int = 0


@dataclass(frozen=True)
class SpoiltStep:
    """A step whose spots are not as they should be, or (``lost``) without frames."""

    step: Step
    intent: int
    fault: FaultMet | DriverError
    tries: int
    lost: bool = False


@dataclass(frozen=True)
class KeeperTools:
    """What the keeper works with; ``on_kept`` is told of every step kept."""

    job: Job
    journal: RunJournal
    store: FrameStore
    find: FindSpots
    gate: Gate
    gate_history: Callable[[], Sequence[GateRow]]
    on_kept: Callable[[Step, StepSpots], None]


class StepKeeper:
    """The worker; use it in a ``with`` block, call ``drain`` before trusting it."""

    def __init__(self, tools: KeeperTools) -> None:
        self._tools = tools
        self._queue: queue.Queue[TakenStep | IntentRow | None] = queue.Queue(DEPTH)
        self._failure: BaseException | None = None
        self._darks: tuple[Shot, ...] | None = None
        self._group: tuple[int, int, str] | None = None
        self._watch = WatchState()
        self._spoilt: queue.SimpleQueue[SpoiltStep] = queue.SimpleQueue()
        self._thread = threading.Thread(target=self._serve, name="keeper", daemon=True)

    def __enter__(self) -> Self:
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._queue.put(None)
        self._thread.join()

    def put(self, taken: TakenStep) -> None:
        """Hands a step over; waits while the queue is full. Raises what went wrong."""
        self.raise_failure()
        self._queue.put(taken)

    def find_again(self, row: IntentRow) -> None:
        """Finds the spots of an acknowledged step again, from its stored frames."""
        self.raise_failure()
        self._queue.put(row)

    def drain(self) -> None:
        """Returns when everything handed over is kept. Raises what went wrong."""
        self._queue.join()
        self.raise_failure()

    def take_faults(self) -> list[SpoiltStep]:
        """Steps found wanting since the last call. Raises what went wrong."""
        self.raise_failure()
        taken = []
        while not self._spoilt.empty():
            taken.append(self._spoilt.get())
        return taken

    def raise_failure(self) -> None:
        """Raises what the worker met, if anything."""
        if self._failure is not None:
            raise self._failure

    def _serve(self) -> None:
        while (item := self._queue.get()) is not None:
            try:
                # After a failure nothing more is acknowledged; it stays in doubt.
                if self._failure is None:
                    self._handle(item)
            except BaseException as error:
                self._failure = error
            finally:
                self._queue.task_done()
        self._queue.task_done()

    def _handle(self, item: TakenStep | IntentRow) -> None:
        if isinstance(item, TakenStep):
            self._keep(item)
        else:
            found = self._find_stored(item)
            self._tools.journal.record_spots(item.intent, found)

    def _keep(self, taken: TakenStep) -> None:
        tools, step = self._tools, taken.step
        try:
            darks, lights = wait_for(taken.darks), wait_for(taken.lights)
        except DriverError as error:
            # The sweep meets the same fault, and the recipe says what it does then.
            tools.journal.fail(taken.intent, " ".join(str(error).split()))
            return
        numbered = list(enumerate(darks + lights, taken.first_frame))
        rows = [
            self._stored(number, shot, "dark" if index < len(darks) else "light")
            for index, (number, shot) in enumerate(numbered)
        ]
        found = spots_from_door(taken.readings)
        with tools.journal.transaction():
            for event in tools.gate_history():
                tools.journal.record_gate(event)
            tools.journal.acknowledge(
                taken.intent,
                readback_deg=taken.readback_deg,
                bench_s=taken.bench_s,
                frames=rows,
                spots=found,
            )
        if step.kind == "step" and (darks or self._group != group_of(step)):
            # Never those of another mount or laser.
            self._darks, self._group = darks or None, group_of(step)
        if found is None:
            found = tools.find(step.step, lights, self._darks_for(step))
            tools.journal.record_spots(taken.intent, found)
        self._note_reading(taken, found)
        tools.on_kept(step, found)
        self._watch_zero_order(step, found)
        self._judge_spots(taken, found)

    def _note_reading(self, taken: TakenStep, found: StepSpots) -> None:
        job, step = self._tools.job, taken.step
        part = job.part_in(step.mount)
        zero = predict_zero_order(job.bench, part, step.incidence_deg)
        row = reading_row(taken.sensed, found, zero)
        if row != ReadingRow():
            self._tools.journal.record_reading(taken.intent, row)

    def _judge_spots(self, taken: TakenStep, found: StepSpots) -> None:
        job, step = self._tools.job, taken.step
        fault = spots_fault(
            found,
            light_seen_mm(found, job.bench.camera),
            bench=job.bench,
            part=job.part_in(step.mount),
            step=step,
        )
        if fault is not None and step.kind == "step":
            self._spoilt.put(SpoiltStep(step, taken.intent, fault, taken.tries))

    def _darks_for(self, step: Step) -> tuple[Shot, ...]:
        if step.kind != "step":
            return ()
        if self._darks is None:
            # This session began in mid-course: an earlier one took them.
            self._darks = dark_shots(self._tools.journal, self._tools.store, step)
        return self._darks

    def _stored(self, number: int, shot: Shot, kind: str) -> FrameRow:
        stored = self._tools.store.keep(number, shot.frame)
        label = shot.label
        return FrameRow(
            file=stored.file,
            sha256=stored.sha256,
            kind=kind,
            exposure_ms=shot.exposure_ms,
            mount=label.mount,
            laser=label.laser,
            repeat=label.repeat,
            step=label.step,
            exposure=label.exposure,
            planned_s=label.planned_s,
        )

    def _find_stored(self, row: IntentRow) -> StepSpots:
        tools = self._tools
        darks = dark_shots(tools.journal, tools.store, row)
        return tools.find(row.step, light_shots(tools.journal, tools.store, row), darks)

    def _watch_zero_order(self, step: Step, found: StepSpots) -> None:
        first = step.kind == "zero-check"
        self._watch = after_exposure(
            WatchState() if first else self._watch,
            bench=self._tools.job.bench,
            part=self._tools.job.part_in(step.mount),
            incidence_deg=step.incidence_deg,
            spots_mm=light_seen_mm(found, self._tools.job.bench.camera),
            first_after_homing=first,
        )
        if self._watch.trip_reason:
            self._tools.gate.trip(self._watch.trip_reason)
            raise GateTripped("zero-order", self._watch.trip_reason)


def light_seen_mm(found: StepSpots, camera: Camera) -> list[tuple[float, float]]:
    """Where light was seen, measurable or not: a lopsided zero order is not lost."""
    seen = [(spot.x_mm, spot.y_mm) for spot in found.spots]
    seen += [
        screen_from_pixels(item.x, item.y, camera)
        if item.unit == "px"
        else (item.x, item.y)
        for item in found.rejected
        if item.reason not in NO_LIGHT
    ]
    return seen


def reading_row(
    sensed: BenchReading, found: StepSpots, zero: ZeroPrediction
) -> ReadingRow:
    """Sensors, and the spot nearest to where the zero order should be."""
    air = sensed.air
    there = [s for s in found.spots if zero.has(s.x_mm, s.y_mm)]
    spot = min(there, key=lambda s: abs(s.x_mm - zero.x_mm), default=None)
    return ReadingRow(
        air_C=None if air is None else air.temperature_C,
        pressure_hPa=None if air is None else air.pressure_hPa,
        humidity_percent=None if air is None else air.humidity_percent,
        part_C=None if air is None else air.part_temperature_C,
        power_mw=sensed.power_mw,
        zero_x_mm=None if spot is None else spot.x_mm,
        zero_y_mm=None if spot is None else spot.y_mm,
        zero_brightness=None if spot is None else spot.brightness,
    )


def spots_from_door(readings: Sequence[SpotReading] | None) -> StepSpots | None:
    """Readings of the spots door as journal rows; None stays None."""
    if readings is None:
        return None
    return StepSpots(
        tuple(
            SpotRow(r.x_mm, r.y_mm, r.ux_mm, r.uy_mm, 0.0, r.brightness)
            for r in readings
        )
    )

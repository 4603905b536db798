"""A run's acknowledged spots as a fit input. This module acts (disk).

Works from ``job.yaml``, ``run.db`` and ``frames/`` alone; a twin's folder is never
looked into.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.fit_input import TURN_DEG, FitInput, order_table
from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.journal_rows import (
    FaultRow,
    GateRow,
    IntentRow,
    ReadingRow,
    StepSpots,
)
from pitchsweep.acquire.measured_state import state_of
from pitchsweep.acquire.resume import standing
from pitchsweep.acquire.run_folder import (
    RunFolder,
    open_run_folder,
    refuse_another_job,
)
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.spot_places import (
    StepPlace,
    places_of,
    rejected_of,
    saturation_warnings,
)
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.acquire.stored_spots import spots_of
from pitchsweep.acquire.sweep_plan import SweepPlan, plan_sweep
from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.typed_command import typed


@dataclass(frozen=True)
class KeptStep:
    """An acknowledged step and its spots; ``frames`` are its light frame files."""

    row: IntentRow
    found: StepSpots
    frames: tuple[tuple[str, str, float], ...]

    @property
    def stage_deg(self) -> float:
        """Where the stage said it stood."""
        read = self.row.readback_deg
        return self.row.stage_deg if read is None else read


@dataclass(frozen=True)
class RunRecord:
    """Everything a report needs of a run."""

    folder: RunFolder
    steps: tuple[KeptStep, ...]
    planned: int
    meta: dict[str, str]
    sessions: list[tuple[int, str, str, str | None, str | None]]
    gate: list[GateRow]
    faults: list[FaultRow]
    readings: dict[int, ReadingRow] = field(default_factory=dict)


def read_run(path: Path) -> RunRecord:
    """The record of the run at ``path``.

    Raises RunRefused, SettingsRefused, StorageFailed (a frame that must be searched
    again is missing or changed).
    """
    folder = open_run_folder(path)
    plan = plan_sweep(folder.job, fingerprint(folder.job))
    with open_journal(folder.journal, read_only=True) as journal:
        refuse_another_job(folder, journal.meta().get("job_fingerprint"))
        return record_of(folder, plan, journal)


def record_of(
    folder: RunFolder, plan: SweepPlan, journal: RunJournal, before: int | None = None
) -> RunRecord:
    """The record of what ``journal`` holds, of steps ``before`` that number only.

    Raises RunRefused, StorageFailed.
    """
    try:
        now = standing(plan, journal.intents())
    except ValueError as error:
        raise RunRefused(folder.path, str(error)) from None
    store = FrameStore(folder.path)
    find = spot_finder(folder.job.bench)
    rows = [row for row in now.done.values() if before is None or row.step < before]
    readings = journal.readings()
    return RunRecord(
        folder=folder,
        steps=tuple(
            KeptStep(row, spots_of(journal, store, row, find), _lights(journal, row))
            for row in rows
        ),
        planned=len(plan.steps),
        meta=journal.meta(),
        sessions=journal.sessions(),
        gate=journal.gate_events(),
        faults=journal.faults(),
        readings={
            row.step: readings[row.intent] for row in rows if row.intent in readings
        },
    )


def input_from_run(record: RunRecord) -> FitInput:
    """The run's spots as a fit input. Raises NoResult if no step is acknowledged.

    Of a lot: those of the part that the run is about, and of the references.
    """
    job = record.folder.job
    if job.lot:
        return input_of_part(record, job.part)
    return whole_input(record)


def inputs_from_run(record: RunRecord) -> tuple[FitInput, ...]:
    """A fit input for each part to be measured that has been seen, the first first.

    There is one where the run has one part. Raises NoResult where there is none.
    """
    job = record.folder.job
    if not job.lot:
        return (whole_input(record),)
    seen = {job.part_in(step.row.mount) for step in record.steps}
    wanted = [part for part in job.parts if part.certified is None and part in seen]
    return tuple(input_of_part(record, part) for part in wanted) or (
        input_of_part(record, job.part),
    )


def input_of_part(record: RunRecord, part: Part) -> FitInput:
    """The spots of one part of a lot with those of all references of the lot.

    They stay one run: what wanders does so over the whole of it, so that the
    references before and after a part tell how its wavelength moved meanwhile. Raises
    NoResult where the part was not seen yet.
    """
    job, whole = record.folder.job, whole_input(record)
    seats = {step.row.step: job.seat_of(step.row.mount) for step in record.steps}
    here = {step for step, seat in seats.items() if job.seated[seat] == part}
    if not here:
        raise NoResult(
            f"{record.folder.path}: no step of {part.part}, serial {part.serial},"
            f" {part.place}, is acknowledged yet",
            remedy=f"go on with: {typed('sweep', '--resume', record.folder.path)}",
        )
    references = tuple(p for p in job.parts if p.certified is not None)
    parts = (part, *references)
    number = {s: _place_in(parts, job.seated[seat]) for s, seat in seats.items()}
    index = np.array([number[int(s)] for s in whole.table.step], dtype=np.int64)
    table = replace(whole.table, part=index)
    return replace(
        whole,
        table=table.take(index >= 0),
        part=part,
        references=references,
        rejected=tuple(r for r in whole.rejected if number.get(r.step, -1) >= 0),
        measured=tuple(
            state_of(
                reading
                for step, reading in record.readings.items()
                if number.get(step) == place
            )
            for place in range(len(parts))
        ),
    )


def _place_in(parts: Sequence[Part], part: Part) -> int:
    return parts.index(part) if part in parts else -1


def whole_input(record: RunRecord) -> FitInput:
    """All spots of a run, whatever part they are of. Raises NoResult as above.

    Every part of a lot as seated has mounts of its own: they are told apart by whole
    turns of ``mount_deg``, which change no angle.
    """
    job = record.folder.job
    if not record.steps:
        raise NoResult(
            f"{record.folder.path}: no step of this run is acknowledged yet",
            remedy=f"go on with: {typed('sweep', '--resume', record.folder.path)}",
        )
    warnings = []
    ended_early = record.meta.get("ended_early")
    if ended_early:
        warnings.append(
            f"the sweep ended after {len(record.steps)} of {record.planned} steps: "
            f"{ended_early}"
        )
    elif len(record.steps) < record.planned:
        warnings.append(
            f"the sweep is incomplete: {len(record.steps)} of {record.planned} steps"
        )
    warnings += fault_warnings(record.faults)
    warnings += saturation_warnings(
        [step.found for step in record.steps], "add a shorter exposure to the recipe"
    )
    places = places_of([(s.found, _place(s, job)) for s in record.steps])
    return FitInput(
        name=str(record.folder.path),
        table=order_table(places, job.recipe.lasers),
        bench=job.bench,
        part=job.part,
        coverage=job.recipe.coverage,
        rejected=tuple(
            r for step in record.steps for r in rejected_of(step.found, step.row.step)
        ),
        warnings=tuple(warnings),
        measured=(state_of(record.readings.values()),),
    )


def fault_warnings(faults: Sequence[FaultRow]) -> list[str]:
    """What faults a result must be read with, each kind and policy once."""
    seen: dict[tuple[str, str], list[FaultRow]] = {}
    for fault in faults:
        seen.setdefault((fault.what, fault.policy.split(",")[0]), []).append(fault)
    return [_in_words(rows) for rows in seen.values()]


def _in_words(rows: list[FaultRow]) -> str:
    first = rows[0]
    if first.what == "warning":
        return first.detail if len(rows) == 1 else f"{first.detail} (and more)"
    steps = sorted({row.step for row in rows if row.step is not None})
    where = f" at step {', '.join(map(str, steps[:5]))}" if steps else ""
    more = ", ..." if len(steps) > 5 else ""
    return (
        f"fault met during the sweep: {first.detail}{where}{more} "
        f"({first.what}: {first.policy})"
    )


def _place(step: KeptStep, job: Job) -> StepPlace:
    """Slow processes of a twin follow its plan, those of a real bench its clock."""
    row = step.row
    on_clock = job.bench.ports is not None and row.bench_s is not None
    return StepPlace(
        step=row.step,
        stage_deg=step.stage_deg,
        mount_deg=row.mount_deg + TURN_DEG * job.seat_of(row.mount),
        laser=row.laser,
        time_s=row.bench_s if on_clock else row.planned_s,
        face_deg=job.recipe.face_of(row.mount),
    )


def _lights(journal: RunJournal, row: IntentRow) -> tuple[tuple[str, str, float], ...]:
    return tuple(
        (frame.file, frame.sha256, frame.exposure_ms)
        for frame in journal.frames(row.intent)
        if frame.kind == "light"
    )

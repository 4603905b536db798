"""One session of a run: lock, journal, bench, runner, ending. Acts (all of them)."""

import sqlite3
import sys
from collections.abc import Callable
from contextlib import AbstractContextManager, ExitStack, suppress
from dataclasses import dataclass
from pathlib import Path

from pitchsweep.acquire.acquire_errors import JobRefused, RunRefused
from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.bench_lock import refuse_network_folder, take_bench_lock
from pitchsweep.acquire.disk_room import frames_left, free_bytes, why_too_small
from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_file import create_journal, open_journal
from pitchsweep.acquire.live_fit import LiveFit
from pitchsweep.acquire.live_judge import LiveJudge, told_before
from pitchsweep.acquire.progress import Progress, clock_text
from pitchsweep.acquire.resume import Standing, standing
from pitchsweep.acquire.run_folder import (
    RunFolder,
    create_run_folder,
    open_run_folder,
    refuse_another_job,
)
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.run_lock import RunLock, take_run_lock
from pitchsweep.acquire.run_permit import RunPermit, permit_for
from pitchsweep.acquire.session_ending import ending
from pitchsweep.acquire.shown_steps import ShownSteps
from pitchsweep.acquire.status_file import StatusFile
from pitchsweep.acquire.step_keeper import KeeperTools, StepKeeper
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.acquire.step_taker import SweepContext
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_end import SweepEnd
from pitchsweep.acquire.sweep_plan import SweepPlan, plan_sweep
from pitchsweep.acquire.sweep_reporter import SweepReporter
from pitchsweep.acquire.sweep_runner import SweepRunner
from pitchsweep.acquire.sweep_start import make_ready
from pitchsweep.acquire.telling import Teller
from pitchsweep.acquire.unacknowledged import refuse_unacknowledged
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.run_refusals import refuse_unsafe

SWITCH_INTERVAL_S = 0.0005


@dataclass(frozen=True)
class BenchRequest:
    """What a bench is opened for; ``resumed`` makes the gate start tripped."""

    folder: RunFolder
    plan: SweepPlan
    journal: RunJournal
    stop: StopSignals
    resumed: bool
    say: Callable[[str], None]
    permit: RunPermit = RunPermit()


OpenBench = Callable[[BenchRequest], AbstractContextManager[BenchDevices]]


def sweep_job(
    job: Job, runs: Path, progress: Progress, open_bench: OpenBench
) -> RunFolder:
    """Sweeps ``job`` into a new folder under ``runs`` and returns it when complete.

    Raises JobRefused and GateRefused before anything moves; SweepStopped, GateTripped,
    DriverError, StorageFailed later, the bench dark and the journal closed by then.
    """
    plan = plan_sweep(job, fingerprint(job))
    refuse_unsafe(job)
    permit = permit_for(job, plan, progress.say)
    runs.mkdir(parents=True, exist_ok=True)
    refuse_network_folder(runs)
    too_small = why_too_small(job, frames_left(plan, plan.steps), free_bytes(runs))
    if too_small:
        raise JobRefused(job.job, f"{runs}: {too_small}", "make space, or --runs DIR")
    bench_lock = take_bench_lock(runs, job.bench, progress.say)
    try:
        return _sweep_into(runs, job, plan, progress, open_bench, permit)
    finally:
        bench_lock.release()


def _sweep_into(
    runs: Path,
    job: Job,
    plan: SweepPlan,
    progress: Progress,
    open_bench: OpenBench,
    permit: RunPermit,
) -> RunFolder:
    folder = create_run_folder(runs, job)
    progress.say(
        f"{len(plan.steps)} steps, {clock_text(plan.duration_s)} of bench time; "
        f"run folder {folder.path}"
    )
    lock = take_run_lock(folder.path)
    try:
        with create_journal(folder.journal) as journal:
            _note_job(journal, job)
            _session(
                folder,
                plan,
                journal,
                progress,
                open_bench,
                owner=lock.owner,
                permit=permit,
            )
    finally:
        lock.release()
    return folder


def resume_run(path: Path, progress: Progress, open_bench: OpenBench) -> RunFolder:
    """Goes on with the run at ``path``; returns it when complete.

    Counts as a trip: a twin's person acknowledges it, on hardware ``ack`` comes before.
    Raises GateRefused for a run that nobody acknowledged, RunRefused for a folder that
    is no run, is in use or does not fit its job, and what ``sweep_job`` raises.
    """
    folder = open_run_folder(path)
    if folder.job.bench.ports is not None:
        refuse_unacknowledged(folder.ledger, folder.path.name, folder.path)
    plan = plan_sweep(folder.job, fingerprint(folder.job))
    refuse_unsafe(folder.job)
    permit = permit_for(folder.job, plan, progress.say)
    lock = take_run_lock(folder.path)
    bench_lock: RunLock | None = None
    try:
        bench_lock = take_bench_lock(folder.path.parent, folder.job.bench, progress.say)
        with _journal_to_go_on(folder) as journal:
            journal.set_meta("ended_early", "")
            _check_same_job(folder, journal)
            progress.say(_where_it_stands(folder, plan, journal))
            _session(
                folder,
                plan,
                journal,
                progress,
                open_bench,
                owner=lock.owner,
                permit=permit,
                resumed=True,
            )
    finally:
        lock.release()
        if bench_lock is not None:
            bench_lock.release()
    return folder


def standing_of(folder: RunFolder, plan: SweepPlan, journal: RunJournal) -> Standing:
    """Where the run stands. Raises RunRefused if the journal is of another job."""
    try:
        return standing(plan, journal.intents())
    except ValueError as error:
        raise RunRefused(folder.path, str(error)) from None


def _journal_to_go_on(folder: RunFolder) -> RunJournal:
    # A run killed before its journal was there has nothing acknowledged.
    if not folder.journal.exists():
        journal = create_journal(folder.journal)
        _note_job(journal, folder.job)
        return journal
    return open_journal(folder.journal)


def _note_job(journal: RunJournal, job: Job) -> None:
    """Which job this is, and which part is in which mount where it has a lot."""
    journal.set_meta("job_fingerprint", fingerprint(job))
    if job.lot:
        for mount in range(len(job.lot) * len(job.recipe.mounts_deg)):
            part = job.part_in(mount)
            words = f"{part.part}, serial {part.serial}, {part.place}"
            journal.set_meta(f"part_in_mount_{mount}", words)


def _check_same_job(folder: RunFolder, journal: RunJournal) -> None:
    known = journal.meta().get("job_fingerprint")
    if known is None:
        journal.set_meta("job_fingerprint", fingerprint(folder.job))
    refuse_another_job(folder, known)


def _where_it_stands(folder: RunFolder, plan: SweepPlan, journal: RunJournal) -> str:
    now = standing_of(folder, plan, journal)
    return (
        f"going on with {folder.path}: {len(now.done)} steps done, "
        f"{len(now.in_doubt)} in doubt and repeated, {len(now.remaining)} remaining"
    )


def _session(
    folder: RunFolder,
    plan: SweepPlan,
    journal: RunJournal,
    progress: Progress,
    open_bench: OpenBench,
    *,
    owner: str,
    permit: RunPermit,
    resumed: bool = False,
) -> None:
    now = standing_of(folder, plan, journal)
    if not now.remaining:
        return
    job = folder.job
    # The thread that drives the bench gets its turn soon, whatever the others compute.
    sys.setswitchinterval(SWITCH_INTERVAL_S)
    session = journal.begin_session(owner)
    teller = Teller(job.schedule, folder.path.name, progress.say)
    report = SweepReporter(journal, progress.say, StatusFile(folder.path), teller)
    report.state("starting", steps_done=len(now.done), steps=len(plan.steps))
    with StopSignals() as stop, ending(folder, session, stop, report):
        request = BenchRequest(
            folder, plan, journal, stop, resumed, progress.say, permit
        )
        with ExitStack() as stack, open_bench(request) as devices:
            stop.on_request = devices.gate.dark
            stop.check()
            start = make_ready(job, devices, journal, stop, report)
            shown = ShownSteps(job, plan, len(now.done), progress, report.status)
            over = SweepEnd(folder, plan, journal, devices.clock, start, progress.say)
            live = stack.enter_context(
                LiveFit(folder.path, len(plan.steps), told_before(journal))
            )
            judge = LiveJudge(job, plan, report, devices.clock, start, live)
            judge.at_start(now.remaining)
            context = SweepContext(
                job=job,
                plan=plan,
                journal=journal,
                session=session,
                stop=stop,
                report=report,
                why_over=over.before_step,
                jumps=judge.before_step,
                soaked_s=start.soaked_s,
            )
            try:
                with StepKeeper(_tools(folder, journal, devices, shown)) as keeper:
                    SweepRunner(context, devices, keeper).run(now)
                devices.gate.end()
                journal.end_session(session, "done")
            finally:
                progress.end()
                _note_gate(journal, devices)
            journal.close()


def _tools(
    folder: RunFolder, journal: RunJournal, devices: BenchDevices, shown: ShownSteps
) -> KeeperTools:
    return KeeperTools(
        job=folder.job,
        journal=journal,
        store=FrameStore(folder.path),
        find=spot_finder(folder.job.bench),
        gate=devices.gate,
        gate_history=devices.gate_history,
        on_kept=shown.step_kept,
    )


def _note_gate(journal: RunJournal, devices: BenchDevices) -> None:
    with suppress(sqlite3.Error), journal.transaction():
        for row in devices.gate_history():
            journal.record_gate(row)

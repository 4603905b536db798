"""One session of a run: lock, journal, bench, runner, ending. Acts (all of them)."""

import sqlite3
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from pitchsweep.acquire.acquire_errors import RunRefused, StorageFailed, SweepStopped
from pitchsweep.acquire.bench_devices import BenchDevices, FindSpots
from pitchsweep.acquire.frame_store import NO_SPACE, FrameStore
from pitchsweep.acquire.journal_file import create_journal, open_journal
from pitchsweep.acquire.journal_rows import StepSpots
from pitchsweep.acquire.progress import Progress, StepShown, clock_text
from pitchsweep.acquire.resume import Standing, standing
from pitchsweep.acquire.run_folder import (
    RunFolder,
    create_run_folder,
    open_run_folder,
)
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.run_lock import take_run_lock
from pitchsweep.acquire.run_permit import RunPermit, permit_for
from pitchsweep.acquire.step_keeper import KeeperTools, StepKeeper
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.acquire.stop_signals import StopRequested, StopSignals
from pitchsweep.acquire.sweep_plan import Step, SweepPlan, plan_sweep
from pitchsweep.acquire.sweep_runner import SweepContext, SweepRunner
from pitchsweep.analysis.order_visibility import visible_orders
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety.run_ack import refuse_unacknowledged
from pitchsweep.safety.run_refusals import refuse_unsafe
from pitchsweep.safety.safety_errors import SafetyError


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
    folder = create_run_folder(runs, job)
    progress.say(
        f"{len(plan.steps)} steps, {clock_text(plan.duration_s)} of bench time; "
        f"run folder {folder.path}"
    )
    lock = take_run_lock(folder.path)
    try:
        with create_journal(folder.journal) as journal:
            journal.set_meta("job_fingerprint", fingerprint(job))
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
        refuse_unacknowledged(folder.ledger, folder.path.name)
    plan = plan_sweep(folder.job, fingerprint(folder.job))
    refuse_unsafe(folder.job)
    permit = permit_for(folder.job, plan, progress.say)
    lock = take_run_lock(folder.path)
    try:
        with _journal_to_go_on(folder) as journal:
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
        journal.set_meta("job_fingerprint", fingerprint(folder.job))
        return journal
    return open_journal(folder.journal)


def _check_same_job(folder: RunFolder, journal: RunJournal) -> None:
    known = journal.meta().get("job_fingerprint")
    if known is None:
        journal.set_meta("job_fingerprint", fingerprint(folder.job))
    elif known != fingerprint(folder.job):
        raise RunRefused(
            folder.path,
            "job.yaml is not the job with which this run began",
            "put the original job.yaml back, or sweep anew",
        )


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
    session = journal.begin_session(owner)
    find = spot_finder(folder.job.bench)
    with StopSignals() as stop, _ending(folder, journal, session, stop):
        request = BenchRequest(
            folder, plan, journal, stop, resumed, progress.say, permit
        )
        with open_bench(request) as devices:
            stop.on_request = devices.gate.dark
            stop.check()
            shown = _Shown(folder.job, plan, len(now.done), progress)
            tools = _tools(folder, journal, find, devices, shown)
            context = SweepContext(folder.job, plan, journal, session, stop)
            try:
                with StepKeeper(tools) as keeper:
                    SweepRunner(context, devices, keeper).run(now)
                devices.gate.end()
                journal.end_session(session, "done")
            finally:
                progress.end()
                _note_gate(journal, devices)
            journal.close()


def _tools(
    folder: RunFolder,
    journal: RunJournal,
    find: FindSpots,
    devices: BenchDevices,
    shown: "_Shown",
) -> KeeperTools:
    return KeeperTools(
        job=folder.job,
        journal=journal,
        store=FrameStore(folder.path),
        find=find,
        gate=devices.gate,
        gate_history=devices.gate_history,
        on_kept=shown.step_kept,
    )


@contextmanager
def _ending(
    folder: RunFolder, journal: RunJournal, session: int, stop: StopSignals
) -> Iterator[None]:
    """Turns what ended a session into its journal row and the error to show."""
    try:
        yield
    except StopRequested as error:
        _note_ending(journal, session, f"stopped: {error}")
        raise SweepStopped(folder.path, str(error)) from None
    except (StorageFailed, sqlite3.OperationalError, OSError) as error:
        _note_ending(journal, session, f"stopped: {error}")
        if isinstance(error, StorageFailed) and not _out_of_space(error):
            raise
        raise SweepStopped(folder.path, _first_line(error)) from error
    except (SafetyError, DriverError) as error:
        # What breaks after a request to stop is a consequence of it.
        if stop.reason:
            _note_ending(journal, session, f"stopped: {stop.reason}")
            raise SweepStopped(folder.path, stop.reason) from None
        what = "tripped" if isinstance(error, SafetyError) else "device fault"
        _note_fault(journal, what, _first_line(error))
        _note_ending(journal, session, f"{what}: {_first_line(error)}")
        raise
    except BaseException as error:
        _note_ending(journal, session, f"broke off: {type(error).__name__}: {error}")
        raise


def _first_line(error: BaseException) -> str:
    return str(error).splitlines()[0] if str(error) else type(error).__name__


def _out_of_space(error: StorageFailed) -> bool:
    cause = error.__cause__
    return isinstance(cause, OSError) and cause.errno in NO_SPACE


def _note_ending(journal: RunJournal, session: int, ending: str) -> None:
    # The disk may be full: the session then shows no ending, which says it too.
    with suppress(sqlite3.Error):
        journal.end_session(session, ending)


def _note_gate(journal: RunJournal, devices: BenchDevices) -> None:
    with suppress(sqlite3.Error), journal.transaction():
        for row in devices.gate_history():
            journal.record_gate(row)


def _note_fault(journal: RunJournal, what: str, detail: str) -> None:
    with suppress(sqlite3.Error):
        journal.record_fault(what, detail, "stop")


class _Shown:
    """Counts the steps kept and shows them."""

    def __init__(
        self, job: Job, plan: SweepPlan, done: int, progress: Progress
    ) -> None:
        self._job = job
        self._plan = plan
        self._done = done
        self._progress = progress

    def step_kept(self, step: Step, found: StepSpots) -> None:
        """Shows a step; zero checks are not counted."""
        if step.kind != "step":
            return
        self._done += 1
        job, plan = self._job, self._plan
        later = plan.steps[step.step + 1 :]
        view = visible_orders(job.bench, job.part, step.laser, step.incidence_deg)
        self._progress.show(
            StepShown(
                done=self._done,
                total=len(plan.steps),
                incidence_deg=step.incidence_deg,
                mount=step.mount,
                laser=step.laser,
                spots=len(found.spots),
                orders_expected=int(np.count_nonzero(view.seen)),
                gate="ready",
                left_s=plan.duration_s - later[0].planned_s if later else 0.0,
            )
        )

"""Acknowledges a run's trip at the bench. Acts (processes, ports, ledger, journal).

A guard without any permit opens the emission line, commands dark, and waits until the
unit's reset input is pressed or the interlock opened and closed. It can never light.
On a twin the twin's person does that. The next guard of the run then begins untripped.
"""

import time
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.bench_session import (
    BAUD,
    UNIT_DIALECT,
    GateHistory,
    acknowledge_by_twin,
    unit_settings,
)
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_folder import RunFolder, open_run_folder
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.run_lock import take_run_lock
from pitchsweep.drivers.twin_launcher import start_twin
from pitchsweep.drivers.twin_world_client import TwinWorldClient
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.guard_client import GuardClient, start_guard
from pitchsweep.safety.guard_config import GuardConfig, GuardLimits, UnitSettings
from pitchsweep.safety.ledger import verify
from pitchsweep.safety.permit import NoPermit
from pitchsweep.safety.permitted_steps import PermittedSteps
from pitchsweep.safety.run_ack import why_run_is_not_acknowledged
from pitchsweep.safety.safety_errors import GateRefused

PATIENCE_S = 300.0
LOOK_AGAIN_S = 0.2
AT_THE_BENCH = (
    "at the bench: see that it is safe, then press the reset input, or open and close"
    " the interlock once"
)


@dataclass(frozen=True)
class Acknowledgement:
    """What was done: the gate's own words for it."""

    run: Path
    reason: str


def acknowledge_run(
    path: Path, name: str, say: Callable[[str], None]
) -> Acknowledgement:
    """Acknowledges the last trip or end of the run at ``path`` in ``name``.

    Raises RunRefused for a folder that is no run, is in use or is complete, GateRefused
    when nobody comes to the bench in five minutes or the name is missing, DriverError.
    """
    folder = open_run_folder(path)
    lock = take_run_lock(folder.path)
    try:
        return _acknowledge(folder, name, say)
    finally:
        lock.release()


def _acknowledge(
    folder: RunFolder, name: str, say: Callable[[str], None]
) -> Acknowledgement:
    ledger, history = folder.ledger, GateHistory()
    with ExitStack() as stack:
        journal = None
        if folder.journal.exists():
            journal = stack.enter_context(open_journal(folder.journal))
            _refuse_complete(folder, journal)
        if why_run_is_not_acknowledged(ledger, folder.path.name) is None:
            return Acknowledgement(folder.path, "acknowledged already, not used yet")
        with _guard_at_bench(folder, history.add, say, name) as guard:
            reason = guard.events[-1].reason
        if journal is not None:
            _note(journal, history, ledger)
        return Acknowledgement(folder.path, reason)


def _refuse_complete(folder: RunFolder, journal: RunJournal) -> None:
    """A sweep that went to its end has no trip; any other end counts as one."""
    sessions, early = journal.sessions(), journal.meta().get("ended_early")
    if sessions and sessions[-1][-1] == "done" and not early:
        raise RunRefused(
            folder.path,
            "the run is complete: there is nothing to acknowledge",
            "begin a new one with 'pitchsweep sweep JOB'",
        )


@contextmanager
def _guard_at_bench(
    folder: RunFolder,
    on_event: Callable[[GateEvent], None],
    say: Callable[[str], None],
    name: str,
) -> Iterator[GuardClient]:
    bench = folder.job.bench
    with ExitStack() as stack:
        if bench.ports is None:
            seed = bench.twin.seed if bench.twin else 0
            twin = stack.enter_context(
                start_twin(
                    folder.twin, bench, folder.job.part, seed, lot=folder.job.lot
                )
            )
            world = TwinWorldClient(twin.address)
            stack.callback(world.close)
            unit = unit_settings(bench, twin.unit_port, UNIT_DIALECT, BAUD)
            guard = stack.enter_context(
                start_guard(_config(folder, unit), on_event=on_event)
            )
            say("the simulated bench's person acknowledges")
            acknowledge_by_twin(guard, world, name)
        else:
            port = bench.ports.unit
            unit = unit_settings(bench, port.port, port.dialect, port.baud)
            guard = stack.enter_context(
                start_guard(_config(folder, unit), on_event=on_event)
            )
            say(AT_THE_BENCH)
            await_person(guard, name)
        yield guard


def await_person(guard: GuardClient, name: str, patience_s: float = PATIENCE_S) -> None:
    """Returns once the trip is acknowledged. GateRefused when nobody comes in time."""
    until_s = time.monotonic() + patience_s
    while True:
        try:
            return guard.acknowledge(name)
        except GateRefused:
            if time.monotonic() > until_s or guard.lost.is_set():
                raise
        time.sleep(LOOK_AGAIN_S)


def _config(folder: RunFolder, unit: UnitSettings) -> GuardConfig:
    return GuardConfig(
        unit=unit,
        permit=NoPermit(),
        limits=GuardLimits(),
        permitted=PermittedSteps({}, 0.01, 1.0, 1.0),
        ledger_path=str(folder.ledger),
        run=folder.path.name,
        resumed=True,
    )


def _note(journal: RunJournal, history: GateHistory, ledger: Path) -> None:
    found = verify(ledger)
    with journal.transaction():
        for row in history.take():
            journal.record_gate(row)
    journal.set_meta("ledger_entries", str(found.count))
    journal.set_meta("ledger_head", found.head)

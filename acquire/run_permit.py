"""Which permit a run gets: its sign-off, or on a twin a rehearsal. Acts (home folder).

A bench with ports needs a sign-off that is valid now. A simulated bench uses one when
there is one, so that the whole way can be tried; otherwise it rehearses.
"""

import sqlite3
import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field
from pathlib import Path

from pitchsweep.acquire.bench_work import work_for
from pitchsweep.acquire.run_folder import RunFolder
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.sweep_plan import SweepPlan
from pitchsweep.configs.config_errors import SettingsRefused
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import find
from pitchsweep.safety.file_watch import file_sha256
from pitchsweep.safety.ledger import verify
from pitchsweep.safety.people_ledger import RUN_BEGUN, RUN_ENDED
from pitchsweep.safety.people_store import PeopleNow, enter, read_people
from pitchsweep.safety.permit import Permit, RehearsalPermit
from pitchsweep.safety.safety_errors import GateRefused, RecordForged, SafetyError
from pitchsweep.safety.safety_home import SafetyHome, safety_home
from pitchsweep.safety.sign_off_store import (
    Judged,
    Kept,
    judge,
    records_of,
    watched_files,
)
from pitchsweep.safety.unattended_permit import UnattendedPermit

REHEARSAL_HOURS = 24.0
Say = Callable[[str], None]


@dataclass(frozen=True)
class RunPermit:
    """A sign-off in force and its home; both None where the run rehearses.

    ``sources``: path -> SHA-256 of the files that the job was read from.
    """

    kept: Kept | None = None
    home: SafetyHome | None = None
    sources: Mapping[str, str] = field(default_factory=dict)

    def for_guard(self, proof_key: bytes | None) -> Permit:
        """The permit as the guard takes it; ``proof_key`` is the twin's, if it is one.

        Without a sign-off there is only the rehearsal, which needs a twin.
        """
        if self.kept is not None and self.home is not None:
            ledger = str(self.home.ledger)
            return UnattendedPermit(self.kept.record, ledger, proof_key)
        if proof_key is None:
            raise ValueError("a rehearsal needs the key of a twin")
        now_s = time.time()
        return RehearsalPermit(
            key=proof_key,
            valid_from_utc_s=now_s - 1.0,
            valid_until_utc_s=now_s + REHEARSAL_HOURS * 3600.0,
        )

    @property
    def watched(self) -> dict[str, str]:
        """Files that must stay as they are while the run lasts, and absent ones."""
        if self.kept is None or self.home is None:
            return dict(self.sources)
        checklist = find(self.kept.record.statement.checklist, "checklists")
        return {
            **self.sources,
            **watched_files(self.home, self.kept),
            str(checklist): file_sha256(checklist),
        }

    @property
    def in_words(self) -> str:
        """What journal and report say of it."""
        if self.kept is None:
            return "rehearsal on a simulated bench, no sign-off"
        statement = self.kept.record.statement
        people = ", ".join(f"{s.name} as {s.role}" for s in statement.signers)
        kind = "rehearsed sign-off" if statement.simulated else "sign-off"
        return f"{kind} {statement.id} by {people}, until {statement.valid_until}"


def permit_for(job: Job, plan: SweepPlan, say: Say) -> RunPermit:
    """The permit for ``job``; ``say`` takes a line about which one and why.

    Raises GateRefused for a bench with ports without a valid sign-off, LedgerBroken or
    RecordForged when the people's ledger or register does not hold, OSError.
    """
    home = safety_home()
    found = judged_for_job(home, job, plan)
    valid = next((one for one in found if not one.why_not), None)
    real = job.bench.ports is not None
    if valid is not None and _in_real_time(job):
        _refuse_too_long(valid.kept, plan)
    if valid is None and real:
        raise _hardware_refusal(job, found)
    if valid is None:
        if found:
            say(f"sign-off not used: {found[0].why_not}; this run rehearses")
        return RunPermit()
    permit = RunPermit(valid.kept, home)
    say(permit.in_words)
    return permit


def judged_for_job(home: SafetyHome, job: Job, plan: SweepPlan) -> list[Judged]:
    """The sign-offs for this job's name, newest first, each with its verdict.

    A record that cannot be read is left out: it stands for no job. Raises LedgerBroken
    and RecordForged for ledger and register.
    """
    kept = [one for one in records_of(home) if not isinstance(one, RecordForged)]
    mine = [one for one in kept if one.record.statement.job == job.job]
    if not mine:
        return []
    now = read_people(home)
    return [Judged(one, _why_not(home, one, job, plan, now)) for one in mine]


def _why_not(
    home: SafetyHome, kept: Kept, job: Job, plan: SweepPlan, now: PeopleNow
) -> str:
    try:
        work = work_for(job, plan, kept.record.statement.checklist)
    except SettingsRefused as error:
        return f"its checklist cannot be read: {str(error).splitlines()[0]}"
    return judge(home, kept, work, now, time.time())


def _hardware_refusal(job: Job, found: list[Judged]) -> GateRefused:
    bench = job.bench.bench
    why = f"its sign-off does not count: {found[0].why_not}" if found else "it has none"
    return GateRefused(
        f"bench '{bench}' has ports: light there needs a sign-off, and {why}",
        "pitchsweep signoff JOB",
    )


def _in_real_time(job: Job) -> bool:
    return job.bench.twin is None or job.bench.twin.speed == "real"


def _refuse_too_long(kept: Kept, plan: SweepPlan) -> None:
    left_s = kept.record.statement.window_utc_s[1] - time.time()
    if plan.duration_s > left_s:
        raise GateRefused(
            f"the run needs {plan.duration_s / 3600.0:.1f} h, the sign-off ends in"
            f" {left_s / 3600.0:.1f} h",
            "sign for longer, or sweep less",
        )


@contextmanager
def entered(
    permit: RunPermit, folder: RunFolder, journal: RunJournal, ledger: Path
) -> Iterator[None]:
    """Notes beginning and end of a run: in its journal, and if signed with the people.

    The end carries count and head of the run's own ledger at ``ledger``, however it
    ends. Raises what keeps the beginning from being entered; a failure at the end shows
    as a run that never ended.
    """
    journal.set_meta("permit", permit.in_words)
    run = _begin(permit, folder, journal)
    ending = "complete"
    try:
        yield
    except BaseException as error:
        ending = type(error).__name__
        raise
    finally:
        # Whatever ended the run is the news, not that its end could not be noted.
        with suppress(SafetyError, OSError, sqlite3.Error):
            found = verify(ledger)
            head = {"entries": found.count, "head": found.head}
            if permit.home is not None:
                enter(permit.home, RUN_ENDED, {**run, "ending": ending, **head})
            if found.count and ending != "complete":
                journal.set_meta("ledger_entries", str(found.count))
                journal.set_meta("ledger_head", found.head)


def _begin(
    permit: RunPermit, folder: RunFolder, journal: RunJournal
) -> dict[str, object]:
    if permit.kept is None or permit.home is None:
        return {}
    job, identifier = folder.job, permit.kept.record.statement.id
    run = {"run": folder.path.name, "bench": job.bench.bench, "job": job.job}
    signed = {**run, "sign_off": identifier}
    entry = enter(permit.home, RUN_BEGUN, signed)
    journal.set_meta("sign_off", identifier)
    journal.set_meta("people_ledger_entries", str(entry.n))
    journal.set_meta("people_ledger_head", entry.hash)
    return dict(signed)

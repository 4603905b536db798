"""What ``signoff JOB`` and its verbs do; texts to be printed come back. Acts (home)."""

import json
import sys
import time
from dataclasses import dataclass
from pathlib import Path

from pitchsweep.acquire.answers_form import answers_form
from pitchsweep.acquire.bench_work import work_for
from pitchsweep.acquire.interview import Interview, ask_all
from pitchsweep.acquire.passphrases import Passphrases
from pitchsweep.acquire.run_permit import judged_for_job
from pitchsweep.acquire.sweep_plan import SweepPlan, plan_sweep
from pitchsweep.configs.answers_model import Answers
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import DEMO, read_answers, read_job
from pitchsweep.safety.beam_map import beam_map
from pitchsweep.safety.beam_map_text import beam_map_lines
from pitchsweep.safety.door_sheet import door_sheet
from pitchsweep.safety.lasers_alight import lasers_alight
from pitchsweep.safety.people_store import PeopleNow, read_people
from pitchsweep.safety.run_refusals import refuse_unsafe
from pitchsweep.safety.safety_errors import CAUTION, GateRefused, SignerRefused
from pitchsweep.safety.safety_home import SafetyHome, safety_home
from pitchsweep.safety.sign_off import LedgerMark, Statement
from pitchsweep.safety.sign_off_making import (
    Moment,
    Work,
    refuse_unread_powers,
    statement_of,
)
from pitchsweep.safety.sign_off_store import (
    Judged,
    Kept,
    mark_revoked,
    new_identifier,
    records_of,
    sign_and_keep,
    the_one_to_show,
    write_new,
)
from pitchsweep.safety.sign_off_store import (
    revoke as revoke_record,
)
from pitchsweep.safety.signers import open_signer
from pitchsweep.safety.signing import PrivateKey

NO_REASON = "no reason given"
ATTEMPTS = 3
"""At a terminal; a file is read once."""


@dataclass(frozen=True)
class SigningOptions:
    """What the command line gives: ``answers`` None means an interview."""

    answers: Path | None
    checklist: str
    door_sheet: Path | None
    passphrase_files: tuple[str, ...]


def sign(place: str, options: SigningOptions, *, as_json: bool) -> str:
    """Interviews (or reads answers), signs, writes record and door sheet.

    Raises SettingsRefused, SignerRefused, GateRefused, LedgerBroken, RecordForged.
    """
    job, plan = _job_and_plan(place)
    refuse_unsafe(job)
    home = safety_home()
    now = read_people(home)
    _refuse_empty(now)
    work = work_for(job, plan, _absolute(options.checklist))
    answers = _answers(work, now, home, options, place)
    statement = _statement(work, answers, now)
    keys = _keys(home, answers, options)
    kept = sign_and_keep(home, statement, keys)
    sheet = options.door_sheet or home.door_sheets / f"{statement.id}.html"
    write_new(sheet, door_sheet(kept.record))
    if as_json:
        return json.dumps({**_values(Judged(kept, "")), "door_sheet": str(sheet)})
    return "\n".join([*_lines(kept), f"Door sheet {sheet}", f"Caution    {CAUTION}"])


def form(place: str, checklist: str) -> str:
    """An answers file for ``place``, everything in it still to be answered.

    Raises SettingsRefused, GateRefused for a job that nobody may sign.
    """
    job, plan = _job_and_plan(place)
    refuse_unsafe(job)
    return answers_form(work_for(job, plan, _absolute(checklist)))


def show(place: str, *, as_json: bool) -> str:
    """The sign-off of a job with all that was signed, valid or not."""
    judged = _judged(place)
    if as_json:
        return json.dumps(_values(judged), indent=1)
    statement = judged.kept.record.statement
    lines = [
        *_lines(judged.kept),
        f"Verdict    {judged.why_not or 'valid now'}",
        "",
        *statement.figures,
        "",
        *statement.beam_map,
        "",
        *_answer_lines(statement),
    ]
    return "\n".join(lines)


def verify(place: str, *, as_json: bool) -> str:
    """The valid sign-off of a job; GateRefused with the reason when there is none."""
    judged = _judged(place)
    statement = judged.kept.record.statement
    if judged.why_not:
        raise GateRefused(
            f"sign-off {statement.id} of job '{statement.job}' does not count:"
            f" {judged.why_not}",
            f"sign anew: pitchsweep signoff {place}",
        )
    if as_json:
        return json.dumps(_values(judged), indent=1)
    return "\n".join([*_lines(judged.kept), "Verdict    valid now"])


def revoke(place: str, name: str, reason: str | None) -> str:
    """Revokes every sign-off of a job, or the one with this number; needs no secret.

    Neither settings, plan nor ledger are asked before it is done: stopping must not
    depend on them. Raises GateRefused where there is none, LedgerBroken when the ledger
    cannot take it in afterwards.
    """
    home = safety_home()
    identifiers = _of_place(home, place)
    for identifier in identifiers:
        mark_revoked(home, identifier)
    entered = read_people(home).people.sign_offs
    for identifier in identifiers:
        if identifier in entered and not entered[identifier].withdrawn_utc:
            revoke_record(home, identifier, name=name, reason=reason or NO_REASON)
    return "\n".join(
        f"revoked {identifier} in the name of {name}; a run under it goes dark"
        for identifier in identifiers
    )


def _of_place(home: SafetyHome, place: str) -> list[str]:
    """The numbers of what is to be revoked and is not yet."""
    kept = [one for one in records_of(home) if isinstance(one, Kept)]
    found = [one.record.statement for one in kept]
    mine = [s.id for s in found if s.id == place]
    if not mine:
        job = read_job(place).job.job
        mine = [s.id for s in found if s.job == job]
    still = [number for number in mine if not home.revoked(number).exists()]
    if not still:
        raise GateRefused(
            f"'{place}' has no sign-off that could be revoked",
            "'pitchsweep dark' makes a running sweep dark",
        )
    return still


def _judged(place: str) -> Judged:
    job, plan = _job_and_plan(place)
    return the_one_to_show(judged_for_job(safety_home(), job, plan), place)


def _job_and_plan(place: str) -> tuple[Job, SweepPlan]:
    job = read_job(place).job
    return job, plan_sweep(job, fingerprint(job))


def _absolute(checklist: str) -> str:
    return checklist if checklist.startswith(DEMO) else str(Path(checklist).absolute())


def _refuse_empty(now: PeopleNow) -> None:
    if not any(signer.active for signer in now.people.signers.values()):
        raise GateRefused(
            "nobody is enrolled who could sign",
            "pitchsweep signer enrol NAME --role safety-officer",
        )


def _answers(
    work: Work, now: PeopleNow, home: SafetyHome, options: SigningOptions, place: str
) -> Answers:
    if options.answers is not None:
        return read_answers(options.answers)
    if not sys.stdin.isatty():
        raise GateRefused(
            "an interview needs a terminal", "or give the answers with --answers FILE"
        )
    # Told before anybody has answered twenty questions; the window comes later.
    refuse_unread_powers(work, now.people, time.time(), time.time(), place)
    return ask_all(Interview(work, now.people, _pictures(home, work.job)))


def _pictures(home: SafetyHome, job: Job) -> tuple[Path, ...]:
    """Writes the whole beam map as a table and as pictures; where they are."""
    from pitchsweep.safety.beam_map_picture import beam_map_svg

    folder, found = home.folder / "beam-maps", beam_map(job)
    table = folder / f"{job.job}.txt"
    write_new(table, "\n".join(beam_map_lines(found)) + "\n")
    written = [table]
    for laser in lasers_alight(job):
        path = folder / f"{job.job}-{laser}.svg"
        write_new(path, beam_map_svg(job, found, laser))
        written.append(path)
    return tuple(written)


def _statement(work: Work, answers: Answers, now: PeopleNow) -> Statement:
    moment = Moment(
        utc_s=time.time(),
        identifier=new_identifier(),
        people=now.people,
        ledger=LedgerMark(now.entries, now.head),
    )
    return statement_of(work, answers, moment)


def _keys(
    home: SafetyHome, answers: Answers, options: SigningOptions
) -> list[PrivateKey]:
    passphrases = Passphrases(options.passphrase_files)
    return [_opened(home, signer.name, passphrases) for signer in answers.signers]


def _opened(home: SafetyHome, name: str, passphrases: Passphrases) -> PrivateKey:
    """The key of ``name``; a slip of the fingers does not cost the whole interview."""
    for _ in range(ATTEMPTS - 1):
        try:
            return open_signer(home, name, passphrases.of(name))
        except SignerRefused as error:
            if not passphrases.asks(name):
                raise
            print(f"{str(error).splitlines()[0]}; try again", file=sys.stderr)
    return open_signer(home, name, passphrases.of(name))


def _lines(kept: Kept) -> list[str]:
    record = kept.record
    statement = record.statement
    people = "; ".join(f"{s.name} as {s.role}" for s in statement.signers)
    kind = "rehearsed sign-off, simulated bench" if statement.simulated else "sign-off"
    return [
        f"Sign-off   {statement.id} ({kind})",
        f"Job        {statement.job} on bench {statement.bench}: {statement.part}",
        f"Valid      {statement.valid_from} to {statement.valid_until}",
        f"Signed by  {people}",
        f"Bound to   {len(statement.settings)} settings,"
        f" fingerprint {statement.settings_sha256[:16]}",
        f"Ledger     entry {record.entered.entries}, head {record.entered.head}",
        f"Record     {kept.path}",
    ]


def _answer_lines(statement: Statement) -> list[str]:
    lines = []
    for name, answer in statement.answers.items():
        lines.append(f"{name}: {answer['answer']} ({answer['by']})  {answer['says']}")
        if answer["words"]:
            lines.append(f"    {answer['words']}")
        readings = answer["readings"]
        assert isinstance(readings, list)
        lines += [f"    {_reading_line(reading)}" for reading in readings]
    return lines


def _reading_line(reading: dict[str, object]) -> str:
    of = f"{reading['of']}: " if reading["of"] else ""
    meter = f", {reading['meter']} due {reading['meter_due']}" * bool(reading["meter"])
    return (
        f"{of}{reading['value']} {reading['unit']}"
        f" (up to {reading['highest_allowed']}){meter}"
    )


def _values(judged: Judged) -> dict[str, object]:
    statement = judged.kept.record.statement
    return {
        "id": statement.id,
        "job": statement.job,
        "bench": statement.bench,
        "simulated": statement.simulated,
        "valid": not judged.why_not,
        "why_not": judged.why_not,
        "valid_from": statement.valid_from,
        "valid_until": statement.valid_until,
        "signers": [vars(signer) for signer in statement.signers],
        "settings_sha256": statement.settings_sha256,
        "ledger": vars(judged.kept.record.entered),
        "record": str(judged.kept.path),
    }

"""From a job and a finished interview to the statement that is signed. Pure."""

from dataclasses import dataclass

from pitchsweep.configs.answers_model import Answers, SignsAs
from pitchsweep.configs.checklist_model import Checklist
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.safety_settings import bound_settings, settings_sha256
from pitchsweep.configs.typed_command import typed
from pitchsweep.safety import sign_off
from pitchsweep.safety.checklist import (
    answers_as_signed,
    circumstances_of,
    contacts_of,
    flaws_in_words,
    flaws_of,
    items_that_apply,
    signatures_needed,
)
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.power_readings import (
    Needed,
    powers_as_signed,
    why_power_is_unknown,
    with_attended_powers,
)
from pitchsweep.safety.safety_errors import GateRefused, SignerRefused
from pitchsweep.safety.shown_figures import beam_map_shown, figures_shown, lasers_shown
from pitchsweep.safety.sign_off import LedgerMark, Statement, utc_seconds
from pitchsweep.safety.sign_off_check import why_signatures_do_not_suffice

EARLIEST_S = 60.0
"""How far before now a window may begin: nobody signs for yesterday."""
LATEST_S = 48.0 * 3600.0


@dataclass(frozen=True)
class Work:
    """A job with its checklist, where that was read, and the guard's work digest."""

    job: Job
    checklist: Checklist
    checklist_source: str
    work_sha256: str


@dataclass(frozen=True)
class Moment:
    """When a statement is made, what it is called, where the ledger stands."""

    utc_s: float
    identifier: str
    people: People
    ledger: LedgerMark


def statement_of(work: Work, answers: Answers, moment: Moment) -> Statement:
    """The statement to be signed.

    Raises SignerRefused for a signer who is unknown, revoked or without the role,
    GateRefused for answers with which nobody may sign, a window out of bounds, or a
    power that nobody read under an attended permit.
    """
    job, checklist = work.job, work.checklist
    here = circumstances_of(job)
    items = items_that_apply(checklist, here)
    signers = tuple(_signer(who, moment.people) for who in answers.signers)
    needed = signatures_needed(checklist, here)
    _refuse_people(needed, signers)
    start_s, end_s = window_utc_s(answers, checklist, moment.utc_s)
    refuse_unread_powers(work, moment.people, moment.utc_s, end_s)
    try:
        answers = with_attended_powers(answers, items, job, moment.people)
    except ValueError as error:
        raise GateRefused(
            f"not signed: {error}", "leave it out of the answers, or read it again"
        ) from None
    flaws = flaws_of(answers, items, job, utc_text(end_s)[:10])
    if flaws:
        raise GateRefused(
            f"not signed: {flaws_in_words(flaws)}", "put it right at the bench first"
        )
    settings = bound_settings(job, checklist)
    return Statement(
        id=moment.identifier,
        made=utc_text(moment.utc_s),
        bench=job.bench.bench,
        job=job.job,
        part=parts_in_words(job),
        simulated=job.bench.twin is not None,
        valid_from=utc_text(start_s),
        valid_until=utc_text(end_s),
        signers=signers,
        needed=needed,
        settings=settings,
        settings_sha256=settings_sha256(settings),
        work_sha256=work.work_sha256,
        checklist=work.checklist_source,
        figures=figures_shown(job),
        beam_map=beam_map_shown(job),
        lasers=lasers_shown(job),
        powers=powers_as_signed(job, moment.people),
        answers=answers_as_signed(answers, items, job),
        contacts=contacts_of(answers, items),
        ledger=moment.ledger,
    )


def refuse_unread_powers(
    work: Work, people: People, now_utc_s: float, end_utc_s: float, place: str = "JOB"
) -> None:
    """GateRefused unless every laser's power was read under an attended permit.

    ``place`` is what the job was called by.
    """
    needed = Needed(work.job, work.checklist, now_utc_s, utc_text(end_utc_s)[:10])
    why = why_power_is_unknown(needed, people)
    if why is not None:
        raise GateRefused(
            f"not signed: {why}",
            f"read it first: {typed('attend', place)}",
        )


def part_in_words(part: Part) -> str:
    """Part, serial, lot, side and place in one line."""
    return (
        f"{part.part}, serial {part.serial}, lot {part.lot}, {part.side}, {part.place}"
    )


def parts_in_words(job: Job) -> str:
    """The part of a job in words, or every part of a lot as they are seated."""
    if not job.lot:
        return part_in_words(job.part)
    return "; ".join(
        f"{number}: {part_in_words(part)}" for number, part in enumerate(job.lot, 1)
    )


def _signer(who: SignsAs, people: People) -> sign_off.SignsAs:
    signer = people.signers.get(who.name)
    if signer is None:
        raise SignerRefused(who.name, "is not enrolled", "pitchsweep signer enrol")
    if not signer.active:
        raise SignerRefused(
            who.name,
            f"was revoked on {signer.revoked_utc}",
            "somebody else has to sign",
        )
    if who.role not in signer.roles:
        raise SignerRefused(
            who.name,
            f"is not enrolled as {who.role}",
            f"enrolled as {', '.join(signer.roles)}; sign in such a role",
        )
    return sign_off.SignsAs(who.name, signer.key, who.role)


def _refuse_people(
    needed: tuple[tuple[str, ...], ...], signers: tuple[sign_off.SignsAs, ...]
) -> None:
    names = [signer.name for signer in signers]
    twice = next((name for name in names if names.count(name) > 1), None)
    if twice is not None:
        raise SignerRefused(
            twice, "signs twice", "every signature is given by another person"
        )
    why = why_signatures_do_not_suffice(needed, signers)
    if why is not None:
        raise GateRefused(f"not signed: {why}", "let the others who are needed sign")


def window_utc_s(
    answers: Answers, checklist: Checklist, now_utc_s: float
) -> tuple[float, float]:
    """Start and end of the window that ``answers`` ask for; GateRefused if too much."""
    start_s = now_utc_s
    if answers.valid_from is not None:
        start_s = _start(answers.valid_from)
    if not now_utc_s - EARLIEST_S <= start_s <= now_utc_s + LATEST_S:
        raise GateRefused(
            f"not signed: the window begins {utc_text(start_s)}",
            f"allowed from now to {LATEST_S / 3600.0:g} h ahead",
        )
    if answers.valid_for_h > checklist.longest_window_h:
        raise GateRefused(
            f"not signed: a window of {answers.valid_for_h:g} h",
            f"the checklist allows up to {checklist.longest_window_h:g} h",
        )
    return start_s, start_s + answers.valid_for_h * 3600.0


def _start(text: str) -> float:
    try:
        return utc_seconds(text)
    except ValueError:
        raise GateRefused(
            f"not signed: valid_from = {text}", "give UTC as 2030-01-31T18:00Z"
        ) from None

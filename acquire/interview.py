"""The interview before a sign-off, at a terminal. Acts (reads and writes it).

It shows the figures and the beam map, then asks item by item; an answer that will not
do is said at once and asked again, "no" ends it. What comes back is the same as from
an answers file.
"""

import textwrap
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

import typer
from pydantic import ValidationError

from pitchsweep.configs.answers_model import (
    Answers,
    ItemAnswer,
    ReadingAnswer,
    SignsAs,
)
from pitchsweep.configs.checklist_model import Item
from pitchsweep.safety.checklist import (
    circumstances_of,
    items_that_apply,
    readings_wanted,
    signatures_needed,
    why_answer_will_not_do,
)
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.power_readings import (
    attended_answers,
    latest_readings,
    reading_in_words,
    takes_attended_powers,
)
from pitchsweep.safety.safety_errors import CAUTION, GateRefused
from pitchsweep.safety.shown_figures import beam_map_shown, figures_shown
from pitchsweep.safety.sign_off_making import Work, parts_in_words, window_utc_s

_M = TypeVar("_M", ItemAnswer, ReadingAnswer)
WIDTH = 78
DEFAULT_HOURS = 14.0
NOT_SIGNED = "not signed: "
Ask = Callable[[str, str], str]
"""(question, default or empty) -> what was typed."""


@dataclass(frozen=True)
class Interview:
    """What an interview is about; ``pictures`` are files with the whole beam map."""

    work: Work
    people: People
    pictures: tuple[Path, ...]


def ask_at_terminal(question: str, default: str) -> str:
    """One line typed by a person; the default where nothing was typed."""
    shown = default or None
    typed = typer.prompt(
        question,
        default=shown or "",
        show_default=bool(default),
        prompt_suffix=" " if question.endswith("?") and not default else ": ",
        err=True,
    )
    return str(typed).strip()


def say(text: str = "") -> None:
    """A line for the person, beside the result."""
    typer.echo(text, err=True)


def say_wrapped(text: str) -> None:
    """Words of any length, set in by two."""
    for line in textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent="  "):
        say(line)


def ask_all(interview: Interview, ask: Ask = ask_at_terminal) -> Answers:
    """The whole interview. GateRefused when it ends without a will to sign."""
    _show(interview)
    signers = _ask_signers(interview, ask)
    begun, end_utc_s = _ask_window(interview, signers, ask)
    last_day = utc_text(end_utc_s)[:10]
    here = circumstances_of(interview.work.job)
    items = items_that_apply(interview.work.checklist, here)
    say()
    say(f"{len(items)} items; y yes, n no (ends it), q leaves without signing")
    answered: dict[str, ItemAnswer] = {}
    for number, (name, item) in enumerate(items.items(), start=1):
        head = f"[{number}/{len(items)}] {name}"
        able = [s.name for s in signers if s.role in item.answered_by]
        asking = Asking(interview.work, name, item, able, last_day, interview.people)
        answered[name] = _ask_item(head, asking, ask)
    say()
    say(f"signing: {', '.join(f'{s.name} as {s.role}' for s in signers)}")
    if _yes_no("sign now", ask) != "y":
        raise _leave("at the end")
    return begun.model_copy(update={"items": answered})


@dataclass(frozen=True)
class Asking:
    """One item being asked: who may answer it, and until which day it must hold."""

    work: Work
    name: str
    item: Item
    able: list[str]
    last_day: str
    people: People


def _show(interview: Interview) -> None:
    job = interview.work.job
    say(f"Sign-off of job '{job.job}' on bench '{job.bench.bench}'")
    say(f"  {parts_in_words(job)}")
    if job.bench.twin is not None:
        say("  REHEARSAL: the bench is simulated, no laser is switched by this")
    say_wrapped(CAUTION)
    say()
    for line in figures_shown(job):
        say(line)
    say()
    for line in beam_map_shown(job):
        say(line)
    for path in interview.pictures:
        say(f"  whole map: {path}")
    say()


def _ask_signers(interview: Interview, ask: Ask) -> tuple[SignsAs, ...]:
    here = circumstances_of(interview.work.job)
    needed = signatures_needed(interview.work.checklist, here)
    say(f"class {here.laser_class} estimated: {len(needed)} signature(s) needed")
    signers: list[SignsAs] = []
    for number, roles in enumerate(needed, start=1):
        used = {signer.name for signer in signers}
        able = _able(interview.people, roles, used)
        wanted = " or ".join(roles)
        if not able:
            raise GateRefused(
                f"not signed: nobody else is enrolled as {wanted}",
                "pitchsweep signer enrol NAME --role ROLE --vouched-by OFFICER",
            )
        say(f"signature {number}, {wanted}: {', '.join(able)}")
        name = _one_of(list(able), "who signs", ask)
        signers.append(SignsAs.model_validate({"name": name, "role": able[name]}))
    return tuple(signers)


def _able(people: People, roles: tuple[str, ...], used: set[str]) -> dict[str, str]:
    """Name -> the role in which they can give this signature."""
    return {
        signer.name: next(role for role in roles if role in signer.roles)
        for signer in people.signers.values()
        if signer.active and signer.name not in used and set(roles) & set(signer.roles)
    }


def _ask_window(
    interview: Interview, signers: tuple[SignsAs, ...], ask: Ask
) -> tuple[Answers, float]:
    """Answers without items yet, and the end of their window (UTC seconds)."""
    checklist = interview.work.checklist
    say()
    say(f"It is {utc_text()[:16].replace('T', ' ')} UTC.")
    while True:
        start = ask("valid from, UTC as 2030-01-31T18:00Z; 'now'", "now")
        typed = ask(
            f"for how many hours (up to {checklist.longest_window_h:g})",
            f"{min(DEFAULT_HOURS, checklist.longest_window_h):g}",
        )
        try:
            answers = Answers(
                signers=signers,
                valid_from=None if start == "now" else start,
                valid_for_h=float(typed),
                items={},
            )
            return answers, window_utc_s(answers, checklist, time.time())[1]
        except GateRefused as error:
            say(f"  {error.what.removeprefix(NOT_SIGNED)}: {error.remedy}")
        except ValueError:
            say("  that is no such time or number of hours")


def _ask_item(head: str, asking: Asking, ask: Ask) -> ItemAnswer:
    item = asking.item
    say()
    say(head if len(asking.able) < 2 else f"{head} ({' or '.join(asking.able)})")
    say_wrapped(item.says)
    while True:
        answer = _ask_once(asking, ask)
        why = why_answer_will_not_do(item, answer, asking.work.job, asking.last_day)
        if why is None:
            return answer
        if takes_attended_powers(item):
            raise GateRefused(
                f"{NOT_SIGNED}item '{asking.name}': {why}", "read it again: attend JOB"
            )
        say(f"  will not do: {why}")


def _ask_once(asking: Asking, ask: Ask) -> ItemAnswer:
    item, values = asking.item, dict[str, object]()
    if takes_attended_powers(item):
        read = latest_readings(asking.work.job, asking.people)
        for laser, reading in read.items():
            say(f"  {laser}: {reading_in_words(reading)}")
    choice = _yes_no("  is it so", ask, absent=item.may_be_absent)
    if choice == "a":
        return ItemAnswer(absent=True)
    if choice != "y":
        raise GateRefused(
            f"not signed: item '{asking.name}' is answered no",
            "put it right at the bench, then begin again",
        )
    if len(asking.able) > 1:
        values["by"] = _one_of(asking.able, "  who says so", ask)
    if item.asks is not None:
        values["words"] = ask(f"  {item.asks}", "") or None
    values["readings"] = _readings(asking, ask)
    return _valid(ItemAnswer, values, lambda: _ask_once(asking, ask))


def _readings(asking: Asking, ask: Ask) -> tuple[ReadingAnswer, ...]:
    """What is read off now; powers were read under an attended permit already."""
    job = asking.work.job
    if takes_attended_powers(asking.item):
        return attended_answers(job, asking.people)
    return tuple(
        _ask_reading(asking, of, upper, ask)
        for of, upper in readings_wanted(asking.item, job)
    )


def _ask_reading(
    asking: Asking, of: str | None, upper: float, ask: Ask
) -> ReadingAnswer:
    reading = asking.item.reading
    assert reading is not None
    where = f"{of}, " if of else ""
    values: dict[str, object] = {"of": of}
    typed = ask(f"  {where}{reading.lower:g} to {upper:g} {reading.unit}", "")
    try:
        values["value"] = float(typed.replace(",", "."))
    except ValueError:
        say("  that is no number")
        return _ask_reading(asking, of, upper, ask)
    if reading.with_meter:
        values["meter"] = ask("  instrument and its number", "") or None
        values["meter_due"] = ask("  its calibration is due (2030-01-31)", "") or None
    return _valid(ReadingAnswer, values, lambda: _ask_reading(asking, of, upper, ask))


def _valid(
    model: type[_M], values: Mapping[str, object], again: Callable[[], _M]
) -> _M:
    try:
        return model.model_validate(values)
    except ValidationError as error:
        say(f"  that will not do: {error.errors()[0]['msg']}")
        return again()


def _yes_no(question: str, ask: Ask, *, absent: bool = False) -> str:
    hint = "y/n/a: there is none here/q" if absent else "y/n/q"
    while True:
        typed = ask(f"{question} ({hint})", "").lower()[:1]
        if typed == "q":
            raise _leave("by q")
        if typed in ("y", "n") or (absent and typed == "a"):
            return typed


def _one_of(names: list[str], question: str, ask: Ask) -> str:
    while True:
        typed = ask(question, names[0])
        if typed in names:
            return typed
        if typed == "q":
            raise _leave("by q")
        say(f"  one of: {', '.join(names)}")


def _leave(how: str) -> GateRefused:
    return GateRefused(
        f"{NOT_SIGNED}the interview was left {how}", "begin again when all is ready"
    )

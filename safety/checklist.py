"""Which items and signatures apply to a job, and whether the answers will do. Pure."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date

from pitchsweep.configs.answers_model import Answers, ItemAnswer, ReadingAnswer
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.checklist_model import Applies, Checklist, Item, Reading
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.hazard_figures import (
    class_together,
    full_drive_mw,
    laser_figures,
)
from pitchsweep.safety.lasers_alight import lasers_alight, may_be_together

CLASSES = ("1", "1M", "2", "2M", "3R", "3B", "4")
"""From harmless to dangerous; the estimate knows those without an M only."""
LONGEST_ON_DOOR = 160
"""Letters that the door sheet has room for, an answer."""


@dataclass(frozen=True)
class Circumstances:
    """What the conditions of items and signatures are compared with.

    ``laser_class`` is the highest estimate among the lasers that may be alight, and of
    all of them where they may be so together.
    """

    laser_class: str
    doubled: bool
    unattended: bool
    enclosed: bool
    simulated: bool


def circumstances_of(job: Job, *, unattended: bool = True) -> Circumstances:
    """The circumstances of ``job``. Raises OutsideHazardLimits."""
    bench, names = job.bench, lasers_alight(job)
    classes = [laser_figures(bench, name).estimate.laser_class for name in names]
    if may_be_together(job):
        classes.append(class_together(bench, names).laser_class)
    return Circumstances(
        laser_class=max(classes, key=CLASSES.index),
        doubled=any(bench.lasers[name].frequency_doubled for name in names),
        unattended=unattended,
        enclosed=bench.enclosure is not None and bench.enclosure.declared_class == 1,
        simulated=bench.twin is not None,
    )


def does_apply(applies: Applies, here: Circumstances) -> bool:
    """True when every condition that is stated holds."""
    classes = applies.laser_classes
    if classes is not None and here.laser_class not in classes:
        return False
    return all(
        wanted is None or wanted == found
        for wanted, found in (
            (applies.doubled, here.doubled),
            (applies.unattended, here.unattended),
            (applies.enclosed, here.enclosed),
            (applies.simulated, here.simulated),
        )
    )


def items_that_apply(checklist: Checklist, here: Circumstances) -> dict[str, Item]:
    """The items to be answered, in the checklist's order."""
    return {
        name: item
        for name, item in checklist.items.items()
        if does_apply(item.applies, here)
    }


def signatures_needed(
    checklist: Checklist, here: Circumstances
) -> tuple[tuple[str, ...], ...]:
    """The roles that each needed signature may be given in, one entry a person."""
    return tuple(
        tuple(rule.roles)
        for rule in checklist.signatures
        if does_apply(rule.applies, here)
    )


def readings_wanted(item: Item, job: Job) -> tuple[tuple[str | None, float], ...]:
    """(laser or None, highest value allowed) of every reading of ``item``."""
    reading = item.reading
    if reading is None:
        return ()
    if not reading.each_laser:
        return ((None, _upper(reading, job.bench, None)),)
    return tuple((n, _upper(reading, job.bench, n)) for n in lasers_alight(job))


@dataclass(frozen=True)
class Flaw:
    """What is wrong with an answer: the item, and why it does not do."""

    item: str
    why: str


def flaws_of(
    answers: Answers, items: Mapping[str, Item], job: Job, last_day: str
) -> tuple[Flaw, ...]:
    """Everything that keeps ``answers`` from being signed; empty when they will do.

    ``last_day`` (YYYY-MM-DD) is the last day of the window: an instrument whose due
    date lies before it does not count.
    """
    unknown = [
        Flaw(name, "no such item applies here")
        for name in answers.items
        if name not in items
    ]
    missing = [
        Flaw(name, "is not answered") for name in items if name not in answers.items
    ]
    found = [
        Flaw(name, why)
        for name, item in items.items()
        if name in answers.items
        and (why := why_answer_will_not_do(item, answers.items[name], job, last_day))
    ]
    people = [
        Flaw(name, why)
        for name, item in items.items()
        if name in answers.items
        and (why := _why_not_theirs(item, answers.items[name], answers))
    ]
    return tuple(unknown + missing + found + people)


def why_answer_will_not_do(
    item: Item, answer: ItemAnswer, job: Job, last_day: str
) -> str | None:
    """None for an answer with which light may be given, otherwise the reason."""
    if answer.absent:
        if not item.may_be_absent:
            return "'there is none here' is not an answer to this"
        return None
    if not answer.yes:
        return "is answered no"
    if item.asks is not None and not (answer.words or "").strip():
        return f"words are missing: {item.asks}"
    if item.shown_as is not None and len(answer.words or "") > LONGEST_ON_DOOR:
        return f"the door sheet has room for {LONGEST_ON_DOOR} letters of it"
    return _why_readings_will_not_do(item, answer, job, last_day)


def who_answers(item: Item, answer: ItemAnswer, answers: Answers) -> str | None:
    """The signer who answers: the one named, else the first who may; None: nobody."""
    if answer.by is not None:
        return answer.by
    able = [s.name for s in answers.signers if s.role in item.answered_by]
    return able[0] if able else None


def _why_not_theirs(item: Item, answer: ItemAnswer, answers: Answers) -> str | None:
    by = who_answers(item, answer, answers)
    roles = [s.role for s in answers.signers if s.name == by]
    allowed = " or ".join(item.answered_by)
    if by is None:
        return f"nobody who signs may answer it: allowed {allowed}"
    if not roles:
        return f"'{by}' answers but does not sign"
    if not set(roles) & set(item.answered_by):
        return f"'{by}' answers as {roles[0]}: allowed {allowed}"
    return None


def _why_readings_will_not_do(
    item: Item, answer: ItemAnswer, job: Job, last_day: str
) -> str | None:
    wanted = readings_wanted(item, job)
    given = {reading.of: reading for reading in answer.readings}
    if len(given) != len(answer.readings) or set(given) != {of for of, _ in wanted}:
        names = ", ".join(of or "one" for of, _ in wanted) or "none"
        return f"readings wanted: {names}"
    for of, upper in wanted:
        assert item.reading is not None
        why = why_reading_will_not_do(item.reading, given[of], upper, last_day)
        if why is not None:
            return f"{of}: {why}" if of else why
    return None


def why_reading_will_not_do(
    wanted: Reading, given: ReadingAnswer, upper: float, last_day: str
) -> str | None:
    """None for a reading within its limits by an instrument that is not overdue."""
    if not wanted.lower <= given.value <= upper:
        return (
            f"{given.value:g} {wanted.unit}: allowed {wanted.lower:g} to {upper:g}"
            f" {wanted.unit}"
        )
    if not wanted.with_meter:
        return None
    if not (given.meter or "").strip() or given.meter_due is None:
        return "the instrument and the day it is due are missing"
    if not _is_day(given.meter_due):
        return f"{given.meter_due} is no day of the calendar"
    if given.meter_due < last_day:
        return f"the instrument was due on {given.meter_due}, before {last_day}"
    return None


def answers_as_signed(
    answers: Answers, items: Mapping[str, Item], job: Job
) -> dict[str, dict[str, object]]:
    """Item -> what was stated, who answered and how, as JSON values to be signed."""
    return {
        name: _as_signed(item, answers.items[name], answers, job)
        for name, item in items.items()
    }


def contacts_of(answers: Answers, items: Mapping[str, Item]) -> dict[str, str]:
    """What the door sheet shows -> the words given."""
    return {
        item.shown_as: (answers.items[name].words or "").strip()
        for name, item in items.items()
        if item.shown_as is not None
    }


def _as_signed(
    item: Item, answer: ItemAnswer, answers: Answers, job: Job
) -> dict[str, object]:
    upper = dict(readings_wanted(item, job))
    unit = item.reading.unit if item.reading is not None else ""
    return {
        "says": item.says,
        "answer": "there is none here" if answer.absent else "yes",
        "by": who_answers(item, answer, answers) or "",
        "words": (answer.words or "").strip(),
        "readings": [
            {
                "of": reading.of or "",
                "value": reading.value,
                "unit": unit,
                "highest_allowed": upper[reading.of],
                "meter": reading.meter or "",
                "meter_due": reading.meter_due or "",
            }
            for reading in answer.readings
        ],
    }


def _is_day(text: str) -> bool:
    try:
        date.fromisoformat(text)
    except ValueError:
        return False
    return True


def _upper(reading: Reading, bench: Bench, laser: str | None) -> float:
    if reading.upper is not None:
        return reading.upper
    assert laser is not None
    return full_drive_mw(bench.lasers[laser])


def flaws_in_words(flaws: Sequence[Flaw]) -> str:
    """The first flaw, and how many more there are."""
    more = f" (and {len(flaws) - 1} more)" if len(flaws) > 1 else ""
    return f"item '{flaws[0].item}': {flaws[0].why}{more}"

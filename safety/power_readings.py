"""The power readings that an unattended run rests on: found, judged, signed. Pure.

A reading counts when it was made on this bench, of this laser, under an attended
permit, not long ago, by an instrument that is not overdue, and is not above the bench
file. What the guard looks at again stands in ``sign_off_check``.
"""

from collections.abc import Mapping
from dataclasses import dataclass

from pitchsweep.configs.answers_model import Answers, ReadingAnswer
from pitchsweep.configs.checklist_model import Checklist, Item
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.attended_entries import PowerReading
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.lasers_alight import lasers_alight
from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.sign_off import utc_seconds

DAY_S = 86400.0


@dataclass(frozen=True)
class Needed:
    """What readings are held against.

    ``last_day`` (YYYY-MM-DD) is the last day of the window that is to be signed.
    """

    job: Job
    checklist: Checklist
    utc_s: float
    last_day: str


def latest_readings(job: Job, people: People) -> dict[str, PowerReading]:
    """Laser that may be lit -> its latest reading on this bench; missing where none."""
    here = (job.bench.bench, job.bench.twin is not None)
    return {
        reading.laser: reading
        for reading in people.powers
        if (reading.bench, reading.simulated) == here
        and reading.laser in lasers_alight(job)
    }


def why_power_is_unknown(needed: Needed, people: People) -> str | None:
    """None when every laser's power was read as an unattended run needs it."""
    found = latest_readings(needed.job, people)
    for name in lasers_alight(needed.job):
        reading = found.get(name)
        if reading is None:
            return (
                f"laser '{name}' has no power reading made under an attended permit on"
                f" bench '{needed.job.bench.bench}'"
            )
        reason = _why_it_will_not_do(needed, reading, people)
        if reason is not None:
            return f"laser '{name}', {reading_in_words(reading)}: {reason}"
    return None


def _why_it_will_not_do(
    needed: Needed, reading: PowerReading, people: People
) -> str | None:
    laser = needed.job.bench.lasers[reading.laser]
    most_mw, days = full_drive_mw(laser), needed.checklist.longest_power_age_days
    reader = people.signer_of(reading.key)
    if reader is None or not reader.active:
        return f"'{reading.by}' was revoked since"
    if reading.wavelength_nm != laser.vacuum_wavelength_nm:
        return (
            f"that laser had {reading.wavelength_nm:g} nm, the bench file says"
            f" {laser.vacuum_wavelength_nm:g} nm"
        )
    if not reading.value_mw <= most_mw:
        return f"the bench file says at most {most_mw:g} mW"
    if reading.meter_due < needed.last_day:
        return f"that instrument is due on {reading.meter_due}"
    age_days = (needed.utc_s - utc_seconds(reading.utc)) / DAY_S
    if not age_days <= days:
        return f"that is {age_days:.1f} days ago, the checklist allows {days:g}"
    return None


def reading_in_words(reading: PowerReading) -> str:
    """Value, instrument, day and reader in one line."""
    return (
        f"{reading.value_mw:g} mW by {reading.meter} (due {reading.meter_due}) on"
        f" {reading.utc[:10]}, read by {reading.by}"
    )


def powers_as_signed(job: Job, people: People) -> tuple[Mapping[str, object], ...]:
    """The latest reading of every laser that may be lit, as values to be signed."""
    found = latest_readings(job, people)
    return tuple(
        {
            "laser": name,
            "value_mw": found[name].value_mw,
            "highest_allowed_mw": full_drive_mw(job.bench.lasers[name]),
            "meter": found[name].meter,
            "meter_due": found[name].meter_due,
            "read": found[name].utc,
            "by": found[name].by,
            "key": found[name].key,
            "entry": found[name].n,
            "hash": found[name].hash,
        }
        for name in lasers_alight(job)
    )


def takes_attended_powers(item: Item) -> bool:
    """Whether the readings of an item are those of the ledger, and not asked for."""
    return item.reading is not None and item.reading.not_above == "laser-power"


def attended_answers(job: Job, people: People) -> tuple[ReadingAnswer, ...]:
    """The ledger's readings as answers, one a laser."""
    return tuple(
        ReadingAnswer(
            of=name,
            value=reading.value_mw,
            meter=reading.meter,
            meter_due=reading.meter_due,
        )
        for name, reading in latest_readings(job, people).items()
    )


def with_attended_powers(
    answers: Answers, items: Mapping[str, Item], job: Job, people: People
) -> Answers:
    """``answers`` with the ledger's readings where an item wants them and none stand.

    ValueError where an answer states another power than the ledger.
    """
    read = attended_answers(job, people)
    filled = dict(answers.items)
    for name, item in items.items():
        given = filled.get(name)
        if given is None or given.absent or not takes_attended_powers(item):
            continue
        _refuse_other_values(name, given.readings, read)
        filled[name] = given.model_copy(update={"readings": given.readings or read})
    return answers.model_copy(update={"items": filled})


def _refuse_other_values(
    item: str,
    given: tuple[ReadingAnswer, ...],
    read: tuple[ReadingAnswer, ...],
) -> None:
    known = {reading.of: reading.value for reading in read}
    for answer in given:
        if answer.of in known and answer.value != known[answer.of]:
            raise ValueError(
                f"item '{item}': {answer.of} {answer.value:g} mW is not what was read"
                f" under the attended permit, {known[answer.of]:g} mW"
            )

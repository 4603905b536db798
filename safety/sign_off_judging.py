"""Whether a sign-off is for a job as it stands now: every setting, every rule. Pure."""

from pitchsweep.configs.safety_settings import bound_settings, changes, settings_sha256
from pitchsweep.safety.checklist import (
    circumstances_of,
    items_that_apply,
    signatures_needed,
)
from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.sign_off import SignOff
from pitchsweep.safety.sign_off_check import (
    why_for_another_job,
    why_not_in_force,
    why_not_this_work,
    why_record_is_not_whole,
    why_signatures_do_not_suffice,
)
from pitchsweep.safety.sign_off_making import Work


def why_not_valid(
    record: SignOff, work: Work, people: People, utc_s: float
) -> str | None:
    """None when ``record`` covers ``work`` now, otherwise the first reason.

    Asked in this order: is it for this bench and job; is the record whole and signed;
    do ledger, people and time stand behind it; is every bound setting as it was.
    """
    job = work.job
    return (
        why_for_another_job(
            record,
            bench=job.bench.bench,
            job=job.job,
            simulated=job.bench.twin is not None,
        )
        or why_record_is_not_whole(record)
        or why_not_in_force(record, people, utc_s)
        or why_settings_changed(record, work)
        or why_rules_are_not_met(record, work)
        or why_not_this_work(record, work.work_sha256)
    )


def why_settings_changed(record: SignOff, work: Work) -> str | None:
    """None when every bound setting is as it was signed; else names the first."""
    statement = record.statement
    if settings_sha256(statement.settings) != statement.settings_sha256:
        return "its settings do not fit the fingerprint that stands beside them"
    found = changes(statement.settings, bound_settings(work.job, work.checklist))
    if not found:
        return None
    more = f" (and {len(found) - 1} more)" if len(found) > 1 else ""
    return f"a setting changed since it was signed: {found[0]}{more}"


def why_rules_are_not_met(record: SignOff, work: Work) -> str | None:
    """None when the people and answers are those that the checklist asks for."""
    statement, here = record.statement, circumstances_of(work.job)
    needed = signatures_needed(work.checklist, here)
    if statement.needed != needed:
        return "it was made for other signatures than the checklist asks for"
    missing = set(items_that_apply(work.checklist, here)) - set(statement.answers)
    if missing:
        return f"the item '{sorted(missing)[0]}' was not answered"
    return why_signatures_do_not_suffice(needed, statement.signers)

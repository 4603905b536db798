"""Whether a permit that people signed proves itself to the guard, before it serves.

Acts: reads the people's ledger once. A sign-off and an attended permit count only as
the ledger has them; rehearsals and the permit for nothing need no people. What
happens to them later is seen by watching files: revoking writes one that must stay
absent.
"""

from pathlib import Path

from pitchsweep.safety.attended_entries import why_not_this_attended
from pitchsweep.safety.attended_permit import AttendedPermit
from pitchsweep.safety.guard_config import GuardConfig
from pitchsweep.safety.ledger import Ledger
from pitchsweep.safety.people_ledger import People, judge_with
from pitchsweep.safety.permit import Permit
from pitchsweep.safety.sign_off import utc_seconds
from pitchsweep.safety.sign_off_check import (
    why_not_in_force,
    why_not_this_work,
    why_record_is_not_whole,
    why_signatures_do_not_suffice,
)
from pitchsweep.safety.unattended_permit import UnattendedPermit, work_sha256


def why_permit_is_unproven(config: GuardConfig, utc_s: float) -> str | None:
    """None for a permit that holds, otherwise the reason; other kinds pass."""
    permit: Permit = config.permit
    if isinstance(permit, AttendedPermit):
        people = _people_of(permit.people_ledger)
        if isinstance(people, str):
            return people
        return _why_attended_is_unproven(config, permit, people)
    if not isinstance(permit, UnattendedPermit):
        return None
    people = _people_of(permit.people_ledger)
    if isinstance(people, str):
        return people
    record = permit.record
    reason = (
        why_record_is_not_whole(record)
        or why_signatures_do_not_suffice(
            record.statement.needed, record.statement.signers
        )
        or why_not_in_force(record, people, utc_s)
        or why_not_this_work(record, work_of(config))
    )
    return None if reason is None else f"the sign-off: {reason}"


def _people_of(ledger: str) -> People | str:
    """Where the people's ledger stands, or why nobody can tell."""
    seen = [People()]
    try:
        check = Ledger(Path(ledger)).verify(judge=judge_with(seen))
    except OSError as error:
        return f"the people's ledger cannot be read ({error})"
    if check.broken_entry is not None:
        return f"entry {check.broken_entry} of the people's ledger: {check.reason}"
    return seen[0]


def _why_attended_is_unproven(
    config: GuardConfig, permit: AttendedPermit, people: People
) -> str | None:
    found = people.attended.get(permit.identifier)
    reason = why_not_this_attended(
        found,
        {
            "holder": permit.holder,
            "role": permit.role,
            "ceiling_mw": permit.power_ceiling_mw,
            "ceiling_by": permit.ceiling_by,
            "unit": config.unit.identity,
            "simulated": permit.key is not None,
        },
    )
    if reason is None and found is not None:
        holder = people.signer_of(found.key)
        if holder is None or not holder.active:
            reason = f"the signer '{permit.holder}' was revoked"
        elif permit.valid_until_utc_s > utc_seconds(found.valid_until):
            reason = f"the people's ledger lets it last until {found.valid_until}"
    return None if reason is None else f"the attended permit: {reason}"


def work_of(config: GuardConfig) -> str:
    """The digest of what this guard works from."""
    unit, permitted = config.unit, config.permitted
    return work_sha256(
        identity=unit.identity,
        keep_alive_ms=unit.keep_alive_ms,
        has_shutter=unit.has_shutter,
        line=unit.line,
        channels=unit.channels,
        angles_deg=permitted.angles_deg,
        tolerance_deg=permitted.tolerance_deg,
        power_ceiling_mw=permitted.power_ceiling_mw,
    )

"""Whether an unattended permit proves itself to the guard, before it serves. Acts.

Reads the people's ledger once. What happens to the sign-off later is seen by watching
files: revoking writes one that must stay absent.
"""

from pathlib import Path

from pitchsweep.safety.guard_config import GuardConfig
from pitchsweep.safety.ledger import Ledger
from pitchsweep.safety.people_ledger import People, judge_with
from pitchsweep.safety.permit import Permit
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
    if not isinstance(permit, UnattendedPermit):
        return None
    record = permit.record
    seen = [People()]
    try:
        check = Ledger(Path(permit.people_ledger)).verify(judge=judge_with(seen))
    except OSError as error:
        return f"the people's ledger cannot be read ({error})"
    if check.broken_entry is not None:
        return f"entry {check.broken_entry} of the people's ledger: {check.reason}"
    reason = (
        why_record_is_not_whole(record)
        or why_signatures_do_not_suffice(
            record.statement.needed, record.statement.signers
        )
        or why_not_in_force(record, seen[0], utc_s)
        or why_not_this_work(record, work_of(config))
    )
    return None if reason is None else f"the sign-off: {reason}"


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

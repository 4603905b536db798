"""Sign-offs on disk: signs, keeps, finds, judges and revokes them. Acts."""

import os
import secrets
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from pitchsweep.safety.file_watch import file_sha256
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.people_ledger import SIGNED_OFF, WITHDRAWN
from pitchsweep.safety.people_store import PeopleNow, enter
from pitchsweep.safety.safety_errors import GateRefused, RecordForged
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.sign_off import (
    LedgerMark,
    SignOff,
    Statement,
    record_from,
    record_text,
    signed_bytes,
)
from pitchsweep.safety.sign_off_judging import why_not_valid
from pitchsweep.safety.sign_off_making import Work
from pitchsweep.safety.signing import SIGN_OFF, PrivateKey

SHOW_REMEDY = "keep the file as it is and show it to the safety officer"


@dataclass(frozen=True)
class Kept:
    """A record and the file it was read from."""

    path: Path
    record: SignOff


@dataclass(frozen=True)
class Judged:
    """A kept record and why it does not count for the job in hand; empty: it does."""

    kept: Kept
    why_not: str


def new_identifier() -> str:
    """16 hexadecimal digits that no other sign-off has."""
    return secrets.token_hex(8)


def sign_and_keep(
    home: SafetyHome, statement: Statement, keys: Sequence[PrivateKey]
) -> Kept:
    """Signs ``statement`` with ``keys``, enters it into the ledger, keeps the record.

    Raises LedgerBroken when the ledger does not hold, OSError.
    """
    message = signed_bytes(statement)
    signatures = tuple(key.sign(SIGN_OFF, message) for key in keys)
    draft = SignOff(statement, signatures, LedgerMark(0, ""))
    entry = enter(
        home,
        SIGNED_OFF,
        {
            "id": statement.id,
            "sha256": draft.sha256,
            "bench": statement.bench,
            "job": statement.job,
            "simulated": statement.simulated,
            "valid_from": statement.valid_from,
            "valid_until": statement.valid_until,
            "signers": [f"{s.name} as {s.role}" for s in statement.signers],
        },
        keys,
    )
    record = SignOff(statement, signatures, LedgerMark(entry.n, entry.hash))
    path = home.record(statement.id)
    write_new(path, record_text(record))
    return Kept(path, record)


def records_of(home: SafetyHome) -> list[Kept | RecordForged]:
    """Every record of ``home``, newest first; an unreadable one as its error."""
    if not home.sign_offs.is_dir():
        return []
    found = [_read(path) for path in sorted(home.sign_offs.glob("*.json"))]
    return sorted(found, key=_age, reverse=True)


def judge(
    home: SafetyHome, kept: Kept, work: Work, now: PeopleNow, utc_s: float
) -> str:
    """Why ``kept`` does not count for ``work`` now; empty when it does."""
    statement = kept.record.statement
    if kept.path.stem != statement.id:
        return f"the record {statement.id} was put under another name"
    why = why_not_valid(kept.record, work, now.people, utc_s)
    if why is None and home.revoked(statement.id).exists():
        return "it was revoked (the ledger does not say by whom yet)"
    return why or ""


def revoke(home: SafetyHome, identifier: str, *, name: str, reason: str) -> None:
    """Makes a sign-off void: at once for a running guard, then in the ledger.

    Needs no secret, as every way of stopping. Raises LedgerBroken when the ledger
    cannot take it in (the sign-off is void all the same), OSError.
    """
    mark_revoked(home, identifier)
    enter(home, WITHDRAWN, {"id": identifier, "name": name, "reason": reason}, ())


def mark_revoked(home: SafetyHome, what: str) -> None:
    """Writes the file that running guards look for; again and again is harmless."""
    path = home.revoked(what)
    path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
    path.write_text(f"revoked {utc_text()}\n", encoding="utf-8")


def watched_files(home: SafetyHome, kept: Kept) -> dict[str, str]:
    """Path -> SHA-256 (empty: must stay absent) of what a guard looks at all night."""
    statement = kept.record.statement
    readers = [str(power["key"]) for power in statement.powers]
    marks = [statement.id, *(signer.key for signer in statement.signers), *readers]
    return {
        str(kept.path): file_sha256(kept.path),
        **{str(home.revoked(mark)): "" for mark in marks},
    }


def write_new(path: Path, text: str) -> None:
    """Writes ``text`` durably to ``path``, whole or not at all. Raises OSError."""
    path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
    part = path.with_name(f".{path.name}.part")
    with open(part, "w", encoding="utf-8") as file:
        file.write(text)
        file.flush()
        os.fsync(file.fileno())
    os.replace(part, path)


def the_one_to_show(found: Sequence[Judged | RecordForged], job: str) -> Judged:
    """The valid record, else the newest. Raises GateRefused when there is none."""
    judged = [one for one in found if isinstance(one, Judged)]
    if not judged:
        raise GateRefused(f"job '{job}' has no sign-off", f"pitchsweep signoff {job}")
    return next((one for one in judged if not one.why_not), judged[0])


def _read(path: Path) -> Kept | RecordForged:
    try:
        return Kept(path, record_from(path.read_bytes()))
    except OSError as error:
        return RecordForged(str(path), f"cannot be read ({error})", SHOW_REMEDY)
    except ValueError as error:
        return RecordForged(str(path), str(error), SHOW_REMEDY)


def _age(one: Kept | RecordForged) -> str:
    return one.record.statement.made if isinstance(one, Kept) else ""

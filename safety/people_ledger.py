"""What people did, read off the people's ledger: who may sign, what was signed. Pure.

The ledger is the truth and the register of signers is read off it. Every entry that a
person makes names, inside its hash, the keys that must have signed it; ``take`` goes
from one state to the next and refuses an entry that the rules do not allow. So a
line that was edited, moved, repeated or signed anew is found by its number.

Loaded by the guard: nothing here needs more than the standard library and, for the
signatures themselves, ``cryptography``.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import TypeVar

from pitchsweep.safety.attended_entries import (
    ATTENDED_BEGUN,
    ATTENDED_ENDED,
    POWER_READ,
    Attended,
    PowerReading,
    attended_begun,
    power_read,
)
from pitchsweep.safety.ledger_chain import Entry, Judge
from pitchsweep.safety.signing import ENTRY, signature_holds

ENROLLED = "signer-enrolled"
REVOKED = "signer-revoked"
SIGNED_OFF = "sign-off"
WITHDRAWN = "sign-off-revoked"
RUN_BEGUN = "run-begun"
RUN_ENDED = "run-ended"
REPAIRED = "torn-line-repaired"
OFFICER = "safety-officer"
ROLES = ("safety-officer", "technician", "witness")
_T = TypeVar("_T")


@dataclass(frozen=True)
class Signer:
    """A person and a public key; ``vouched_by`` is empty for the first enrolment.

    ``revoked_utc`` is empty while the key counts.
    """

    name: str
    key: str
    roles: tuple[str, ...]
    enrolled_utc: str
    vouched_by: str
    revoked_utc: str = ""
    revoked_by: str = ""
    revoked_for: str = ""

    @property
    def active(self) -> bool:
        """True while signatures of this key count."""
        return not self.revoked_utc


@dataclass(frozen=True)
class Entered:
    """A sign-off as the ledger has it."""

    n: int
    hash: str
    sha256: str
    withdrawn_utc: str = ""
    withdrawn_by: str = ""
    withdrawn_for: str = ""


@dataclass(frozen=True)
class People:
    """Where the people's ledger stands after some entry.

    ``signers`` by name, ``sign_offs`` and ``attended`` by identifier, ``powers`` read
    in their order, ``runs`` run -> what its end entry holds.
    """

    signers: Mapping[str, Signer] = field(default_factory=dict)
    sign_offs: Mapping[str, Entered] = field(default_factory=dict)
    runs: Mapping[str, Mapping[str, object]] = field(default_factory=dict)
    attended: Mapping[str, Attended] = field(default_factory=dict)
    powers: tuple[PowerReading, ...] = ()

    def signer_of(self, key: str) -> Signer | None:
        """The signer with this public key, revoked or not."""
        return next((s for s in self.signers.values() if s.key == key), None)


def take(people: People, entry: Entry) -> People:
    """The state after ``entry``; ValueError says why it may not stand there."""
    handle = _BY_KIND.get(entry.kind)
    if handle is None:
        raise ValueError(f"is of a kind that is not known here: {entry.kind}")
    return handle(people, entry)


def judge_with(seen: list[People]) -> Judge:
    """A judge for ``check_lines``; ``seen``, of one state, follows entry by entry."""

    def judge(entry: Entry) -> str | None:
        try:
            seen[0] = take(seen[0], entry)
        except ValueError as error:
            return str(error)
        return None

    return judge


def _enrolled(people: People, entry: Entry) -> People:
    name, key = _text(entry, "name"), _text(entry, "key")
    roles = _roles(entry)
    by = _keys_that_signed(entry)
    if name in people.signers:
        raise ValueError(f"enrols '{name}', who is enrolled already")
    if people.signer_of(key) is not None:
        raise ValueError("enrols a key that is enrolled already")
    if key not in by:
        raise ValueError(f"enrols '{name}' without a signature of the new key")
    voucher = _active_officer(people, by)
    if people.signers and voucher is None:
        raise ValueError(f"enrols '{name}' without a safety officer's signature")
    if not people.signers and OFFICER not in roles:
        raise ValueError("the first to be enrolled must be a safety officer")
    vouched_by = "" if voucher is None else voucher.name
    signer = Signer(name, key, roles, entry.utc, vouched_by)
    return replace(people, signers=_with(people.signers, name, signer))


def _revoked(people: People, entry: Entry) -> People:
    name, reason = _text(entry, "name"), _text(entry, "reason")
    by = _keys_that_signed(entry)
    signer = people.signers.get(name)
    if signer is None or not signer.active:
        raise ValueError(f"revokes '{name}', who is not enrolled or revoked already")
    officer = _active_officer(people, by)
    if officer is None and by != (signer.key,):
        raise ValueError(
            f"revokes '{name}' without a signature of theirs or of a safety officer"
        )
    revoked = replace(
        signer,
        revoked_utc=entry.utc,
        revoked_by=signer.name if officer is None else officer.name,
        revoked_for=reason,
    )
    return replace(people, signers=_with(people.signers, name, revoked))


def _signed_off(people: People, entry: Entry) -> People:
    identifier, sha256 = _text(entry, "id"), _text(entry, "sha256")
    by = _keys_that_signed(entry)
    if identifier in people.sign_offs:
        raise ValueError(f"enters sign-off {identifier} a second time")
    if not by:
        raise ValueError(f"enters sign-off {identifier} without a signature")
    for key in by:
        signer = people.signer_of(key)
        if signer is None or not signer.active:
            raise ValueError("is signed with a key that does not count here")
    entered = Entered(entry.n, entry.hash, sha256)
    return replace(people, sign_offs=_with(people.sign_offs, identifier, entered))


def _withdrawn(people: People, entry: Entry) -> People:
    # Stopping needs no secret: a name is enough, and what follows is dark.
    identifier = _text(entry, "id")
    by, reason = _text(entry, "name"), _text(entry, "reason")
    _keys_that_signed(entry)
    entered = people.sign_offs.get(identifier)
    if entered is None:
        raise ValueError(f"revokes sign-off {identifier}, which was never entered")
    if entered.withdrawn_utc:
        return people
    gone = replace(
        entered, withdrawn_utc=entry.utc, withdrawn_by=by, withdrawn_for=reason
    )
    return replace(people, sign_offs=_with(people.sign_offs, identifier, gone))


def _attended_begun(people: People, entry: Entry) -> People:
    by = _keys_that_signed(entry)
    holder = people.signer_of(by[0]) if by else None
    if holder is None or not holder.active or holder.name != _text(entry, "name"):
        raise ValueError("gives an attended permit without its holder's signature")
    officer = _active_officer(people, by)
    begun = attended_begun(
        entry,
        key=holder.key,
        roles=holder.roles,
        officer="" if officer is None else officer.name,
    )
    if begun.id in people.attended:
        raise ValueError(f"begins attended permit {begun.id} a second time")
    return replace(people, attended=_with(people.attended, begun.id, begun))


def _power_read(people: People, entry: Entry) -> People:
    by, found = _keys_that_signed(entry), people.attended.get(_text(entry, "attended"))
    if found is None:
        raise ValueError("reads a power under no attended permit")
    holder = people.signer_of(found.key)
    if by != (found.key,) or holder is None or not holder.active:
        raise ValueError("reads a power without the signature of who held the key")
    return replace(people, powers=(*people.powers, power_read(entry, found)))


def _attended_ended(people: People, entry: Entry) -> People:
    _unchanged(people, entry)
    found = people.attended.get(_text(entry, "id"))
    if found is None or found.ended:
        raise ValueError("ends an attended permit that did not last")
    over = replace(found, ended=_text(entry, "ending"))
    return replace(people, attended=_with(people.attended, over.id, over))


def _run_ended(people: People, entry: Entry) -> People:
    run = _text(entry, "run")
    _unchanged(people, entry)
    return replace(people, runs=_with(people.runs, run, entry.data))


def _unchanged(people: People, entry: Entry) -> People:
    if entry.signed:
        raise ValueError(f"an entry of kind {entry.kind} is not signed by anyone")
    return people


_BY_KIND: Mapping[str, Callable[[People, Entry], People]] = MappingProxyType(
    {
        ENROLLED: _enrolled,
        REVOKED: _revoked,
        SIGNED_OFF: _signed_off,
        WITHDRAWN: _withdrawn,
        ATTENDED_BEGUN: _attended_begun,
        POWER_READ: _power_read,
        ATTENDED_ENDED: _attended_ended,
        RUN_BEGUN: _unchanged,
        RUN_ENDED: _run_ended,
        REPAIRED: _unchanged,
    }
)


def _keys_that_signed(entry: Entry) -> tuple[str, ...]:
    """The keys named in ``by``, each of which must have signed, in that order."""
    named = entry.data.get("by")
    if not isinstance(named, list) or not all(isinstance(k, str) for k in named):
        raise ValueError("does not name the keys that sign it")
    if len(set(named)) != len(named):
        raise ValueError("names one key twice as signing it")
    if [signed.key for signed in entry.signed] != named:
        raise ValueError("is not signed by the keys that it names")
    for signed in entry.signed:
        if not signature_holds(signed, ENTRY, entry.hash.encode("ascii")):
            raise ValueError("carries a signature that does not hold")
    return tuple(named)


def _active_officer(people: People, keys: tuple[str, ...]) -> Signer | None:
    for key in keys:
        signer = people.signer_of(key)
        if signer is not None and signer.active and OFFICER in signer.roles:
            return signer
    return None


def _text(entry: Entry, field_name: str) -> str:
    value = entry.data.get(field_name)
    if not isinstance(value, str) or not value:
        raise ValueError(f"lacks its {field_name}")
    return value


def _roles(entry: Entry) -> tuple[str, ...]:
    roles = entry.data.get("roles")
    if not isinstance(roles, list) or not roles or not set(roles) <= set(ROLES):
        raise ValueError(f"gives roles {roles}; there are {', '.join(ROLES)}")
    return tuple(roles)


def _with(values: Mapping[str, _T], key: str, value: _T) -> Mapping[str, _T]:
    return {**values, key: value}

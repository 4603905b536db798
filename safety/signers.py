"""Enrols and revokes signers, opens their keys. Acts (key files, people's ledger).

The first enrolment proves only that somebody at this computer made the key: nobody
vouches for who they are. Every later one is vouched for by a safety officer's
signature. Whoever can rewrite the whole folder can begin it anew; that shows only where
a head was kept elsewhere (door sheets, runs, reports).
"""

import re
from collections.abc import Sequence

from pitchsweep.safety.people_ledger import ENROLLED, OFFICER, REVOKED, ROLES, Signer
from pitchsweep.safety.people_store import PeopleNow, enter, read_people
from pitchsweep.safety.safety_errors import SignerRefused
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.sign_off_store import mark_revoked
from pitchsweep.safety.signing import PrivateKey, new_key, open_key, write_key

NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}\Z")
FIRST_PROVES = (
    "first signer here: this proves that somebody at this computer made this key,"
    " not who they are; no one vouches for it"
)


def enrol(
    home: SafetyHome,
    name: str,
    roles: Sequence[str],
    passphrase: str,
    voucher: PrivateKey | None = None,
) -> Signer:
    """A new key for ``name``, entered into ledger and register.

    ``voucher`` is a safety officer's opened key; only the very first signer, who must
    be a safety officer, needs none. Raises SignerRefused, LedgerBroken, RecordForged,
    OSError; nothing is entered then.
    """
    vouched_by = None if voucher is None else voucher.name
    refuse_enrolling(home, name, roles, vouched_by)
    key = new_key(name)
    home.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
    write_key(home.key(name), key, passphrase)
    try:
        keys = [key] if voucher is None else [key, voucher]
        data = {"name": name, "key": key.public, "roles": list(roles)}
        enter(home, ENROLLED, data, keys)
    except BaseException:
        home.key(name).unlink(missing_ok=True)
        raise
    return read_people(home).people.signers[name]


def refuse_enrolling(
    home: SafetyHome, name: str, roles: Sequence[str], voucher: str | None
) -> None:
    """Returns when ``name`` may be enrolled with ``voucher`` (a name) vouching.

    Raises SignerRefused otherwise, before any passphrase is asked for.
    """
    now = read_people(home)
    _refuse_name_and_roles(now, name, roles)
    if not now.people.signers:
        return
    if voucher is None:
        raise SignerRefused(
            name,
            "nobody vouches for this signer",
            "give an enrolled safety officer with --vouched-by NAME",
        )
    if OFFICER not in active_signer(now, voucher).roles:
        raise SignerRefused(
            voucher, "may not vouch for others", "only a safety officer may"
        )


def revoke_signer(home: SafetyHome, name: str, reason: str, by: PrivateKey) -> Signer:
    """The signer ``name``, whose key counts no more from now on.

    ``by`` is the key of a safety officer or of the signer. Every sign-off that carries
    a signature of theirs is void, and running guards see it. Raises SignerRefused,
    LedgerBroken, RecordForged, OSError.
    """
    now = read_people(home)
    signer = now.people.signers.get(name)
    if signer is None or not signer.active:
        raise SignerRefused(name, "is not enrolled, or revoked already", _LIST)
    acting = now.people.signer_of(by.public)
    if by.public != signer.key and (acting is None or OFFICER not in acting.roles):
        raise SignerRefused(
            by.name, f"may not revoke '{name}'", "a safety officer may, or they do"
        )
    mark_revoked(home, signer.key)
    enter(home, REVOKED, {"name": name, "key": signer.key, "reason": reason}, [by])
    return read_people(home).people.signers[name]


def open_signer(home: SafetyHome, name: str, passphrase: str) -> PrivateKey:
    """The private key of an enrolled signer.

    Raises SignerRefused for a name that is not enrolled or revoked, a wrong passphrase,
    or a key file that is not the enrolled key.
    """
    signer = active_signer(read_people(home), name)
    key = open_key(home.key(name), name, passphrase)
    if key.public != signer.key:
        raise SignerRefused(
            name, f"{home.key(name)} is not the enrolled key", "enrol a new one"
        )
    return key


def active_signer(now: PeopleNow, name: str) -> Signer:
    """The signer ``name``. Raises SignerRefused when not enrolled or revoked."""
    signer = now.people.signers.get(name)
    if signer is None:
        raise SignerRefused(name, "is not enrolled", _LIST)
    if not signer.active:
        raise SignerRefused(name, f"was revoked on {signer.revoked_utc}", _LIST)
    return signer


def _refuse_name_and_roles(now: PeopleNow, name: str, roles: Sequence[str]) -> None:
    if not NAME.match(name):
        raise SignerRefused(
            name, "is no name for a signer", "letters, digits, '.', '_', '-'; up to 64"
        )
    if name in now.people.signers:
        raise SignerRefused(
            name,
            "is or was enrolled already",
            "names are not given twice: take another",
        )
    odd = [role for role in roles if role not in ROLES]
    if odd or not roles or len(set(roles)) != len(roles):
        raise SignerRefused(
            name,
            f"roles {', '.join(roles) or 'none'}",
            f"allowed, each once: {', '.join(ROLES)}",
        )
    if not now.people.signers and OFFICER not in roles:
        raise SignerRefused(
            name, "is the first to be enrolled", f"the first takes the role {OFFICER}"
        )


_LIST = "'pitchsweep signer list' shows who is enrolled here"

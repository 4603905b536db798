"""What ``signer enrol|list|revoke`` do; texts to be printed come back. Acts (home)."""

import json
import textwrap
from collections.abc import Sequence

from pitchsweep.acquire.passphrases import Passphrases
from pitchsweep.safety.people_ledger import Signer
from pitchsweep.safety.people_store import (
    read_people,
    rebuild_register,
    signers_in_words,
)
from pitchsweep.safety.safety_home import safety_home
from pitchsweep.safety.signers import (
    FIRST_PROVES,
    active_signer,
    open_signer,
    refuse_enrolling,
    revoke_signer,
)
from pitchsweep.safety.signers import (
    enrol as enrol_signer,
)


def enrol(
    name: str, roles: Sequence[str], vouched_by: str | None, files: Sequence[str]
) -> str:
    """Enrols ``name``; what to print. Raises SignerRefused, LedgerBroken, OSError."""
    home, passphrases = safety_home(), Passphrases(files)
    refuse_enrolling(home, name, roles, vouched_by)
    voucher = None
    if vouched_by is not None:
        voucher = open_signer(home, vouched_by, passphrases.of(vouched_by))
    passphrase = passphrases.of(name, twice=True)
    signer = enrol_signer(home, name, roles, passphrase, voucher)
    lines = [
        f"enrolled {name} as {' and '.join(signer.roles)}, key {signer.key[:16]}",
        f"private key  {home.key(name)} (under the passphrase; nobody can recover it)",
        f"vouched by   {signer.vouched_by or 'nobody'}",
    ]
    if not signer.vouched_by:
        note = textwrap.wrap(FIRST_PROVES, 65)
        lines += [f"Note         {note[0]}", *(f"             {n}" for n in note[1:])]
    return "\n".join(lines)


def listed(*, as_json: bool, rebuild: bool) -> str:
    """Everybody who is or was enrolled; ``rebuild`` writes the register first."""
    home = safety_home()
    if rebuild:
        rebuild_register(home)
    now = read_people(home)
    signers = sorted(now.people.signers.values(), key=lambda s: s.name)
    if as_json:
        values = {
            "home": str(home.folder),
            "ledger_entries": now.entries,
            "ledger_head": now.head,
            "signers": signers_in_words(signers),
        }
        return json.dumps(values, indent=1)
    lines = [_line(signer) for signer in signers]
    if not lines:
        lines = ["nobody is enrolled here; begin with: pitchsweep signer enrol NAME"]
    return "\n".join([*lines, f"home {home.folder}, ledger entries {now.entries}"])


def revoke(name: str, by: str, reason: str, files: Sequence[str]) -> str:
    """Revokes ``name``; what to print. Raises SignerRefused, LedgerBroken, OSError."""
    home = safety_home()
    active_signer(read_people(home), name)
    key = open_signer(home, by, Passphrases(files).of(by))
    signer = revoke_signer(home, name, reason, key)
    return (
        f"revoked {name} on {signer.revoked_utc}: {reason}\n"
        f"every sign-off that carries a signature of {name} is void"
    )


def _line(signer: Signer) -> str:
    vouched = f"vouched by {signer.vouched_by}" if signer.vouched_by else "first here"
    state = "" if signer.active else f"  REVOKED {signer.revoked_utc[:16]}"
    why = "" if signer.active else f" by {signer.revoked_by}: {signer.revoked_for}"
    return (
        f"{signer.name:<16} {', '.join(signer.roles):<32} key {signer.key[:16]}"
        f"  {signer.enrolled_utc[:16]}Z, {vouched}{state}{why}"
    )

"""The people's ledger and the register on disk: reads both, adds to them. Acts."""

import json
import os
from collections.abc import Iterable, Mapping, Sequence
from contextlib import suppress
from dataclasses import asdict, dataclass
from pathlib import Path

from pitchsweep.safety.ledger import Ledger
from pitchsweep.safety.ledger_chain import Entry, LedgerCheck, Signed
from pitchsweep.safety.people_ledger import People, Signer, judge_with, take
from pitchsweep.safety.safety_errors import LedgerBroken, RecordForged
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.sign_off import record_from
from pitchsweep.safety.signing import ENTRY, PrivateKey


@dataclass(frozen=True)
class PeopleNow:
    """Where the people's ledger stands: the state, its entry count and its head."""

    people: People
    entries: int
    head: str


def check_people(
    path: Path, known: Mapping[int, str] | None = None
) -> tuple[LedgerCheck, People]:
    """A walk through the people's ledger at ``path``, and the state it leads to."""
    check, people, _ = _walk(path, known, 0)
    return check, people


def _walk(
    path: Path, known: Mapping[int, str] | None, at: int
) -> tuple[LedgerCheck, People, People]:
    """The check, the state at the end, and the state after entry ``at``."""
    seen, then = [People()], [People()]
    take_entry = judge_with(seen)

    def judge(entry: Entry) -> str | None:
        reason = take_entry(entry)
        if entry.n == at:
            then[0] = seen[0]
        return reason

    check = Ledger(path).verify(known, judge)
    return check, seen[0], then[0]


def read_people(home: SafetyHome, *, compare: bool = True) -> PeopleNow:
    """Where the ledger of ``home`` stands; an absent one is empty.

    Raises LedgerBroken naming the first broken entry, and (unless told not to
    ``compare``) RecordForged when the register says otherwise than the ledger.
    """
    kept = _head_in_register(home)
    check, people, then = _walk(home.ledger, kept, max(kept, default=0))
    if check.broken_entry is not None:
        raise LedgerBroken(str(home.ledger), check.broken_entry, check.reason)
    if compare:
        _compare_register(home, then if kept else people)
    return PeopleNow(people, check.count, check.head)


def enter(
    home: SafetyHome,
    kind: str,
    data: Mapping[str, object],
    keys: Sequence[PrivateKey] | None = None,
) -> Entry:
    """Adds an entry to the people's ledger, signed with ``keys``; writes the register.

    With ``keys`` given (also with none in it) ``data`` gains ``by``, their public
    halves. Raises LedgerBroken when the ledger does not hold or the rules do not
    allow the entry, OSError.
    """
    home.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
    signers = tuple(keys or ())
    whole = data if keys is None else {**data, "by": [key.public for key in signers]}
    after: list[People] = []

    def sign(entry_hash: str) -> Sequence[Signed]:
        return [key.sign(ENTRY, entry_hash.encode("ascii")) for key in signers]

    def look(entry: Entry) -> None:
        # Under the ledger's lock: nobody adds anything between this and the write.
        now = read_people(home, compare=False)
        try:
            after.append(take(now.people, entry))
        except ValueError as error:
            raise LedgerBroken(str(home.ledger), entry.n, str(error)) from None

    entry = Ledger(home.ledger).append(kind, whole, sign=sign, before_write=look)
    _write_register(home, after[0], entry.n, entry.hash)
    return entry


def rebuild_register(home: SafetyHome) -> None:
    """Writes the register anew from the ledger, which must still meet its head.

    Raises LedgerBroken (also for a ledger whose tail was cut), OSError.
    """
    try:
        kept = _head_in_register(home)
    except RecordForged:
        kept = {}
    check, people = check_people(home.ledger, kept)
    if check.broken_entry is not None:
        raise LedgerBroken(str(home.ledger), check.broken_entry, check.reason)
    if check.count:
        _write_register(home, people, check.count, check.head)


def signers_in_words(signers: Iterable[Signer]) -> list[dict[str, object]]:
    """The signers as JSON values, sorted by name."""
    return [
        {**asdict(signer), "roles": list(signer.roles)}
        for signer in sorted(signers, key=lambda s: s.name)
    ]


def _write_register(home: SafetyHome, people: People, entries: int, head: str) -> None:
    content = {
        "about": "a copy of what ledger.jsonl says; compared with it at every use",
        "ledger_entries": entries,
        "ledger_head": head,
        "signers": signers_in_words(people.signers.values()),
    }
    temporary = home.register.with_name(f".{home.register.name}.part")
    text = json.dumps(content, indent=1) + "\n"
    with open(temporary, "w", encoding="utf-8") as file:
        file.write(text)
        file.flush()
        os.fsync(file.fileno())
    os.replace(temporary, home.register)


def _read_register(home: SafetyHome) -> Mapping[str, object] | None:
    try:
        content = json.loads(home.register.read_bytes())
    except FileNotFoundError:
        return None
    except (OSError, ValueError):
        raise RecordForged(
            str(home.register), "cannot be read as JSON", _REMEDY
        ) from None
    if not isinstance(content, dict):
        raise RecordForged(str(home.register), "is no register", _REMEDY)
    return content


def known_heads(home: SafetyHome) -> dict[int, str]:
    """The heads that stand outside the ledger in ``home``: register and sign-offs.

    Unreadable files keep none.
    """
    kept: dict[int, str] = {}
    with suppress(RecordForged):
        kept.update(_head_in_register(home))
    for path in home.sign_offs.glob("*.json"):
        with suppress(OSError, ValueError):
            record = record_from(path.read_bytes())
            for mark in (record.statement.ledger, record.entered):
                kept[mark.entries] = mark.head
    kept.pop(0, None)
    return kept


def _head_in_register(home: SafetyHome) -> Mapping[int, str]:
    """The head kept beside the ledger: shows a ledger whose tail was cut."""
    content = _read_register(home) or {}
    n, head = content.get("ledger_entries"), content.get("ledger_head")
    return {n: head} if isinstance(n, int) and isinstance(head, str) else {}


def _compare_register(home: SafetyHome, people: People) -> None:
    # A power cut between ledger and register leaves the register behind, not wrong.
    content = _read_register(home)
    wanted = signers_in_words(people.signers.values())
    if content is None:
        if wanted:
            raise RecordForged(str(home.register), "is missing", _REMEDY)
        return
    found = content.get("signers")
    if found == wanted:
        return
    listed = found if isinstance(found, list) else []
    odd = [s for s in listed if s not in wanted] + [
        s for s in wanted if s not in listed
    ]
    name = odd[0].get("name") if odd and isinstance(odd[0], dict) else "?"
    raise RecordForged(
        str(home.register), f"signer '{name}' is not as the ledger has it", _REMEDY
    )


_REMEDY = (
    "show both to the safety officer; 'pitchsweep signer list --rebuild' writes the"
    " register anew from the ledger"
)

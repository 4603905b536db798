"""The ledger's chain, pure: entries to lines, lines to entries, and what is broken.

Each line is the canonical JSON of an entry; its ``hash`` is the SHA-256 of the hash
before it followed by the canonical JSON of the entry without ``hash``. Whoever can
rewrite the whole file can make a consistent one: only heads kept elsewhere show that,
or signatures: where people act, ``signed`` holds their signatures over ``hash``. It
stands outside the hash; who must have signed is inside (``people_ledger``).
"""

import hashlib
import json
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass

GENESIS = "0" * 64
FIELDS = frozenset({"n", "utc", "kind", "data", "prev", "hash"})
SIGNED = "signed"


@dataclass(frozen=True)
class Signed:
    """A public key and its Ed25519 signature, both in hexadecimal."""

    key: str
    signature: str


@dataclass(frozen=True)
class Entry:
    """One line: number from 1, UTC text, kind, data, hash before and own hash.

    ``signed`` holds the signatures over ``hash``, none where no person acted.
    """

    n: int
    utc: str
    kind: str
    data: Mapping[str, object]
    prev: str
    hash: str
    signed: tuple[Signed, ...] = ()


Judge = Callable[[Entry], str | None]
"""None for an entry that may stand where it does, otherwise the reason."""


@dataclass(frozen=True)
class LedgerCheck:
    """What a verification found.

    ``count`` whole entries up to the first broken one, ``head`` the hash of the last
    of them, ``broken_entry`` its number (None when the chain holds), ``reason`` why,
    ``torn_bytes`` length of a last line without its end.
    """

    count: int
    head: str
    broken_entry: int | None = None
    reason: str = ""
    torn_bytes: int = 0

    @property
    def holds(self) -> bool:
        """True when no entry is broken and no line is torn."""
        return self.broken_entry is None and self.torn_bytes == 0


def canonical_json(value: object) -> bytes:
    """The one spelling of ``value``: sorted keys, no spaces, ASCII, no NaN."""
    text = json.dumps(
        value,
        sort_keys=True,
        separators=(",", ":"),
        ensure_ascii=True,
        allow_nan=False,
    )
    return text.encode("ascii")


def entry_hash(prev: str, body: Mapping[str, object]) -> str:
    """Hexadecimal SHA-256 of ``prev`` (as text) and the canonical body."""
    return hashlib.sha256(prev.encode("ascii") + canonical_json(body)).hexdigest()


def next_entry(
    prev: Entry | None, *, kind: str, data: Mapping[str, object], utc: str
) -> Entry:
    """The entry that follows ``prev`` (None at the beginning)."""
    n = 1 if prev is None else prev.n + 1
    before = GENESIS if prev is None else prev.hash
    body = {"n": n, "utc": utc, "kind": kind, "data": data, "prev": before}
    return Entry(n, utc, kind, data, before, entry_hash(before, body))


def entry_line(entry: Entry) -> bytes:
    """The entry as its line, line feed included."""
    values = {key: value for key, value in vars(entry).items() if key != SIGNED}
    if entry.signed:
        values[SIGNED] = [vars(signed) for signed in entry.signed]
    return canonical_json(values) + b"\n"


def read_entry(line: bytes) -> Entry:
    """The entry in ``line`` (without line feed); ValueError says what is wrong with it.

    The number and the hash before it are not judged here.
    """
    try:
        values = json.loads(line)
    except ValueError as error:
        raise ValueError("not JSON") from error
    if not isinstance(values, dict) or set(values) - {SIGNED} != FIELDS:
        raise ValueError("not an entry with its six fields")
    if not isinstance(values["n"], int) or not isinstance(values["data"], dict):
        raise ValueError("fields of the wrong type")
    if not all(isinstance(values[k], str) for k in ("utc", "kind", "prev", "hash")):
        raise ValueError("fields of the wrong type")
    if canonical_json(values) != line:
        raise ValueError("not in canonical spelling")
    signed = _signatures(values.pop(SIGNED)) if SIGNED in values else ()
    body = {key: value for key, value in values.items() if key != "hash"}
    if entry_hash(values["prev"], body) != values["hash"]:
        raise ValueError("its hash does not fit its content")
    return Entry(**values, signed=signed)


def _signatures(values: object) -> tuple[Signed, ...]:
    fields = {"key", "signature"}
    if not isinstance(values, list) or not values:
        raise ValueError("its signatures are no list")
    for value in values:
        if not isinstance(value, dict) or set(value) != fields:
            raise ValueError("a signature of it lacks key or signature")
        if not all(isinstance(text, str) for text in value.values()):
            raise ValueError("a signature of it is no text")
    return tuple(Signed(**value) for value in values)


def why_not_next(prev: Entry | None, entry: Entry) -> str | None:
    """None when ``entry`` follows ``prev``, otherwise the reason."""
    wanted = 1 if prev is None else prev.n + 1
    if entry.n != wanted:
        return f"numbered {entry.n}"
    if entry.prev != (GENESIS if prev is None else prev.hash):
        return "does not follow from the entry before it"
    return None


def check_lines(
    lines: Iterable[bytes],
    torn_bytes: int = 0,
    known: Mapping[int, str] | None = None,
    judge: Judge | None = None,
) -> LedgerCheck:
    """Walks whole lines (without line feeds) and stops at the first broken entry.

    ``known`` holds heads that were kept elsewhere, entry number -> hash; an entry that
    differs from its own, or is missing at the end, is broken too. ``judge`` is asked
    about every entry whose place in the chain is right, in order.
    """
    kept = dict(known or {})
    last: Entry | None = None
    count = 0
    for line in lines:
        try:
            entry = read_entry(line)
            reason = why_not_next(last, entry) or _why_not_kept(entry, kept)
            if reason is None and judge is not None:
                reason = judge(entry)
        except ValueError as error:
            reason = str(error)
        if reason is not None:
            return LedgerCheck(count, _head(last), count + 1, reason, torn_bytes)
        last = entry
        count += 1
    if kept and max(kept) > count:
        reason = f"cut off: {max(kept)} entries were recorded elsewhere"
        return LedgerCheck(count, _head(last), count + 1, reason, torn_bytes)
    return LedgerCheck(count, _head(last), None, "", torn_bytes)


def _why_not_kept(entry: Entry, kept: Mapping[int, str]) -> str | None:
    if kept.get(entry.n, entry.hash) == entry.hash:
        return None
    return "is not the entry that was recorded elsewhere"


def _head(entry: Entry | None) -> str:
    return GENESIS if entry is None else entry.hash

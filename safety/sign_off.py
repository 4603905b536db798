"""The sign-off: what is signed, as one canonical text, and back. Pure.

A sign-off binds people to settings for a stated time. It authorises nothing in law,
and it is no safety function. Loaded by the guard: the standard library is enough.
"""

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, fields
from datetime import UTC, datetime

from pitchsweep.safety.ledger_chain import Signed, canonical_json

FORMAT = "pitchsweep sign-off 2"
LONGEST_RECORD = 1024 * 1024


@dataclass(frozen=True)
class SignsAs:
    """A person, the public key they sign with, and the role they sign in."""

    name: str
    key: str
    role: str


@dataclass(frozen=True)
class LedgerMark:
    """How many entries the people's ledger had, and the hash of the last."""

    entries: int
    head: str


@dataclass(frozen=True)
class Statement:
    """Everything that is signed.

    ``part`` names part, serial and lot; ``valid_from`` and ``valid_until`` are UTC
    text; ``signers`` in the order in which they sign, ``needed`` the roles that each
    needed signature may be given in; ``settings`` dotted path -> JSON value of all that
    it is bound to; ``work_sha256`` covers unit and permitted angles as the guard gets
    them; ``checklist`` is where the checklist was read; ``figures`` and ``beam_map``
    are the lines that the signers were shown; ``lasers`` what the door sheet says of
    each; ``powers`` the power at the part of each as read under an attended permit;
    ``answers`` item -> what was stated and answered; ``contacts`` role on the
    door sheet -> words; ``ledger`` where the people's ledger stood.
    """

    id: str
    made: str
    bench: str
    job: str
    part: str
    simulated: bool
    valid_from: str
    valid_until: str
    signers: tuple[SignsAs, ...]
    needed: tuple[tuple[str, ...], ...]
    settings: Mapping[str, object]
    settings_sha256: str
    work_sha256: str
    checklist: str
    figures: tuple[str, ...]
    beam_map: tuple[str, ...]
    lasers: tuple[Mapping[str, object], ...]
    powers: tuple[Mapping[str, object], ...]
    answers: Mapping[str, Mapping[str, object]]
    contacts: Mapping[str, str]
    ledger: LedgerMark

    @property
    def window_utc_s(self) -> tuple[float, float]:
        """Start and end as UTC seconds."""
        return utc_seconds(self.valid_from), utc_seconds(self.valid_until)


@dataclass(frozen=True)
class SignOff:
    """A statement with the signatures over it; ``entered`` is its own ledger entry."""

    statement: Statement
    signatures: tuple[Signed, ...]
    entered: LedgerMark

    @property
    def sha256(self) -> str:
        """Hexadecimal SHA-256 of what was signed."""
        return hashlib.sha256(signed_bytes(self.statement)).hexdigest()


def signed_bytes(statement: Statement) -> bytes:
    """The one spelling of ``statement`` that signatures are made over."""
    return canonical_json({"format": FORMAT, **_plain(vars(statement))})


def record_text(record: SignOff) -> str:
    """The record as JSON text for a file; ``record_from`` reads it back."""
    values = {
        "format": FORMAT,
        "statement": _plain(vars(record.statement)),
        "signatures": [vars(signed) for signed in record.signatures],
        "entered": vars(record.entered),
    }
    return json.dumps(values, indent=1, sort_keys=True, allow_nan=False) + "\n"


def record_from(text: str | bytes) -> SignOff:
    """The record in ``text``; ValueError says what is wrong with it."""
    if len(text) > LONGEST_RECORD:
        raise ValueError(f"longer than {LONGEST_RECORD} bytes")
    try:
        values = json.loads(text)
    except ValueError as error:
        raise ValueError("is not JSON (cut off or edited)") from error
    if not isinstance(values, dict) or values.get("format") != FORMAT:
        raise ValueError(f"is no '{FORMAT}'")
    try:
        return SignOff(
            statement=_statement(values["statement"]),
            signatures=tuple(Signed(**_texts(s)) for s in values["signatures"]),
            entered=_mark(values["entered"]),
        )
    except (KeyError, TypeError, AttributeError) as error:
        raise ValueError(f"lacks a field or holds a wrong one ({error})") from None


def utc_seconds(text: str) -> float:
    """UTC text (ISO 8601, ``Z``) as seconds; ValueError for anything else."""
    if not text.endswith("Z"):
        raise ValueError(f"{text!r} is no UTC time ending in Z")
    when = datetime.fromisoformat(text.removesuffix("Z"))
    return when.replace(tzinfo=UTC).timestamp()


def _statement(values: Mapping[str, object]) -> Statement:
    names = {field.name for field in fields(Statement)}
    if set(values) != names:
        odd = ", ".join(sorted(set(values) ^ names))
        raise ValueError(f"its statement has other fields than it should: {odd}")
    whole: dict[str, object] = dict(values)
    for name in ("signers", "needed", "figures", "beam_map", "lasers", "powers"):
        if not isinstance(whole[name], list):
            raise TypeError(f"{name} is no list")
    whole["signers"] = tuple(SignsAs(**_texts(s)) for s in _list(whole, "signers"))
    whole["needed"] = tuple(tuple(roles) for roles in _list(whole, "needed"))
    for name in ("figures", "beam_map", "lasers", "powers"):
        whole[name] = tuple(_list(whole, name))
    whole["ledger"] = _mark(whole["ledger"])
    for name in ("settings", "answers", "contacts"):
        if not isinstance(whole[name], dict):
            raise TypeError(f"{name} is no block")
    statement = Statement(**whole)  # type: ignore[arg-type]
    _check_texts(statement)
    return statement


def _check_texts(statement: Statement) -> None:
    for field in fields(Statement):
        if field.type is str and not isinstance(getattr(statement, field.name), str):
            raise TypeError(f"{field.name} is no text")
    if not isinstance(statement.simulated, bool):
        raise TypeError("simulated is neither true nor false")
    start, end = statement.window_utc_s
    if not start < end:
        raise ValueError("its window ends before it begins")


def _list(values: Mapping[str, object], key: str) -> list[dict[str, object]]:
    value = values[key]
    assert isinstance(value, list)
    return value


def _texts(values: Mapping[str, object]) -> dict[str, str]:
    if not all(isinstance(value, str) for value in values.values()):
        raise TypeError("a text is missing")
    return {key: str(value) for key, value in values.items()}


def _mark(values: object) -> LedgerMark:
    if not isinstance(values, dict) or set(values) != {"entries", "head"}:
        raise TypeError("a ledger mark is missing")
    if not isinstance(values["entries"], int) or not isinstance(values["head"], str):
        raise TypeError("a ledger mark is damaged")
    return LedgerMark(values["entries"], values["head"])


def _plain(values: Mapping[str, object]) -> dict[str, object]:
    """Dataclasses and tuples as the JSON values that reading gives back."""
    return {key: _plain_value(value) for key, value in values.items()}


def _plain_value(value: object) -> object:
    if isinstance(value, SignsAs | LedgerMark):
        return dict(vars(value))
    if isinstance(value, Mapping):
        return _plain(value)
    if isinstance(value, list | tuple):
        return [_plain_value(item) for item in value]
    return value

"""What a forger does to the people's ledger is named by the number of the entry."""

import json
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from sign_off_builders import (
    OFFICER,
    TECHNICIAN,
    Office,
    chained_anew,
    demo_work,
    edit_json,
    ledger_lines,
    office,
    signed,
    write_ledger,
)

from pitchsweep.safety.ledger import Ledger
from pitchsweep.safety.people_ledger import ENROLLED, REVOKED, RUN_ENDED, SIGNED_OFF
from pitchsweep.safety.people_store import (
    check_people,
    enter,
    known_heads,
    read_people,
    rebuild_register,
)
from pitchsweep.safety.safety_errors import LedgerBroken, RecordForged
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.sign_off_store import revoke
from pitchsweep.safety.signers import revoke_signer
from pitchsweep.safety.signing import ENTRY, new_key

Entries = list[dict[str, Any]]


@pytest.fixture(scope="module")
def full(tmp_path_factory: pytest.TempPathFactory) -> Office:
    """A home whose ledger has every kind of entry.

    Three enrolled, attended light with its power reading, signed, run, revoked.
    """
    here = office(tmp_path_factory.mktemp("full"))
    kept = signed(here, demo_work())
    enter(here.home, RUN_ENDED, {"run": "r1", "entries": 7, "head": "ab" * 32})
    revoke(here.home, kept.record.statement.id, name="bo", reason="hinge")
    revoke_signer(here.home, TECHNICIAN, "left", here.keys[OFFICER])
    return here


@pytest.fixture
def at(full: Office, tmp_path: Path) -> Office:
    """A copy of it to forge."""
    shutil.copytree(full.home.folder, tmp_path / "home")
    return Office(SafetyHome(tmp_path / "home"), full.keys)


def broken(at: Office, known: dict[int, str] | None = None) -> tuple[int | None, str]:
    check, _ = check_people(at.home.ledger, known)
    return check.broken_entry, check.reason


def test_an_honest_ledger_holds_and_meets_every_head_kept_elsewhere(at: Office) -> None:
    heads = known_heads(at.home)
    assert broken(at, heads) == (None, "") and len(heads) >= 3
    now = read_people(at.home)
    assert now.entries == 10 and now.people.runs["r1"]["entries"] == 7
    assert [s.active for s in now.people.signers.values()] == [True, False, True]


def leaves(values: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    inner = values.items() if isinstance(values, dict) else enumerate(values)
    for key, value in inner:
        if isinstance(value, dict | list) and value:
            yield from leaves(value, (*path, key))
        else:
            yield (*path, key)


def bumped(value: Any) -> Any:
    if isinstance(value, bool):
        return not value
    if isinstance(value, int | float):
        return value + 1
    if isinstance(value, list):
        return ["ff" * 32]
    return ("0" if value[:1] != "0" else "1") + value[1:]


def put(entry: dict[str, Any], path: tuple[Any, ...]) -> None:
    inner: Any = entry
    for key in path[:-1]:
        inner = inner[key]
    inner[path[-1]] = bumped(inner[path[-1]])


def test_every_single_edit_is_found_at_its_entry(at: Office) -> None:
    entries, tried = ledger_lines(at.home), 0
    for place, entry in enumerate(entries):
        for path in leaves(entry):
            forged = json.loads(json.dumps(entries))
            put(forged[place], path)
            write_ledger(at.home, forged)
            assert broken(at)[0] == place + 1, path
            tried += 1
    assert tried > 60


def test_an_edit_chained_anew_is_found_where_a_person_signed(at: Office) -> None:
    entries = ledger_lines(at.home)
    for place, entry in enumerate(entries):
        for path in leaves({"data": entry["data"]}):
            forged = json.loads(json.dumps(entries))
            put(forged[place], path)
            write_ledger(at.home, chained_anew(forged))
            first, reason = broken(at)
            # An entry that nobody signs shifts the hash under the next signature.
            expected = next(
                n for n, e in enumerate(entries, 1) if n > place and "signed" in e
            )
            assert first is not None and place < first <= expected, (path, reason)


def test_the_last_unsigned_entries_show_by_the_heads_kept_elsewhere(at: Office) -> None:
    enter(at.home, RUN_ENDED, {"run": "r2", "entries": 9, "head": "cd" * 32})
    entries, heads = ledger_lines(at.home), known_heads(at.home)
    entries[-1]["data"]["entries"] = 5
    write_ledger(at.home, chained_anew(entries))
    assert broken(at) == (None, "")
    assert broken(at, heads) == (11, "is not the entry that was recorded elsewhere")
    with pytest.raises(LedgerBroken, match="entry 11"):
        read_people(at.home)


@pytest.mark.parametrize("anew", [False, True])
@pytest.mark.parametrize("place", range(9))
def test_entries_in_another_order_are_found(at: Office, place: int, anew: bool) -> None:
    entries = ledger_lines(at.home)
    entries[place], entries[place + 1] = entries[place + 1], entries[place]
    write_ledger(at.home, chained_anew(entries) if anew else entries)
    first, _ = broken(at)
    # Entries that nobody signs shift the hash under the next signature.
    assert first is not None and first <= (10 if anew else place + 2)


@pytest.mark.parametrize("anew", [False, True])
@pytest.mark.parametrize("place", [0, 1, 3, 4, 5, 6, 8, 9])
def test_a_replayed_entry_is_found(at: Office, place: int, anew: bool) -> None:
    entries = ledger_lines(at.home)
    entries.append(entries[place])
    write_ledger(at.home, chained_anew(entries) if anew else entries)
    if place == 8 and anew:
        # Revoking twice is harmless and needs no signature.
        assert broken(at) == (None, "")
        return
    assert broken(at)[0] == 11


@pytest.mark.parametrize("left", range(10))
def test_a_cut_tail_is_found_by_the_head_in_the_register(at: Office, left: int) -> None:
    write_ledger(at.home, ledger_lines(at.home)[:left])
    assert broken(at) == (None, "")
    with pytest.raises(LedgerBroken, match=f"entry {left + 1} .*cut off"):
        read_people(at.home)
    with pytest.raises(LedgerBroken, match="cut off"):
        rebuild_register(at.home)


@pytest.mark.parametrize("place", [0, 1, 3, 4, 6, 9])
def test_an_entry_signed_by_a_stranger_is_found(at: Office, place: int) -> None:
    entries = ledger_lines(at.home)
    stranger = new_key("stranger")
    forged = chained_anew(entries)[place]
    forged["data"]["by"] = [stranger.public for _ in forged["data"]["by"]][:1]
    forged = chained_anew([*entries[:place], forged])[place]
    with_key = stranger.sign(ENTRY, forged["hash"].encode())
    forged["signed"] = [vars(with_key)]
    write_ledger(at.home, [*entries[:place], forged])
    assert broken(at)[0] == place + 1


def test_signatures_taken_off_are_found(at: Office) -> None:
    for place, entry in enumerate(ledger_lines(at.home)):
        if "signed" in entry:
            entries = ledger_lines(at.home)
            del entries[place]["signed"]
            saved = at.home.ledger.read_bytes()
            write_ledger(at.home, entries)
            number, reason = broken(at)
            assert number == place + 1 and "not signed by the keys" in reason
            at.home.ledger.write_bytes(saved)


@pytest.mark.parametrize(
    ("kind", "data", "by", "why"),
    [
        (
            ENROLLED,
            {"name": "mo", "roles": ["witness"]},
            ["new", "cy"],
            "safety officer's signature",
        ),
        (
            ENROLLED,
            {"name": "mo", "roles": ["witness"]},
            ["new", "bo"],
            "safety officer's signature",
        ),
        (ENROLLED, {"name": "mo", "roles": ["boss"]}, ["new", "ada"], "gives roles"),
        (ENROLLED, {"name": "cy", "roles": ["witness"]}, ["new", "ada"], "already"),
        (ENROLLED, {"name": "mo", "roles": ["witness"]}, ["ada"], "of the new key"),
        (REVOKED, {"name": "ada", "reason": "x"}, ["cy"], "without a signature"),
        (REVOKED, {"name": "bo", "reason": "x"}, ["ada"], "revoked already"),
        (SIGNED_OFF, {"id": "a1", "sha256": "b"}, [], "without a signature"),
        (SIGNED_OFF, {"id": "a1", "sha256": "b"}, ["bo"], "does not count"),
        ("holiday", {"id": "a1"}, None, "kind that is not known"),
        ("sign-off-revoked", {"id": "a1", "name": "x", "reason": "y"}, [], "never"),
    ],
)
def test_the_rules_hold_for_whoever_writes_the_ledger(
    at: Office, kind: str, data: dict[str, object], by: list[str] | None, why: str
) -> None:
    mo = new_key("mo")
    keys = {**at.keys, "new": mo}
    if kind == ENROLLED:
        data = {**data, "key": mo.public}
    chosen = None if by is None else [keys[name] for name in by]
    with pytest.raises(LedgerBroken, match=why) as caught:
        enter(at.home, kind, data, chosen)
    assert caught.value.entry == 11 and len(ledger_lines(at.home)) == 10


def test_a_damaged_ledger_takes_in_nothing(at: Office) -> None:
    entries = ledger_lines(at.home)
    entries[1]["data"]["roles"] = ["safety-officer"]
    write_ledger(at.home, entries)
    with pytest.raises(LedgerBroken, match="entry 2"):
        enter(at.home, RUN_ENDED, {"run": "r2", "entries": 1, "head": "x"})
    with pytest.raises(LedgerBroken, match="entry 2"):
        read_people(at.home)


@pytest.mark.parametrize(
    "change",
    [
        lambda r: r["signers"][1]["roles"].append("safety-officer"),
        lambda r: r["signers"][1].update(revoked_utc=""),
        lambda r: r["signers"].pop(),
        lambda r: r["signers"].append({"name": "mo"}),
        lambda r: r["signers"][0].update(key="00" * 32),
        lambda r: r.update(signers="x"),
    ],
)
def test_an_edited_register_shows_and_can_be_written_anew(
    at: Office, change: Any
) -> None:
    edit_json(at.home.register, change)
    with pytest.raises(RecordForged, match="not as the ledger has it"):
        read_people(at.home)
    rebuild_register(at.home)
    assert read_people(at.home).entries == 10


def test_a_missing_or_unreadable_register_shows(at: Office) -> None:
    at.home.register.write_text("{")
    with pytest.raises(RecordForged, match="JSON"):
        read_people(at.home)
    rebuild_register(at.home)
    at.home.register.unlink()
    with pytest.raises(RecordForged, match="missing"):
        read_people(at.home)


def test_a_register_left_behind_by_a_power_cut_is_not_called_forged(at: Office) -> None:
    before = at.home.register.read_bytes()
    enter(at.home, RUN_ENDED, {"run": "r2", "entries": 9, "head": "cd" * 32})
    at.home.register.write_bytes(before)
    assert read_people(at.home).entries == 11


def test_an_unsigned_ledger_still_has_the_six_fields(tmp_path: Path) -> None:
    Ledger(tmp_path / "l.jsonl").append("gate", {"a": 1})
    (entry,) = map(json.loads, (tmp_path / "l.jsonl").read_bytes().splitlines())
    assert set(entry) == {"n", "utc", "kind", "data", "prev", "hash"}

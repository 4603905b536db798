"""The ledger: chain, torn tails, tampering."""

import hashlib
import json
from pathlib import Path

import pytest

from pitchsweep.safety.ledger import Ledger, utc_text, verify
from pitchsweep.safety.ledger_chain import GENESIS, canonical_json
from pitchsweep.safety.safety_errors import LedgerBroken

UTC = "2026-01-02T03:04:05.678Z"


def written(tmp_path: Path, count: int = 5) -> Ledger:
    ledger = Ledger(tmp_path / "ledger.jsonl")
    for number in range(count):
        ledger.append("light", {"step": number, "light_s": 0.25}, UTC)
    return ledger


def lines_of(ledger: Ledger) -> list[bytes]:
    return ledger.path.read_bytes().splitlines(keepends=True)


def test_an_absent_ledger_is_empty_and_holds(tmp_path: Path) -> None:
    check = verify(tmp_path / "none.jsonl")
    assert (check.holds, check.count, check.head) == (True, 0, GENESIS)


def test_appended_entries_form_a_chain_with_count_and_head(tmp_path: Path) -> None:
    ledger = written(tmp_path)
    check = verify(ledger.path)
    assert check.holds and check.count == 5
    assert check.head == json.loads(lines_of(ledger)[-1])["hash"]


def test_the_hash_is_plain_sha256_recomputed_outside(tmp_path: Path) -> None:
    """FIPS 180-4 SHA-256 by hashlib over the documented bytes."""
    ledger = written(tmp_path, 2)
    first, second = map(json.loads, lines_of(ledger))
    own = second.pop("hash")
    text = json.dumps(second, sort_keys=True, separators=(",", ":"))
    assert second["prev"] == first["hash"]
    assert own == hashlib.sha256((first["hash"] + text).encode()).hexdigest()


def test_sha256_agrees_with_the_published_example() -> None:
    """NIST FIPS 180-2 appendix B.1: SHA-256("abc")."""
    assert hashlib.sha256(b"abc").hexdigest() == (
        "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    )


def test_canonical_json_refuses_nan() -> None:
    with pytest.raises(ValueError):
        canonical_json({"a": float("nan")})


def edited(lines: list[bytes]) -> list[bytes]:
    return [line.replace(b'"step":2', b'"step":7') for line in lines]


def reordered(lines: list[bytes]) -> list[bytes]:
    return [*lines[:2], lines[3], lines[2], lines[4]]


def dropped(lines: list[bytes]) -> list[bytes]:
    return [*lines[:2], *lines[3:]]


def replayed(lines: list[bytes]) -> list[bytes]:
    return [*lines[:2], lines[1], *lines[2:]]


def spaced(lines: list[bytes]) -> list[bytes]:
    return [*lines[:2], lines[2].replace(b",", b", ", 1), *lines[3:]]


def rehashed(lines: list[bytes]) -> list[bytes]:
    """One entry made consistent in itself again: the next one gives it away."""
    values = json.loads(lines[1])
    values["data"]["light_s"] = 0.0
    body = {key: value for key, value in values.items() if key != "hash"}
    text = values["prev"].encode() + canonical_json(body)
    values["hash"] = hashlib.sha256(text).hexdigest()
    return [lines[0], canonical_json(values) + b"\n", *lines[2:]]


@pytest.mark.parametrize(
    "tamper", [edited, reordered, dropped, replayed, spaced, rehashed]
)
def test_tampering_names_the_first_broken_entry(tmp_path: Path, tamper) -> None:  # type: ignore[no-untyped-def]
    ledger = written(tmp_path)
    ledger.path.write_bytes(b"".join(tamper(lines_of(ledger))))
    check = verify(ledger.path)
    assert check.broken_entry == 3
    assert check.count == 2 and check.reason


def test_a_cut_tail_shows_against_a_head_kept_elsewhere(tmp_path: Path) -> None:
    ledger = written(tmp_path)
    kept = {5: verify(ledger.path).head}
    ledger.path.write_bytes(b"".join(lines_of(ledger)[:3]))
    assert verify(ledger.path).holds
    check = verify(ledger.path, kept)
    assert check.broken_entry == 4 and "cut off" in check.reason


def test_a_ledger_written_anew_shows_against_a_head_kept_elsewhere(
    tmp_path: Path,
) -> None:
    ledger = written(tmp_path)
    kept = {3: json.loads(lines_of(ledger)[2])["hash"]}
    assert verify(ledger.path, kept).holds
    ledger.path.unlink()
    other = Ledger(ledger.path)
    for number in range(5):
        other.append("light", {"step": number, "light_s": 0.1}, UTC)
    assert verify(ledger.path).holds
    assert verify(ledger.path, kept).broken_entry == 3


@pytest.mark.parametrize("left", [1, 20, 60])
def test_a_torn_last_line_is_cut_off_and_recorded(tmp_path: Path, left: int) -> None:
    ledger = written(tmp_path)
    lines = lines_of(ledger)
    ledger.path.write_bytes(b"".join(lines[:4]) + lines[4][:left])
    assert verify(ledger.path).torn_bytes == left
    assert not verify(ledger.path).holds
    ledger.append("light", {"step": 9}, UTC)
    kinds = [json.loads(line)["kind"] for line in lines_of(ledger)]
    assert kinds == ["light"] * 4 + ["torn-line-repaired", "light"]
    assert verify(ledger.path).holds


def test_a_whole_last_line_without_its_end_is_completed(tmp_path: Path) -> None:
    ledger = written(tmp_path)
    ledger.path.write_bytes(ledger.path.read_bytes()[:-1])
    ledger.append("light", {"step": 9}, UTC)
    check = verify(ledger.path)
    assert check.holds and check.count == 7


def test_appending_to_a_wrong_last_line_is_refused(tmp_path: Path) -> None:
    ledger = written(tmp_path)
    lines = lines_of(ledger)
    ledger.path.write_bytes(b"".join(lines[:4]) + b'{"n":5}\n')
    before = ledger.path.read_bytes()
    with pytest.raises(LedgerBroken, match="entry 5"):
        ledger.append("light", {}, UTC)
    assert ledger.path.read_bytes() == before


def test_entries_longer_than_a_block_are_found_again(tmp_path: Path) -> None:
    ledger = Ledger(tmp_path / "ledger.jsonl")
    for size in (10, 70_000, 200_000, 10):
        ledger.append("note", {"text": "x" * size}, UTC)
    assert verify(ledger.path).count == 4 and verify(ledger.path).holds


def test_utc_text_is_iso_8601_to_the_millisecond() -> None:
    assert utc_text(0.0019) == "1970-01-01T00:00:00.001Z"

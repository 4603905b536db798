"""What ``ledger verify`` does: people's ledger, runs' ledgers, heads kept elsewhere."""

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_folder import is_run_folder, open_run_folder
from pitchsweep.safety.ledger import verify
from pitchsweep.safety.ledger_chain import LedgerCheck
from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.people_store import check_people, known_heads
from pitchsweep.safety.safety_home import SafetyHome, safety_home

OUT_OF_REACH = (
    "rolling back the ledger together with every copy of its head cannot be seen here:"
    " compare with a door sheet or a report"
)


@dataclass(frozen=True)
class Walked:
    """One ledger, what the walk through it found, and with how many kept heads."""

    path: Path
    check: LedgerCheck
    heads: int


def verify_ledgers(places: Sequence[Path], *, as_json: bool) -> tuple[bool, str]:
    """(all hold, text to print): the people's ledger without ``places``.

    A run folder stands for its own ledger; its journal's heads are met in both it and
    the people's ledger, which is then walked too. Raises RunRefused for anything else.
    """
    walked = list(_walks(places))
    holds = all(one.check.holds for one in walked)
    if as_json:
        return holds, json.dumps([_values(one) for one in walked], indent=1)
    return holds, "\n".join([*map(_line, walked), f"Caution    {OUT_OF_REACH}"])


def _walks(places: Sequence[Path]) -> Iterator[Walked]:
    home = safety_home()
    runs = [place for place in places if is_run_folder(place)]
    people = People()
    if not places or runs:
        kept = {**known_heads(home), **_people_heads(runs)}
        check, people = check_people(home.ledger, kept)
        yield Walked(home.ledger, check, len(kept))
    for place in places:
        if place in runs:
            folder = open_run_folder(place)
            heads = _run_heads(folder.path, people)
            ledger = folder.path / "ledger.jsonl"
            yield Walked(ledger, verify(ledger, heads), len(heads))
        elif place.is_file():
            yield Walked(place, *_file(home, place))
        else:
            raise RunRefused(place, "no run folder and no ledger file")


def _file(home: SafetyHome, place: Path) -> tuple[LedgerCheck, int]:
    if place.resolve() == home.ledger.resolve():
        kept = known_heads(home)
        return check_people(place, kept)[0], len(kept)
    return verify(place), 0


def _people_heads(runs: Sequence[Path]) -> dict[int, str]:
    metas = [_meta(run) for run in runs]
    return dict(
        _mark(meta, "people_ledger") for meta in metas if meta.get("people_ledger_head")
    )


def _run_heads(run: Path, people: People) -> dict[int, str]:
    """The run ledger's head as the journal and as the people's ledger have it."""
    meta = _meta(run)
    heads: dict[int, str] = {}
    if meta.get("ledger_head"):
        heads.update([_mark(meta, "ledger")])
    ended = people.runs.get(run.resolve().name)
    if ended is not None:
        heads[int(str(ended["entries"]))] = str(ended["head"])
    return heads


def _meta(run: Path) -> Mapping[str, str]:
    path = run / "run.db"
    if not path.exists():
        return {}
    with open_journal(path, read_only=True) as journal:
        return journal.meta()


def _mark(meta: Mapping[str, str], name: str) -> tuple[int, str]:
    return int(meta[f"{name}_entries"]), meta[f"{name}_head"]


def _line(one: Walked) -> str:
    check = one.check
    if check.broken_entry is not None:
        return f"BROKEN     {one.path}: entry {check.broken_entry}: {check.reason}"
    if check.torn_bytes:
        return (
            f"TORN       {one.path}: the last line of {check.torn_bytes} bytes has no"
            f" end (a power cut?); the next entry repairs and records it"
        )
    return (
        f"holds      {one.path}: {check.count} entries, head {check.head[:16]},"
        f" {one.heads} heads kept elsewhere are met"
    )


def _values(one: Walked) -> dict[str, object]:
    return {"path": str(one.path), **vars(one.check), "holds": one.check.holds}

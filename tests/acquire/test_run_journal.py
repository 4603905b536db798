"""Each writer: committed, nested, rolled back, read through a second connection."""

import sqlite3
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from acquire_fakes import small_job

from pitchsweep.acquire import journal_file
from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.journal_file import create_journal, open_journal
from pitchsweep.acquire.journal_rows import (
    FrameRow,
    GateRow,
    RejectedRow,
    SpotRow,
    StepSpots,
)
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.sweep_plan import plan_sweep

STEP = plan_sweep(small_job(), "x").steps[3]
FRAME = FrameRow("frames/000001.png", "ab" * 32, "light", 2.5, 0, "red", 0, 3, 0, 0.1)
SPOT = SpotRow(1 / 3, -2 / 3, 0.1, 5e-324, 1e-17, 12.5)
PIXELS = replace(SPOT, column_px=0.1 + 0.2, row_px=1e300, snr=7.0, saturated=True)
FOUND = StepSpots(
    (SPOT, PIXELS), (RejectedRow(1.5, 2.5, "px", "too-faint", "é"),), 64.0
)

Writer = Callable[[RunJournal], Any]

WRITERS: dict[str, Writer] = {
    "meta": lambda j: j.set_meta("key", "value"),
    "session": lambda j: j.begin_session("me"),
    "ending": lambda j: j.end_session(1, "done"),
    "intent": lambda j: j.intend(1, STEP),
    "acknowledge": lambda j: j.acknowledge(
        1, readback_deg=0.1, bench_s=2.0, frames=[FRAME], spots=FOUND
    ),
    "fail": lambda j: j.fail(1, "stage stuck"),
    "spots": lambda j: j.record_spots(1, FOUND),
    "gate": lambda j: j.record_gate(GateRow("2026", 3, "lit", "asked", "")),
    "fault": lambda j: j.record_fault("camera", "no frame", "stop", 3),
}


def prepared(path: Path) -> RunJournal:
    journal = create_journal(path)
    journal.begin_session("first")
    journal.intend(1, STEP)
    return journal


def content(path: Path) -> dict[str, list[Any]]:
    """Every row of every table through a second connection, times left out."""
    with sqlite3.connect(path) as other:
        names = [
            row[0]
            for row in other.execute(
                "SELECT name FROM sqlite_master WHERE type='table'"
            )
        ]
        rows = {
            name: [
                tuple(v for v in row if not str(v).startswith("20"))
                for row in other.execute(f"SELECT * FROM {name}")
            ]
            for name in names
        }
    other.close()
    return rows


@pytest.mark.parametrize("name", WRITERS)
def test_writer_is_committed_when_it_returns(tmp_path: Path, name: str) -> None:
    with prepared(tmp_path / "run.db") as journal:
        before = content(journal.path)
        WRITERS[name](journal)
        assert content(journal.path) != before


@pytest.mark.parametrize("name", WRITERS)
def test_writer_inside_a_transaction_waits_for_its_end(
    tmp_path: Path, name: str
) -> None:
    with prepared(tmp_path / "run.db") as journal:
        before = content(journal.path)
        with journal.transaction():
            WRITERS[name](journal)
            assert content(journal.path) == before
        assert content(journal.path) != before


@pytest.mark.parametrize("name", WRITERS)
def test_writer_is_undone_with_its_transaction(tmp_path: Path, name: str) -> None:
    with prepared(tmp_path / "run.db") as journal:
        before = content(journal.path)
        with pytest.raises(KeyError), journal.transaction():
            WRITERS[name](journal)
            raise KeyError
        assert content(journal.path) == before


def test_an_inner_failure_undoes_its_own_part_only(tmp_path: Path) -> None:
    with prepared(tmp_path / "run.db") as journal:
        with journal.transaction():
            journal.set_meta("outer", "1")
            with pytest.raises(KeyError), journal.transaction():
                journal.set_meta("inner", "1")
                raise KeyError
            journal.set_meta("after", "1")
        assert set(journal.meta()) == {"outer", "after"}


def test_numbers_come_back_to_the_last_bit(tmp_path: Path) -> None:
    with prepared(tmp_path / "run.db") as journal:
        journal.acknowledge(
            1, readback_deg=0.1 + 0.2, bench_s=1 / 3, frames=[FRAME], spots=FOUND
        )
    with open_journal(tmp_path / "run.db", read_only=True) as journal:
        assert journal.spots(1) == FOUND
        assert journal.frames(1) == [FRAME]
        row = journal.intents()[0]
        assert (row.readback_deg, row.bench_s) == (0.1 + 0.2, 1 / 3)
        assert journal.spots(2) is None


def test_a_closed_journal_is_one_file(tmp_path: Path) -> None:
    journal = prepared(tmp_path / "run.db")
    assert (tmp_path / "run.db-wal").exists()
    journal.close()
    journal.close()
    assert [p.name for p in tmp_path.iterdir()] == ["run.db"]


def test_an_unclosed_journal_keeps_every_commit(tmp_path: Path) -> None:
    journal = prepared(tmp_path / "run.db")
    for name in ("run.db", "run.db-wal"):
        (tmp_path / f"copy{name[3:]}").hardlink_to(tmp_path / name)
    with open_journal(tmp_path / "copy.db") as other:
        assert len(other.intents()) == 1
    journal.close()


@pytest.mark.parametrize(
    ("data", "says"),
    [
        (b"", "not a run journal"),
        (b"hello" * 1000, "not a run journal, or damaged"),
        (b"SQLite format 3\0" + b"\xff" * 4096, "not a run journal, or damaged"),
    ],
)
def test_a_foreign_file_is_refused(tmp_path: Path, data: bytes, says: str) -> None:
    path = tmp_path / "run.db"
    path.write_bytes(data)
    with pytest.raises(RunRefused, match=says):
        open_journal(path)


def test_a_damaged_journal_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "run.db"
    with prepared(path) as journal:
        for number in range(300):
            journal.set_meta(f"key {number}", "x" * 200)
    data = bytearray(path.read_bytes())
    data[8192:16384] = b"\xa5" * 8192
    path.write_bytes(data)
    with pytest.raises(RunRefused, match="damaged"):
        open_journal(path)


def test_missing_other_version_and_double_creation_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "run.db"
    with pytest.raises(RunRefused, match="no run journal here"):
        open_journal(path)
    prepared(path).close()
    with pytest.raises(RunRefused, match="already"):
        create_journal(path)
    with sqlite3.connect(path) as other:
        other.execute("PRAGMA user_version=99")
    other.close()
    with pytest.raises(RunRefused, match="version 99"):
        open_journal(path)


def test_a_folder_without_locking_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    real = sqlite3.connect

    def without_locks(path: Any, **options: Any) -> sqlite3.Connection:
        # SQLite's own way to leave locking to nobody, as some network folders do.
        return real(f"file:{path}?nolock=1", uri=True, **options)

    monkeypatch.setattr(journal_file.sqlite3, "connect", without_locks)
    with pytest.raises(RunRefused, match="does not honour file locking"):
        create_journal(tmp_path / "run.db")

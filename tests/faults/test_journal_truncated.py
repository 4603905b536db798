"""The write-ahead log cut at every frame: opens, is sound, keeps what was said kept.

The layout (32-byte header, then frames of 24 bytes and a page) is documented in
"WAL-mode File Format" of SQLite, https://www.sqlite.org/walformat.html.
"""

import shutil
import sqlite3
import struct
from pathlib import Path

from acquire_fakes import small_job

from pitchsweep.acquire.journal_file import create_journal, open_journal
from pitchsweep.acquire.sweep_plan import plan_sweep

WAL_HEADER, FRAME_HEADER = 32, 24
STEPS = plan_sweep(small_job(), "x").steps[:6]


def test_cut_at_every_frame_nothing_acknowledged_before_is_missing(
    tmp_path: Path,
) -> None:
    path, wal = tmp_path / "run.db", tmp_path / "run.db-wal"
    journal = create_journal(path)
    sizes = []
    session = journal.begin_session("me")
    for step in STEPS:
        intent = journal.intend(session, step)
        journal.acknowledge(intent, readback_deg=step.stage_deg, bench_s=1.0)
        sizes.append(wal.stat().st_size)
    content = wal.read_bytes()
    page = struct.unpack(">I", content[8:12])[0]
    cuts = range(WAL_HEADER, len(content) + 1, FRAME_HEADER + page)
    assert len(cuts) > 2 * len(STEPS)
    for number, cut in enumerate(cuts):
        folder = tmp_path / f"cut-{number}"
        folder.mkdir()
        shutil.copy(path, folder / "run.db")
        for extra in (0, 13):  # a torn frame after the whole ones, too
            (folder / "run.db-wal").write_bytes(content[: cut + extra])
            _check(folder / "run.db", sum(size <= cut for size in sizes))
    journal.close()


def _check(path: Path, acknowledged: int) -> None:
    try:
        with open_journal(path) as again:
            done = [row.step for row in again.intents() if row.outcome == "done"]
    except Exception:
        # Before the tables were committed there is no journal yet, and nothing in it.
        assert acknowledged == 0
        return
    assert done[:acknowledged] == [step.step for step in STEPS[:acknowledged]]
    with sqlite3.connect(path) as other:
        assert other.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
    other.close()

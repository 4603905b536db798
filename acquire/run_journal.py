"""The run journal ``run.db``: what is written and read in it. Acts (SQLite).

With ``journal_file`` (which creates and opens it) the only place with SQL. WAL with
``synchronous=FULL`` while open; one file again once closed. One connection behind a
lock serves the controller's threads. A writer is committed when it returns,
unless it is called inside ``transaction()``, which commits or undoes all of it.
"""

import json
import sqlite3
import threading
from collections.abc import Iterable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import astuple, replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Self

from pitchsweep.acquire.journal_rows import (
    FaultRow,
    FrameRow,
    GateRow,
    IntentRow,
    MarkRow,
    Outcome,
    ReadingRow,
    RejectedRow,
    SpotRow,
    StepSpots,
)
from pitchsweep.acquire.sweep_plan import Step


def utc_now() -> str:
    """The time now, UTC, ISO 8601 to the millisecond."""
    return datetime.now(UTC).isoformat(timespec="milliseconds")


class RunJournal:
    """An open journal. ``journal_file`` makes them."""

    def __init__(self, connection: sqlite3.Connection, path: Path) -> None:
        self.path = path
        self._connection = connection
        self._lock = threading.RLock()
        self._depth = 0

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @contextmanager
    def transaction(self) -> Iterator[None]:
        """Everything written inside is committed together, or undone on an error.

        May be nested: an inner one that fails undoes its own part only.
        """
        with self._lock:
            name = f"level_{self._depth}"
            self._run("BEGIN IMMEDIATE" if self._depth == 0 else f"SAVEPOINT {name}")
            self._depth += 1
            try:
                yield
            except BaseException:
                self._depth -= 1
                self._undo(name)
                raise
            self._depth -= 1
            self._run("COMMIT" if self._depth == 0 else f"RELEASE {name}")

    def _undo(self, name: str) -> None:
        if self._depth == 0:
            # SQLite may have undone everything by itself (disk full).
            if self._connection.in_transaction:
                self._run("ROLLBACK")
            return
        with suppress(sqlite3.Error):
            self._run(f"ROLLBACK TO {name}")
            self._run(f"RELEASE {name}")

    def set_meta(self, key: str, value: str) -> None:
        """Sets one fact about the run."""
        self._write("INSERT OR REPLACE INTO run_meta VALUES (?, ?)", (key, value))

    def meta(self) -> dict[str, str]:
        """Every fact about the run."""
        return dict(self._read("SELECT key, value FROM run_meta"))

    def begin_session(self, owner: str) -> int:
        """Numbers a new session of ``owner`` from 1 and returns the number."""
        return self._write(
            "INSERT INTO sessions (started_utc, owner) VALUES (?, ?)",
            (utc_now(), owner),
        )

    def end_session(self, session: int, ending: str) -> None:
        """Says how a session ended: ``done``, ``stopped: ...``, ``tripped: ...``."""
        self._write(
            "UPDATE sessions SET ended_utc = ?, ending = ? WHERE session = ?",
            (utc_now(), ending, session),
        )

    def sessions(self) -> list[tuple[int, str, str, str | None, str | None]]:
        """(session, started_utc, owner, ended_utc, ending), oldest first."""
        return self._read(
            "SELECT session, started_utc, owner, ended_utc, ending FROM sessions "
            "ORDER BY session"
        )

    def intend(self, session: int, step: Step) -> int:
        """Commits that ``step`` is about to be done; returns the intent's number."""
        return self._write(
            "INSERT INTO intents (session, kind, step, mount, mount_deg, laser, "
            "stage_deg, planned_s, utc) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
            (
                session,
                step.kind,
                step.step,
                step.mount,
                step.mount_deg,
                step.laser,
                step.stage_deg,
                step.planned_s,
                utc_now(),
            ),
        )

    def acknowledge(
        self,
        intent: int,
        *,
        readback_deg: float,
        bench_s: float,
        frames: Iterable[FrameRow] = (),
        spots: StepSpots | None = None,
    ) -> None:
        """Commits at once that an intent is done, with its frames and spots."""
        with self.transaction():
            for frame in frames:
                self._write(
                    "INSERT INTO frames (intent, file, sha256, kind, exposure_ms, "
                    "mount, laser, repeat, step, exposure, planned_s) "
                    "VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
                    (intent, *astuple(frame)),
                )
            if spots is not None:
                self.record_spots(intent, spots)
            self._outcome(intent, "done", readback_deg, bench_s, "")

    def fail(self, intent: int, detail: str) -> None:
        """Commits that an intent came to nothing."""
        self._outcome(intent, "failed", None, None, detail)

    def void(self, intent: int, detail: str) -> None:
        """Commits that an intent which was done does not count after all."""
        self._write(
            "UPDATE outcomes SET outcome = 'failed', detail = ?, utc = ? "
            "WHERE intent = ?",
            (detail, utc_now(), intent),
        )

    def record_reading(self, intent: int, row: ReadingRow) -> None:
        """Commits what sensors and zero order said at an intent's step."""
        self._write(
            f"INSERT OR REPLACE INTO readings VALUES ({', '.join('?' * 9)})",
            (intent, *astuple(row)),
        )

    def readings(self) -> dict[int, ReadingRow]:
        """Intent -> what sensors and zero order said."""
        rows = self._read("SELECT * FROM readings ORDER BY intent")
        return {row[0]: ReadingRow(*row[1:]) for row in rows}

    def _outcome(
        self,
        intent: int,
        outcome: Outcome,
        readback_deg: float | None,
        bench_s: float | None,
        detail: str,
    ) -> None:
        self._write(
            "INSERT INTO outcomes VALUES (?, ?, ?, ?, ?, ?)",
            (intent, outcome, readback_deg, bench_s, detail, utc_now()),
        )

    def record_spots(self, intent: int, found: StepSpots) -> None:
        """Commits (or replaces) what an intent's exposures gave."""
        marks = json.dumps([astuple(mark) for mark in found.marks])
        rejected = json.dumps([astuple(item) for item in found.rejected])
        with self.transaction():
            self._write("DELETE FROM spots WHERE intent = ?", (intent,))
            self._write("DELETE FROM spot_searches WHERE intent = ?", (intent,))
            self._write(
                "INSERT INTO spot_searches VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
                (
                    intent,
                    found.background_dn,
                    found.noise_dn,
                    rejected,
                    found.speckle_contrast,
                    found.grain_fwhm_px,
                    int(found.speckle_measured),
                    marks,
                ),
            )
            for number, spot in enumerate(found.spots):
                self._write(
                    f"INSERT INTO spots VALUES ({', '.join('?' * 18)})",
                    (intent, number, *astuple(spot)),
                )

    def record_gate(self, row: GateRow) -> None:
        """Commits one change of the gate."""
        self._write(
            "INSERT INTO gate_events (utc, step, state, event, detail) "
            "VALUES (?, ?, ?, ?, ?)",
            (row.utc, row.step, row.state, row.event, row.detail),
        )

    def record_fault(
        self, what: str, detail: str, policy: str, step: int | None = None
    ) -> None:
        """Commits one fault and what was done about it."""
        self._write(
            "INSERT INTO faults (utc, step, what, detail, policy) "
            "VALUES (?, ?, ?, ?, ?)",
            (utc_now(), step, what, detail, policy),
        )

    def intents(self) -> list[IntentRow]:
        """Every intent with its outcome, oldest first."""
        rows = self._read(
            "SELECT i.intent, i.session, i.kind, i.step, i.mount, i.mount_deg, "
            "i.laser, i.stage_deg, i.planned_s, o.outcome, o.readback_deg, o.bench_s "
            "FROM intents i LEFT JOIN outcomes o ON o.intent = i.intent "
            "ORDER BY i.intent"
        )
        return [IntentRow(*row) for row in rows]

    def frames(self, intent: int) -> list[FrameRow]:
        """The frames of an intent in the order they were taken."""
        rows = self._read(
            "SELECT file, sha256, kind, exposure_ms, mount, laser, repeat, step, "
            "exposure, planned_s FROM frames WHERE intent = ? ORDER BY frame",
            (intent,),
        )
        return [FrameRow(*row) for row in rows]

    def spots(self, intent: int) -> StepSpots | None:
        """What an intent's exposures gave; None if it was never recorded."""
        heads = self._read(
            "SELECT background_dn, noise_dn, rejected, speckle_contrast, "
            "grain_fwhm_px, speckle_measured, marks FROM spot_searches "
            "WHERE intent = ?",
            (intent,),
        )
        if not heads:
            return None
        background_dn, noise_dn, rejected, *speckle, marks = heads[0]
        contrast, grain_px, measured = speckle
        rows = self._read(
            "SELECT x_mm, y_mm, ux_mm, uy_mm, cxy_mm2, brightness, column_px, "
            "row_px, sigma_major_px, sigma_minor_px, snr, exposure_ms, saturated, "
            "shared_xx_mm2, shared_xy_mm2, shared_yy_mm2 "
            "FROM spots WHERE intent = ? ORDER BY number",
            (intent,),
        )
        return StepSpots(
            spots=tuple(_spot(row) for row in rows),
            rejected=tuple(RejectedRow(*item) for item in json.loads(rejected)),
            background_dn=background_dn,
            noise_dn=noise_dn,
            speckle_contrast=contrast,
            grain_fwhm_px=grain_px,
            speckle_measured=bool(measured),
            marks=tuple(MarkRow(*item) for item in json.loads(marks)),
        )

    def gate_events(self) -> list[GateRow]:
        """Every change of the gate, oldest first."""
        rows = self._read(
            "SELECT utc, step, state, event, detail FROM gate_events ORDER BY number"
        )
        return [GateRow(*row) for row in rows]

    def faults(self) -> list[FaultRow]:
        """Every fault, oldest first."""
        rows = self._read(
            "SELECT utc, step, what, detail, policy FROM faults ORDER BY number"
        )
        return [FaultRow(*row) for row in rows]

    def close(self) -> None:
        """Folds the write-ahead log in, leaves one file. Safe to call twice."""
        with self._lock:
            # A reader elsewhere, or a full disk, may keep the log file: harmless.
            with suppress(sqlite3.Error):
                self._connection.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchall()
                self._connection.execute("PRAGMA journal_mode=DELETE").fetchall()
            self._connection.close()

    def _run(self, statement: str) -> None:
        self._connection.execute(statement)

    def _write(self, statement: str, values: tuple[Any, ...]) -> int:
        with self._lock:
            cursor = self._connection.execute(statement, values)
            return int(cursor.lastrowid or 0)

    def _read(self, statement: str, values: tuple[Any, ...] = ()) -> list[Any]:
        with self._lock:
            return self._connection.execute(statement, values).fetchall()


def _spot(row: tuple[Any, ...]) -> SpotRow:
    found = SpotRow(*row)
    flag = found.saturated
    return replace(found, saturated=None if flag is None else bool(flag))

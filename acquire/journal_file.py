"""Creates and opens ``run.db``. This module acts (SQLite).

Refuses a folder that does not honour locking, and any file that is not a sound
journal of this version.
"""

import os
import sqlite3
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.journal_schema import APPLICATION_ID, SCHEMA_VERSION, TABLES
from pitchsweep.acquire.run_journal import RunJournal

BUSY_S = 5.0
ELSEWHERE = "keep runs on a local disk: --runs DIR"


def create_journal(path: Path) -> RunJournal:
    """A new journal at ``path``, which must not exist.

    Raises RunRefused if it exists or its folder does not honour locking.
    """
    if path.exists():
        raise RunRefused(path, "a journal is there already", "resume that run instead")
    connection = _connect(path)
    try:
        _probe_locking(connection, path)
        _set_pragmas(connection, path)
        connection.executescript(f"BEGIN;{TABLES}COMMIT;")
        connection.execute(f"PRAGMA application_id={APPLICATION_ID}")
        connection.execute(f"PRAGMA user_version={SCHEMA_VERSION}")
    except BaseException:
        connection.close()
        raise
    return RunJournal(connection, path)


def open_journal(path: Path, *, read_only: bool = False) -> RunJournal:
    """The journal at ``path``.

    ``read_only`` serves analysis: nothing is written into it, and its folder may be
    one in which nobody may write. Raises RunRefused when the file is missing, damaged,
    foreign or of another version.
    """
    if not path.is_file():
        raise RunRefused(path, "no run journal here", "give the folder of a run")
    connection: sqlite3.Connection | None = None
    try:
        connection = _connect_to_read(path) if read_only else _connect(path)
        _check_identity(connection, path)
        if read_only:
            connection.execute("PRAGMA query_only=1")
        else:
            _set_pragmas(connection, path)
        return RunJournal(connection, path)
    except sqlite3.OperationalError as error:
        _close(connection)
        raise RunRefused(path, f"the journal cannot be opened ({error})") from None
    except sqlite3.DatabaseError as error:
        _close(connection)
        raise RunRefused(
            path,
            f"not a run journal, or damaged ({error})",
            "restore run.db from a copy; frames/ and job.yaml may still be good",
        ) from None
    except RunRefused:
        _close(connection)
        raise


def _connect_to_read(path: Path) -> sqlite3.Connection:
    """A connection for reading; where the folder is sealed, one that needs no file."""
    if os.access(path.parent, os.W_OK):
        return _connect(path)
    ahead = path.with_name(f"{path.name}-wal")
    if ahead.exists() and ahead.stat().st_size:
        raise RunRefused(
            path,
            "it was not closed, and its folder cannot be written to",
            "copy the run folder to where you may write, then try again",
        )
    place = f"{path.resolve().as_uri()}?mode=ro&immutable=1"
    return sqlite3.connect(place, uri=True, isolation_level=None)


def _close(connection: sqlite3.Connection | None) -> None:
    if connection is not None:
        connection.close()


def _connect(path: Path, timeout_s: float = BUSY_S) -> sqlite3.Connection:
    return sqlite3.connect(
        path, timeout=timeout_s, isolation_level=None, check_same_thread=False
    )


def _set_pragmas(connection: sqlite3.Connection, path: Path) -> None:
    mode = connection.execute("PRAGMA journal_mode=WAL").fetchone()[0]
    if str(mode).lower() != "wal":
        raise RunRefused(
            path.parent, "this folder cannot hold a write-ahead journal", ELSEWHERE
        )
    connection.execute("PRAGMA synchronous=FULL")
    connection.execute("PRAGMA foreign_keys=ON")


def _probe_locking(connection: sqlite3.Connection, path: Path) -> None:
    """Holds a write lock and checks that a second connection is kept out."""
    other = _connect(path, timeout_s=0.0)
    try:
        connection.execute("BEGIN EXCLUSIVE")
        other.execute("BEGIN EXCLUSIVE")
        other.execute("ROLLBACK")
    except sqlite3.OperationalError as error:
        if not connection.in_transaction:
            raise RunRefused(
                path.parent, f"this folder cannot hold a journal ({error})", ELSEWHERE
            ) from None
        return
    finally:
        other.close()
        if connection.in_transaction:
            connection.execute("ROLLBACK")
    raise RunRefused(
        path.parent,
        "this folder does not honour file locking (a network folder?)",
        ELSEWHERE,
    )


def _check_identity(connection: sqlite3.Connection, path: Path) -> None:
    identity = connection.execute("PRAGMA application_id").fetchone()[0]
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if identity != APPLICATION_ID:
        raise RunRefused(path, "an SQLite file, but not a run journal")
    if version != SCHEMA_VERSION:
        raise RunRefused(
            path,
            f"journal of version {version}; this program reads {SCHEMA_VERSION}",
            "use the version of the program that made it",
        )
    problem = connection.execute("PRAGMA quick_check(1)").fetchone()[0]
    if problem != "ok":
        raise RunRefused(path, f"the journal is damaged ({problem})")

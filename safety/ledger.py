"""The safety ledger on disk: appends durably, repairs a torn tail, verifies. Acts.

Every append takes a lock beside the file, reads the last line, adds one and waits for
the disk. A last line without its end (power cut) is cut off, or completed when it is
whole, and an entry records that. A last line that is whole but wrong is left alone:
LedgerBroken.
"""

import hashlib
import os
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import IO

from pitchsweep.safety.ledger_chain import (
    Entry,
    Judge,
    LedgerCheck,
    Signed,
    check_lines,
    entry_line,
    next_entry,
    read_entry,
)
from pitchsweep.safety.safety_errors import LedgerBroken

_CHUNK = 65536
Sign = Callable[[str], Sequence[Signed]]
"""An entry's hash -> the signatures over it."""


class Ledger:
    """An append-only ledger file; the object holds a path and no open file."""

    def __init__(self, path: Path) -> None:
        self.path = path

    def append(
        self,
        kind: str,
        data: Mapping[str, object],
        utc: str | None = None,
        *,
        sign: Sign | None = None,
        before_write: Callable[[Entry], None] | None = None,
    ) -> Entry:
        """Adds an entry, durable on return, and gives it back.

        ``data`` holds JSON values; ``utc`` defaults to now; ``sign`` gives the
        signatures; ``before_write`` sees the entry while no other program can write,
        and keeps it out by raising. Raises OSError when the disk refuses, LedgerBroken
        when the last whole line is wrong.
        """
        self.path.parent.mkdir(parents=True, exist_ok=True)
        is_new = not self.path.exists()
        with _locked(self.path), open(self.path, "a+b") as file:
            last = self._repaired_tail(file)
            entry = next_entry(last, kind=kind, data=data, utc=utc or utc_text())
            if sign is not None:
                entry = replace(entry, signed=tuple(sign(entry.hash)))
            if before_write is not None:
                before_write(entry)
            _write_durably(file, entry_line(entry))
        if is_new:
            _sync_folder(self.path.parent)
        return entry

    def verify(
        self, known: Mapping[int, str] | None = None, judge: Judge | None = None
    ) -> LedgerCheck:
        """Walks the whole file; an absent file is an empty ledger.

        ``known``: heads kept elsewhere, entry number -> hash, that must be met;
        ``judge`` is asked about every entry.
        """
        if not self.path.exists():
            return check_lines([], known=known)
        with open(self.path, "rb") as file:
            return _check_file(file, known, judge)

    def _repaired_tail(self, file: IO[bytes]) -> Entry | None:
        line, torn = _tail(file)
        last = self._read(line)
        if not torn:
            return last
        try:
            entry = read_entry(torn)
            how = "completed"
            _write_durably(file, b"\n")
        except ValueError:
            entry = None
            how = "cut off"
            file.truncate(file.seek(0, os.SEEK_END) - len(torn))
            os.fsync(file.fileno())
        repaired = next_entry(
            entry or last,
            kind="torn-line-repaired",
            data={
                "how": how,
                "bytes": len(torn),
                "sha256": hashlib.sha256(torn).hexdigest(),
            },
            utc=utc_text(),
        )
        _write_durably(file, entry_line(repaired))
        return repaired

    def _read(self, line: bytes) -> Entry | None:
        if not line:
            return None
        try:
            return read_entry(line)
        except ValueError as error:
            number = self.verify().count + 1
            raise LedgerBroken(str(self.path), number, str(error)) from error


def verify(path: Path, known: Mapping[int, str] | None = None) -> LedgerCheck:
    """What a walk through the ledger at ``path`` finds, first broken entry named."""
    return Ledger(path).verify(known)


def utc_text(utc_s: float | None = None) -> str:
    """UTC as ISO 8601 text to the millisecond; ``utc_s`` defaults to now."""
    when = datetime.now(UTC) if utc_s is None else datetime.fromtimestamp(utc_s, UTC)
    return when.isoformat(timespec="milliseconds").replace("+00:00", "Z")


def _check_file(
    file: IO[bytes], known: Mapping[int, str] | None, judge: Judge | None
) -> LedgerCheck:
    torn = 0

    def whole_lines() -> Iterator[bytes]:
        nonlocal torn
        for line in file:
            if not line.endswith(b"\n"):
                torn = len(line)
                return
            yield line[:-1]

    check = check_lines(whole_lines(), known=known, judge=judge)
    return LedgerCheck(check.count, check.head, check.broken_entry, check.reason, torn)


def _tail(file: IO[bytes]) -> tuple[bytes, bytes]:
    """The last whole line and what follows it, both without a line feed."""
    end = file.seek(0, os.SEEK_END)
    start, data = end, b""
    while start > 0 and data.count(b"\n") < 2:
        start = max(0, start - _CHUNK)
        file.seek(start)
        data = file.read(end - start)
    before, feed, torn = data.rpartition(b"\n")
    if not feed:
        return b"", data
    return before.rpartition(b"\n")[2], torn


def _write_durably(file: IO[bytes], data: bytes) -> None:
    file.write(data)
    file.flush()
    os.fsync(file.fileno())


def _sync_folder(folder: Path) -> None:
    if os.name != "posix":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


@contextmanager
def _locked(path: Path) -> Iterator[None]:
    """Holds the lock file beside the ledger; on systems without flock, none."""
    try:
        import fcntl
    except ImportError:
        yield
        return
    with open(path.with_name(path.name + ".lock"), "ab") as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        yield

"""One controller a run: a lock that dies with its owner and names it. Acts (disk)."""

import json
import os
import socket
import sys
from collections.abc import Callable
from contextlib import suppress
from io import TextIOWrapper
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.run_journal import utc_now

NAME = "run.lock"


class RunLock:
    """Holds ``run.lock`` until released; the system lets go when the process dies."""

    def __init__(self, handle: TextIOWrapper, owner: str) -> None:
        self._handle = handle
        self.owner = owner

    def release(self) -> None:
        """Lets go, leaving no name behind. Safe to call twice."""
        if self._handle.closed:
            return
        with suppress(OSError):
            self._handle.seek(0)
            self._handle.truncate()
        self._handle.close()


def take_run_lock(run: Path) -> RunLock:
    """The lock of a run folder. Raises RunRefused naming the owner if it is held."""
    lock, _ = lock_file(
        run / NAME,
        lambda owner: RunRefused(
            run,
            f"another controller works on this run: {owner}",
            "wait for it, or stop it with Ctrl-C where it runs",
        ),
    )
    return lock


def lock_file(path: Path, refusal: Callable[[str], RunRefused]) -> tuple[RunLock, str]:
    """The lock at ``path``, and who left it behind without letting go (or nobody).

    Raises what ``refusal`` makes of the owner's name while it is held. The system lets
    go of a lock whose owner died: what such a lock says is only history.
    """
    # Not inherited by child processes: they must not keep the lock alive.
    handle = open(path, "a+", encoding="utf-8")
    if not _lock(handle):
        owner = _owner_written(handle)
        handle.close()
        raise refusal(owner)
    handle.seek(0)
    left_by = _owner_written(handle) if handle.read(1) else ""
    owner = describe_owner()
    handle.seek(0)
    handle.truncate()
    handle.write(owner + "\n")
    handle.flush()
    return RunLock(handle, owner), left_by


def describe_owner() -> str:
    """This process as JSON: pid, host, since (UTC)."""
    return json.dumps(
        {"pid": os.getpid(), "host": socket.gethostname(), "since": utc_now()}
    )


def _owner_written(handle: TextIOWrapper) -> str:
    try:
        handle.seek(0)
        owner = json.loads(handle.readline())
        return f"pid {owner['pid']} on {owner['host']} since {owner['since']}"
    except (OSError, ValueError, KeyError, TypeError):
        return "owner unknown"


if sys.platform == "win32":

    def _lock(handle: TextIOWrapper) -> bool:
        import msvcrt

        try:
            # Far beyond the text, so that the owner stays readable.
            handle.seek(1 << 20)
            msvcrt.locking(handle.fileno(), msvcrt.LK_NBLCK, 1)
        except OSError:
            return False
        return True

else:

    def _lock(handle: TextIOWrapper) -> bool:
        import fcntl

        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            return False
        except OSError as error:
            raise RunRefused(
                Path(handle.name).parent,
                f"this folder does not honour file locking ({error.strerror})",
                "keep runs on a local disk: --runs DIR",
            ) from error
        return True

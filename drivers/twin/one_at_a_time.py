"""One twin works in a folder at a time; a successor asks an orphan to leave (acts)."""

import os
import time
from pathlib import Path

LOCK_NAME = "twin.lock"
SUCCESSOR_NAME = "successor"
LONGEST_WAIT_S = 12.0
POLL_S = 0.02


class FolderInUse(Exception):
    """Raised when another twin does not leave the folder in time."""

    def __init__(self, directory: Path) -> None:
        super().__init__(f"another twin works in {directory}")


def hold_folder(directory: Path) -> int:
    """The descriptor that holds the folder's lock; keep it open.

    Waits for a twin whose controller is gone: it leaves early when it sees that a
    successor waits and its light is out. FolderInUse after LONGEST_WAIT_S.
    """
    import fcntl

    held_fd = os.open(directory / LOCK_NAME, os.O_RDWR | os.O_CREAT, 0o644)
    deadline_s = time.monotonic() + LONGEST_WAIT_S
    waiting = directory / SUCCESSOR_NAME
    while True:
        try:
            fcntl.flock(held_fd, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            waiting.touch()
        else:
            waiting.unlink(missing_ok=True)
            return held_fd
        if time.monotonic() > deadline_s:
            os.close(held_fd)
            raise FolderInUse(directory)
        time.sleep(POLL_S)


def successor_waits(directory: Path) -> bool:
    """Whether another twin asks for the folder."""
    return (directory / SUCCESSOR_NAME).exists()

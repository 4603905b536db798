"""Looks, beside the tick, whether watched files are still as they were (acts)."""

import hashlib
import threading
from collections.abc import Mapping
from pathlib import Path

PERIOD_S = 0.25


class FileWatch:
    """Reads the files over and over in a thread; ``failure`` is empty while all agree.

    ``watched``: path -> SHA-256 in hexadecimal; empty means that the file must stay
    absent. A file that cannot be read has changed.
    """

    def __init__(self, watched: Mapping[str, str]) -> None:
        self.failure = ""
        self._watched = dict(watched)
        self._ending = threading.Event()
        self.failure = self._look()
        if self._watched and not self.failure:
            threading.Thread(target=self._work, name="files", daemon=True).start()

    def close(self) -> None:
        """Looks no more."""
        self._ending.set()

    def _work(self) -> None:
        while not (self.failure or self._ending.wait(PERIOD_S)):
            self.failure = self._look()

    def _look(self) -> str:
        for path, digest in self._watched.items():
            found = file_sha256(Path(path))
            if found != digest:
                return f"{path} was {_what_happened(found, digest)} since the start"
        return ""


def file_sha256(path: Path) -> str:
    """SHA-256 of the file in hexadecimal; empty where there is none to be read."""
    try:
        return hashlib.sha256(path.read_bytes()).hexdigest()
    except OSError:
        return ""


def _what_happened(found: str, digest: str) -> str:
    if not found:
        return "removed"
    return "changed" if digest else "written"

"""The unit's own log: one JSON object a line, on disk at once (acts).

``monotonic_s`` is the system-wide monotonic clock (``time.monotonic``), so that any
process of this machine can compare its own times with it.
"""

import datetime
import json
import threading
import time
from pathlib import Path


class UnitLog:
    """Appends to ``path``; safe to use from several threads."""

    def __init__(self, path: Path) -> None:
        self._file = path.open("a", encoding="utf-8", buffering=1)
        self._lock = threading.Lock()

    def write(self, what: str, value: str, why: str = "") -> None:
        """One change: ``what`` became ``value``, and ``why``."""
        row = {
            "monotonic_s": time.monotonic(),
            "utc": datetime.datetime.now(datetime.UTC).isoformat(),
            "what": what,
            "value": value,
            "why": why,
        }
        with self._lock:
            self._file.write(json.dumps(row) + "\n")
            self._file.flush()

    def close(self) -> None:
        """Closes the file."""
        with self._lock:
            self._file.close()

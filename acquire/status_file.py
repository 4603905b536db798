"""``status.json``: where a sweep stands, for anybody to read. Acts (disk).

Replaced whole at every step; nothing that computes ever reads it. It is not synced to
the disk: after a power cut the journal tells, not this file.
"""

import json
import os
from contextlib import suppress
from pathlib import Path
from typing import Any

from pitchsweep.acquire.run_journal import utc_now

STATUS = "status.json"


class StatusFile:
    """Writes ``status.json`` in a run folder; a full disk is ignored."""

    def __init__(self, run: Path) -> None:
        self._path = run / STATUS
        self._values: dict[str, Any] = {"run": run.name, "pid": os.getpid()}

    def update(self, **values: Any) -> None:
        """Changes some values and replaces the file."""
        self._values.update(values, utc=utc_now())
        beside = self._path.with_name(f".{STATUS}.part")
        with suppress(OSError):
            beside.write_text(
                json.dumps(self._values, indent=1) + "\n", encoding="utf-8"
            )
            os.replace(beside, self._path)

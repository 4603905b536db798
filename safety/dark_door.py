"""The guard's ear for ``pitchsweep dark``: a socket in the user's folder (acts)."""

import json
import os
import queue
import socket
import threading
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Self

from pitchsweep.safety.running_guards import guards_folder, own_folder

ANSWER_WAIT_S = 1.0
Answer = Callable[[str, bool], None]
"""Takes the gate's state and whether the unit shows light."""


class DarkDoor:
    """Makes this guard findable; every connection calls ``on_dark`` with an answer.

    ``on_dark`` must return at once. Raises OSError where the folder cannot be used: a
    guard that cannot be told to stop must not start.
    """

    def __init__(
        self, *, run: str, unit: str, on_dark: Callable[[Answer], None]
    ) -> None:
        self._on_dark = on_dark
        folder = own_folder(guards_folder())
        self._note = folder / f"{os.getpid()}.json"
        self._path = self._note.with_suffix(".socket")
        self._socket = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        try:
            self._path.unlink(missing_ok=True)
            self._socket.bind(str(self._path))
            self._socket.listen(8)
            _write_whole(self._note, {"pid": os.getpid(), "run": run, "unit": unit})
        except OSError:
            self.close()
            raise
        threading.Thread(target=self._serve, name="dark", daemon=True).start()

    def close(self) -> None:
        """Removes what makes the guard findable."""
        self._socket.close()
        for path in (self._note, self._path):
            with suppress(OSError):
                path.unlink()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _serve(self) -> None:
        while True:
            try:
                caller, _ = self._socket.accept()
            except OSError:
                return
            with caller, suppress(OSError):
                self._answer(caller)

    def _answer(self, caller: socket.socket) -> None:
        said: queue.SimpleQueue[tuple[str, bool]] = queue.SimpleQueue()
        self._on_dark(lambda state, light_on: said.put((state, light_on)))
        try:
            state, light_on = said.get(timeout=ANSWER_WAIT_S)
        except queue.Empty:
            return
        caller.settimeout(ANSWER_WAIT_S)
        answer = {"state": state, "light_on": light_on}
        caller.sendall(json.dumps(answer).encode("utf-8") + b"\n")


def _write_whole(path: Path, values: dict[str, object]) -> None:
    beside = path.with_suffix(".new")
    beside.write_text(json.dumps(values) + "\n", encoding="utf-8")
    beside.replace(path)

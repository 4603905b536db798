"""SIGINT, SIGTERM and SIGHUP: dark at once, then an orderly stop. Acts (signals).

The handler only notes the signal: a thread of its own asks for dark, because the main
thread may be anywhere, inside a question to a device included. A second SIGINT: dark,
then the process ends at once.
"""

import os
import signal
import threading
from collections.abc import Callable
from contextlib import suppress
from queue import SimpleQueue
from types import FrameType
from typing import Any, Self

NAMES = ("SIGINT", "SIGTERM", "SIGHUP")
EXIT_STOPPED = 5
DARK_WITHIN_S = 1.0


class StopRequested(Exception):
    """Raised by ``StopSignals.check``; never leaves the sweep."""


class StopSignals:
    """Notes requests to stop while its ``with`` block runs.

    ``on_request`` (set it as soon as there is a gate) is called in a thread at every
    request and must be safe there.
    """

    def __init__(self, leave: Callable[[int], Any] = os._exit) -> None:
        self.on_request: Callable[[], None] | None = None
        self.reason = ""
        self._leave = leave
        # SimpleQueue.put is safe in a signal handler; locks and events are not.
        self._requests: SimpleQueue[str | None] = SimpleQueue()
        self._seen = 0
        self._before: dict[int, Any] = {}
        self._thread = threading.Thread(target=self._serve, daemon=True)

    def __enter__(self) -> Self:
        self._thread.start()
        if threading.current_thread() is threading.main_thread():
            for name in NAMES:
                number = getattr(signal, name, None)
                if number is not None:
                    self._before[number] = signal.signal(number, self._handle)
        return self

    def __exit__(self, *_: object) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)
        self._requests.put(None)

    def request(self, reason: str) -> None:
        """Asks for a stop from inside the program."""
        self.reason = self.reason or reason
        self._requests.put(reason)

    def check(self) -> None:
        """Raises StopRequested once a stop was asked for."""
        if self.reason:
            raise StopRequested(self.reason)

    def _handle(self, number: int, _: FrameType | None) -> None:
        self.request(signal.Signals(number).name)

    def _serve(self) -> None:
        while (reason := self._requests.get()) is not None:
            self._seen += 1
            if self._seen > 1 and reason == "SIGINT":
                # Whatever holds the gate up, the unit's keep-alive ends the light.
                last = threading.Thread(target=self._go_dark, daemon=True)
                last.start()
                last.join(DARK_WITHIN_S)
                self._leave(EXIT_STOPPED)
            self._go_dark()

    def _go_dark(self) -> None:
        # The main thread meets the same fault and reports it.
        with suppress(Exception):
            if self.on_request is not None:
                self.on_request()

"""Keys of a terminal as they are pressed, without Enter and without echo. Acts.

Ctrl-C stays a signal. Whatever was typed while nobody looked is dropped: a press counts
for the moment in which it is made.
"""

import os
import select
import sys
from contextlib import suppress
from typing import Any, Protocol, Self

MOST_BYTES = 4096


class Keys(Protocol):
    """Where presses come from."""

    def read(self, wait_s: float) -> str:
        """All that was pressed; waits up to ``wait_s`` for the first."""
        ...

    def drop(self) -> None:
        """Forgets what was pressed so far."""
        ...


class TerminalKeys:
    """Keys of the terminal at ``handle`` while its ``with`` block runs."""

    def __init__(self, handle: int | None = None) -> None:
        self._handle = sys.stdin.fileno() if handle is None else handle
        self._before: list[Any] | None = None

    def __enter__(self) -> Self:
        import termios
        import tty

        self._before = termios.tcgetattr(self._handle)
        tty.setcbreak(self._handle)
        return self

    def __exit__(self, *_: object) -> None:
        import termios

        if self._before is not None:
            # The terminal may be gone; then there is nothing to put back.
            with suppress(termios.error):
                termios.tcsetattr(self._handle, termios.TCSAFLUSH, self._before)

    def read(self, wait_s: float) -> str:
        """All that was pressed; waits up to ``wait_s`` for the first.

        A terminal that is gone reads as ``q``: nobody holds a key there.
        """
        if not select.select([self._handle], [], [], wait_s)[0]:
            return ""
        try:
            data = os.read(self._handle, MOST_BYTES)
        except OSError:
            data = b""
        return data.decode("utf-8", errors="replace") if data else "q"

    def drop(self) -> None:
        """Forgets what was pressed so far."""
        import termios

        with suppress(termios.error):
            termios.tcflush(self._handle, termios.TCIFLUSH)

"""The people at a real bench: asked at the terminal, and to move the door. Acts.

Whoever is asked types their name when it is done; nothing else goes on meanwhile, and
a request to stop is heard. Without a terminal nobody can be asked: the run stops there
and can be resumed.
"""

import select
import sys
from collections.abc import Callable
from typing import Protocol

from pitchsweep.acquire.stop_signals import StopRequested

LOOK_S = 0.2
DOOR_PATIENCE_S = 600.0
NO_TERMINAL = (
    "somebody is needed at the bench ({what}), and there is no terminal to ask at"
)


class People(Protocol):
    """Who can be asked: ``ask`` returns a name, ``patience_s`` is for the door."""

    patience_s: float

    def ask(self, what: str, check: Callable[[], None]) -> str: ...

    def open_interlock(self) -> None: ...

    def close_interlock(self) -> None: ...


class TerminalPeople:
    """People at this terminal; ``say`` shows them a line."""

    patience_s = DOOR_PATIENCE_S

    def __init__(self, say: Callable[[str], None]) -> None:
        self._say = say

    def ask(self, what: str, check: Callable[[], None]) -> str:
        """Who has done ``what``. ``check`` may raise while nobody answers.

        Raises StopRequested where there is no terminal, or it goes away.
        """
        if not sys.stdin.isatty():
            raise StopRequested(NO_TERMINAL.format(what=what))
        self._say(f"dark; at the bench: {what}; then type your name here, and Enter")
        while True:
            check()
            if not select.select([sys.stdin], [], [], LOOK_S)[0]:
                continue
            line = sys.stdin.readline()
            if not line:
                raise StopRequested(NO_TERMINAL.format(what=what))
            if name := " ".join(line.split()):
                return name
            self._say("a name is needed: who has done it?")

    def open_interlock(self) -> None:
        """Asks for the door to be opened; the guard sees it done."""
        self._say(
            "dark, shutter shut: open the door of the enclosure now, so that the guard"
            " sees its interlock"
        )

    def close_interlock(self) -> None:
        """Asks for the door to be closed."""
        self._say("leave the enclosure, nobody inside, and close its door")

"""Tells the user's command what happens. This module acts (processes, a thread).

One daemon thread runs the command for one message after the other, each with the JSON
message on its standard input and a time limit. Whatever the command does, the sweep
neither waits for it nor fails with it; a queue that is full drops the message.
"""

import json
import queue
import subprocess
import threading
from collections.abc import Callable
from typing import Any

from pitchsweep.acquire.run_journal import utc_now
from pitchsweep.configs.schedule_model import Schedule

MOST_WAITING = 50
LAST_WORDS_S = 2.0


class Teller:
    """Runs ``schedule.tell`` once a message; does nothing where none is given."""

    def __init__(
        self, schedule: Schedule, run: str, say: Callable[[str], None]
    ) -> None:
        self._command = list(schedule.tell)
        self._within_s = schedule.tell_within_s
        self._run = run
        self._say = say
        self._complained = False
        self._waiting: queue.Queue[dict[str, Any] | None] = queue.Queue(MOST_WAITING)
        self._thread = threading.Thread(target=self._serve, name="teller", daemon=True)
        if self._command:
            self._thread.start()

    def tell(self, what: str, text: str, **more: Any) -> None:
        """Hands over a message; ``what`` is finish, trip, pause, fault or stop."""
        if not self._command:
            return
        message = {"what": what, "text": text, "run": self._run, "utc": utc_now()}
        try:
            self._waiting.put_nowait({**message, **more})
        except queue.Full:
            self._complain("its queue is full")

    def end(self) -> None:
        """Gives the last messages a moment; then lets go of them."""
        if not self._command:
            return
        try:
            self._waiting.put_nowait(None)
        except queue.Full:
            return
        self._thread.join(LAST_WORDS_S)

    def _serve(self) -> None:
        while (message := self._waiting.get()) is not None:
            self._run_once(message)

    def _run_once(self, message: dict[str, Any]) -> None:
        text = json.dumps(message) + "\n"
        try:
            done = subprocess.run(
                self._command,
                input=text.encode("utf-8"),
                stdout=subprocess.DEVNULL,
                stderr=subprocess.DEVNULL,
                timeout=self._within_s,
                start_new_session=True,
                check=False,
            )
        except subprocess.TimeoutExpired:
            self._complain(f"it took more than {self._within_s:g} s and was ended")
        except Exception as error:
            self._complain(str(error))
        else:
            if done.returncode:
                self._complain(f"it ended with code {done.returncode}")

    def _complain(self, why: str) -> None:
        if not self._complained:
            self._complained = True
            self._say(f"the command of schedule.tell did not work: {why}")

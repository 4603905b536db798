"""Bench time, owned by the twin (acts).

At rehearsal speed it is a number that advances only by waits that are asked for; at
real speed it runs with the monotonic clock and a wait sleeps. Never used for safety.
"""

import threading
import time
from typing import Literal


class BenchTime:
    """Bench time in seconds, starting at ``start_s``."""

    def __init__(self, start_s: float, speed: Literal["rehearsal", "real"]) -> None:
        self._real = speed == "real"
        self._offset_s = start_s - (time.monotonic() if self._real else 0.0)
        self._lock = threading.Lock()

    def now_s(self) -> float:
        """The bench time."""
        return self._offset_s + (time.monotonic() if self._real else 0.0)

    def wait_until(self, begun_s: float, seconds: float) -> float:
        """Lets pass what is left of ``seconds`` since the bench time ``begun_s``.

        In rehearsal nothing else has passed meanwhile.
        """
        return self.wait(max(0.0, begun_s + seconds - self.now_s()))

    def wait(self, seconds: float) -> float:
        """Lets ``seconds`` (0 or more) pass; returns the bench time then."""
        if not seconds >= 0.0:
            raise ValueError(f"wait of {seconds} s: 0 or more")
        if self._real:
            time.sleep(seconds)
        else:
            with self._lock:
                self._offset_s += seconds
        return self.now_s()
